package ingest

// sample is one reading of one gauge or probe as it waits in memory. Of a
// probe mm holds the temperature in degrees Celsius and shown the relative
// humidity in percent.
type sample struct {
	wall, boot int64
	mm, shown  float64
	unit       string
	status     string
	kept       bool
}

// mostRemembered bounds the readings held of one gauge, whatever its rate: at
// 100 readings a second that is a minute and a half.
const mostRemembered = 8192

// memory holds the last readings of one gauge at full rate, so that what came
// just before a late mark or a jump can still be stored. It grows until it
// covers span, or to mostRemembered, and then allocates no more.
type memory struct {
	span  int64 // nanoseconds of the boot clock
	ring  []sample
	first uint64 // number of the oldest sample held
	next  uint64 // number the next sample gets
}

// push remembers s, forgetting the oldest samples where it must, but never the
// one before s.
func (m *memory) push(s sample) {
	for m.next-m.first > 1 && s.boot-m.at(m.first).boot > m.span {
		m.first++
	}
	if m.next-m.first == uint64(len(m.ring)) {
		if len(m.ring) < mostRemembered {
			m.grow()
		} else {
			m.first++
		}
	}
	m.ring[m.next&uint64(len(m.ring)-1)] = s
	m.next++
}

// at is the sample numbered n, which must be held. The pointer is good until
// the next push.
func (m *memory) at(n uint64) *sample { return &m.ring[n&uint64(len(m.ring)-1)] }

func (m *memory) grow() {
	larger := make([]sample, max(16, 2*len(m.ring)))
	for n := m.first; n < m.next; n++ {
		larger[n&uint64(len(larger)-1)] = *m.at(n)
	}
	m.ring = larger
}

// rebase moves the wall stamps of what has not been stored by delta, after the
// wall clock was stepped: their boot-time instants stand, and the new clock is
// the one that the block they may go into will name.
func (m *memory) rebase(delta int64) {
	for n := m.first; n < m.next; n++ {
		if s := m.at(n); !s.kept {
			s.wall += delta
		}
	}
}
