package frame

import (
	"fmt"
	"regexp"
	"regexp/syntax"
	"unicode/utf8"
)

// matcher matches a whole text against a regular expression of Go's syntax,
// with the submatches package regexp would report, and allocates nothing once
// warm (package regexp allocates its result on every match). It runs the
// program that regexp/syntax compiles, by backtracking in order of priority,
// and visits each pair of instruction and position at most once, so the time
// is bounded by program size times text length.
type matcher struct {
	prog    *syntax.Prog
	names   []string // of the groups, as regexp.SubexpNames
	visited []uint32
	jobs    []job
	cap     []int
	width   int
}

// job is one branch not yet tried, or, where restore >= 0, a capture to undo.
type job struct {
	pc, pos int32
	restore int32
}

// newMatcher compiles the pattern; texts longer than longest never match.
func newMatcher(pattern string, longest int) (*matcher, error) {
	// regexp checks the syntax with its own, well known messages.
	re, err := regexp.Compile(pattern)
	if err != nil {
		return nil, fmt.Errorf("pattern: %w", err)
	}
	tree, err := syntax.Parse(`\A(?:`+pattern+`)\z`, syntax.Perl)
	if err != nil {
		return nil, fmt.Errorf("pattern: %w", err)
	}
	prog, err := syntax.Compile(tree.Simplify())
	if err != nil {
		return nil, fmt.Errorf("pattern: %w", err)
	}
	m := &matcher{prog: prog, names: re.SubexpNames(), width: longest + 1}
	if size := len(prog.Inst) * m.width; size > 1<<24 {
		return nil, fmt.Errorf("pattern: it compiles to %d instructions, too many for frames of %d bytes", len(prog.Inst), longest)
	}
	m.visited = make([]uint32, (len(prog.Inst)*m.width+31)/32)
	m.cap = make([]int, 2*len(m.names))
	return m, nil
}

// match reports whether the whole of b matches. The bounds of group i are
// then m.cap[2i], m.cap[2i+1]; -1 where it took no part.
func (m *matcher) match(b []byte) bool {
	if len(b) >= m.width {
		return false
	}
	m.clear(len(b) + 1)
	for i := range m.cap {
		m.cap[i] = -1
	}
	m.jobs = append(m.jobs[:0], job{pc: int32(m.prog.Start), restore: -1})
	for len(m.jobs) > 0 {
		j := m.jobs[len(m.jobs)-1]
		m.jobs = m.jobs[:len(m.jobs)-1]
		if j.restore >= 0 {
			m.cap[j.restore] = int(j.pos)
			continue
		}
		if m.run(b, int(j.pc), int(j.pos), len(b)+1) {
			return true
		}
	}
	return false
}

// clear clears the part of the visited set that a text of w-1 bytes uses.
func (m *matcher) clear(w int) {
	clear(m.visited[:(len(m.prog.Inst)*w+31)/32])
}

// run follows one branch until it fails (false) or matches the whole text.
func (m *matcher) run(b []byte, pc, pos, w int) bool {
	for {
		bit := pc*w + pos
		if m.visited[bit/32]&(1<<(bit%32)) != 0 {
			return false
		}
		m.visited[bit/32] |= 1 << (bit % 32)
		in := &m.prog.Inst[pc]
		switch in.Op {
		case syntax.InstFail:
			return false
		case syntax.InstMatch:
			return pos == len(b)
		case syntax.InstNop:
		case syntax.InstAlt, syntax.InstAltMatch:
			m.jobs = append(m.jobs, job{pc: int32(in.Arg), pos: int32(pos), restore: -1})
		case syntax.InstCapture:
			if int(in.Arg) < len(m.cap) {
				m.jobs = append(m.jobs, job{pos: int32(m.cap[in.Arg]), restore: int32(in.Arg)})
				m.cap[in.Arg] = pos
			}
		case syntax.InstEmptyWidth:
			if syntax.EmptyOp(in.Arg)&^emptyFlags(b, pos) != 0 {
				return false
			}
		default: // the instructions that take one rune
			if pos == len(b) {
				return false
			}
			r, n := rune(b[pos]), 1
			if r >= utf8.RuneSelf {
				r, n = utf8.DecodeRune(b[pos:])
			}
			if !takes(in, r) {
				return false
			}
			pos += n
		}
		pc = int(in.Out)
	}
}

// takes is Inst.MatchRune with its commonest case first.
func takes(in *syntax.Inst, r rune) bool {
	switch in.Op {
	case syntax.InstRune1:
		return r == in.Rune[0]
	case syntax.InstRuneAny:
		return true
	case syntax.InstRuneAnyNotNL:
		return r != '\n'
	}
	return in.MatchRune(r)
}

func emptyFlags(b []byte, pos int) syntax.EmptyOp {
	before, after := rune(-1), rune(-1)
	if pos > 0 {
		before, _ = utf8.DecodeLastRune(b[:pos])
	}
	if pos < len(b) {
		after, _ = utf8.DecodeRune(b[pos:])
	}
	return syntax.EmptyOpContext(before, after)
}
