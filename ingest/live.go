package ingest

import "runtime"

// writer is the goroutine between a live recorder and its disk. One batch is
// on its way at a time; what comes meanwhile gathers in the recorder.
type writer struct {
	todo chan *batch
	done chan outcome
	gone chan struct{}
}

func startWriter(s *store) *writer {
	w := &writer{todo: make(chan *batch, 1), done: make(chan outcome, 1), gone: make(chan struct{})}
	go func() {
		defer close(w.gone)
		// A thread of its own: a disk that stalls for seconds holds up no other
		// goroutine, and fault injection can count the calls of this one.
		runtime.LockOSThread()
		for b := range w.todo {
			w.done <- s.try(b)
		}
	}()
	return w
}

// stop waits for the batch on its way and for the goroutine's end. It returns
// the outcome nobody collected, if there is one.
func (w *writer) stop() outcome {
	close(w.todo)
	<-w.gone
	select {
	case o := <-w.done:
		return o
	default:
		return outcome{}
	}
}
