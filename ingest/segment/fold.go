package segment

import (
	"errors"
	"io"
	"sync"
)

// Fold passes every batch of the Reader through work and then through collect.
// work runs on several batches at once, each with a state of its own that is
// used again for later batches; collect runs on one at a time, in the order of
// the batches, so that what it makes does not depend on the number of cores.
// The batch and the state are theirs until collect returns.
//
// It uses up the Reader, whose Report is whole once Fold returned nil. Errors
// are those of collect, and a closed Reader.
func Fold[T any](r *Reader, work func(*Batch, *T), collect func(*Batch, *T) error) error {
	type flight struct {
		job   *job
		state T
		done  chan struct{}
	}
	// As many as there are workers: the Reader has room for as many again.
	ring := make([]flight, r.opts.Workers)
	todo := make(chan *flight, len(ring))
	var wg sync.WaitGroup
	for i := range ring {
		ring[i].done = make(chan struct{}, 1)
		wg.Go(func() {
			for f := range todo {
				work(&f.job.batch, &f.state)
				f.done <- struct{}{}
			}
		})
	}
	defer wg.Wait()
	defer close(todo)
	begun, ended := 0, 0
	land := func() error {
		f := &ring[ended%len(ring)]
		<-f.done
		err := collect(&f.job.batch, &f.state)
		r.free <- f.job
		ended++
		return err
	}
	for {
		j, err := r.advance()
		if err == io.EOF {
			break
		}
		if err != nil {
			return err
		}
		if begun-ended == len(ring) {
			if err := land(); err != nil {
				r.free <- j
				return err
			}
		}
		f := &ring[begun%len(ring)]
		f.job = j
		begun++
		todo <- f
	}
	for ended < begun {
		if err := land(); err != nil {
			return err
		}
	}
	return nil
}

// advance takes the next job that holds a record through the merger.
func (r *Reader) advance() (*job, error) {
	for {
		if r.closed {
			return nil, errors.New("the reader is closed")
		}
		j, ok := <-r.order
		if !ok {
			return nil, io.EOF
		}
		<-j.done
		r.merger.merge(j)
		if j.batch.Len() > 0 {
			return j, nil
		}
		r.free <- j
	}
}
