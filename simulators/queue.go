package simulators

// queue is a heap of instruments by the instant of their next frame, then by
// their place in the rig.
type queue []*instrument

func (q queue) before(i, j int) bool {
	a, b := q[i], q[j]
	return a.due < b.due || a.due == b.due && a.place < b.place
}

// enqueue puts an instrument that sends by itself into the queue.
func (s *Sim) enqueue(g *instrument) {
	if !s.asked || !g.askedFor() {
		s.queue.push(g)
	}
}

func (q *queue) push(g *instrument) {
	*q = append(*q, g)
	for i := len(*q) - 1; i > 0; {
		up := (i - 1) / 2
		if !q.before(i, up) {
			return
		}
		(*q)[i], (*q)[up] = (*q)[up], (*q)[i]
		i = up
	}
}

// sink puts the first back in order after its instant has changed.
func (q queue) sink() {
	for i := 0; ; {
		least := i
		for _, down := range []int{2*i + 1, 2*i + 2} {
			if down < len(q) && q.before(down, least) {
				least = down
			}
		}
		if least == i {
			return
		}
		q[i], q[least] = q[least], q[i]
		i = least
	}
}
