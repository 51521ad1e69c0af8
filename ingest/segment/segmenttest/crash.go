package segmenttest

import (
	"math/rand/v2"
	"slices"
)

// Crash returns a file system as a power cut at this moment could leave it.
// With keep, all unsynced bytes and names survive (as when only the process was
// killed); otherwise a random part does, cut, with zeros or old bytes in it.
func (m *FS) Crash(rng *rand.Rand, keep bool) *FS {
	m.mu.Lock()
	defer m.mu.Unlock()
	c := New()
	for d := range m.dirs {
		c.dirs[d] = true
	}
	names := make(map[string]*node, len(m.names))
	for n, f := range m.durable {
		names[n] = f
	}
	// Half of the crashes keep names in the order of their changes, as a
	// journal does; the others any of them, as POSIX allows.
	ops, any := len(m.pending), false
	if !keep {
		ops, any = rng.IntN(ops+1), rng.IntN(2) == 0
	}
	for i, op := range m.pending {
		if any && rng.IntN(2) == 0 || !any && i < ops {
			op.apply(names)
		}
	}
	for _, n := range slices.Sorted(func(yield func(string) bool) {
		for n := range names {
			if !yield(n) {
				return
			}
		}
	}) {
		data := names[n].crash(rng, keep)
		c.names[n] = &node{data: data, synced: slices.Clone(data)}
		c.durable[n] = c.names[n]
	}
	return c
}

func (op nameOp) apply(names map[string]*node) {
	if op.from != "" {
		delete(names, op.from)
	}
	if op.to != "" {
		names[op.to] = op.node
	}
}

// crash returns bytes that a power cut could leave: the synced ones, and of the
// rest nothing, a prefix, or a prefix with a stretch of zeros in it.
func (n *node) crash(rng *rand.Rand, keep bool) []byte {
	if keep {
		return slices.Clone(n.data)
	}
	out := slices.Clone(n.synced)
	more := len(n.data) - len(out)
	if more <= 0 {
		return out
	}
	start := len(out)
	out = append(out, n.data[start:start+rng.IntN(more+1)]...)
	if len(out) > start && rng.IntN(2) == 0 {
		from := start + rng.IntN(len(out)-start)
		to := from + rng.IntN(len(out)-from+1)
		clear(out[from:to])
	}
	return out
}
