package history

import "sort"

// fineBins gathers one gauge's readings between given edges.
type fineBins struct {
	counter *counter
	edges   []int64
	bins    []Bin
	scratch []tally
	cell    int
	mixed   bool
}

func newFineBins(resolution float64, edges []int64) *fineBins {
	f := &fineBins{counter: newCounter(resolution), edges: edges}
	f.counter.start(edges[0], edges[1])
	return f
}

func (f *fineBins) add(t, v int64) {
	if t < f.edges[0] || t >= f.edges[len(f.edges)-1] {
		return
	}
	if t < f.counter.from || t >= f.counter.to {
		f.flush()
		f.mixed = f.mixed || t < f.counter.from
		f.cell = sort.Search(len(f.edges), func(i int) bool { return f.edges[i] > t }) - 1
		f.counter.start(f.edges[f.cell], f.edges[f.cell+1])
	}
	f.counter.add(t, v)
}

func (f *fineBins) flush() {
	if b, ok := f.counter.finish(&f.scratch); ok {
		f.bins = append(f.bins, b)
	}
}

func (f *fineBins) close() []Bin {
	f.flush()
	if f.mixed {
		v := series{bins: f.bins, behind: 1, counter: f.counter}
		v.finish()
		return v.bins
	}
	return f.bins
}
