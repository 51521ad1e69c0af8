package frame

// shape is what the kinds without terminator differ in: how long a frame is
// and what its bytes say.
type shape interface {
	// size returns the length of the frame that b begins; 0 while b is too
	// short to tell. ok is false where no frame begins with b.
	size(b []byte) (n int, ok bool)
	// read fills f from f.Raw, which has the length size gave. intact tells
	// that a checksum held: then the bytes are the frame that was sent, even
	// where its content is refused.
	read(f *Frame) (why Reason, intact bool)
}

// guard says what must follow before a whole frame counts.
type guard uint8

const (
	// proven: its checksum alone is proof (16 bits).
	proven guard = iota
	// followed: the next frame's sync, or an idle gap.
	followed
	// repeated: a second whole frame with a checksum that holds, or idle gaps
	// on both sides: there is no sync.
	repeated
	// bracketed: idle gaps on both sides: there is neither sync nor checksum.
	bracketed
)

// anchor says what is known of the place where the buffer begins.
type anchor uint8

const (
	hunting anchor = iota // behind bytes that were no frame
	opened                // the first byte after Reset
	paused                // the first byte after an idle gap
	locked                // the first byte after a frame that counted
)

// framer finds frames that have no terminator: by their length, their sync
// bytes, their checksum and the gaps between them. It looks at the bytes one
// by one, so the result cannot depend on how they were split.
type framer struct {
	shape shape
	guard guard
	sync  int // bytes that size needs to see to know a beginning; 0: none
	// doubtful: no checksum tells a true sync from the same bytes in the data.
	doubtful bool
	limit    int // bytes of junk after which it is told of

	buf    []byte
	head   int   // buf[head:] is not yet dealt with
	first  int64 // offset of buf[head]
	anchor anchor
	whole  bool // buf[head:] begins with a whole frame that waits for what follows
	junk   junk
	frame  Frame
	probe  Frame // the one that follows, looked at and not handed over
}

// junk is the stretch of bytes that were no frame, until it is told of.
type junk struct {
	n    int64
	at   int64
	why  Reason
	raw  []byte
	told bool
}

// newFramer makes a framer for frames of at most longest bytes.
func newFramer(s shape, g guard, sync, longest int) *framer {
	return &framer{
		shape: s, guard: g, sync: sync, limit: max(2*longest, 256), anchor: opened,
		buf: make([]byte, 0, 4*longest+2*sync+16), junk: junk{raw: make([]byte, 0, longest)},
	}
}

func (t *framer) Reset(offset int64) {
	t.buf, t.head, t.first = t.buf[:0], 0, offset
	t.anchor, t.whole = opened, false
	t.junk = junk{raw: t.junk.raw[:0]}
}

func (t *framer) Pending() int {
	if n := len(t.buf) - t.head; n > 0 || t.junk.n == 0 {
		return n
	}
	return 1 // junk whose end is still to come
}

func (t *framer) Whole() bool {
	if !t.whole {
		return false
	}
	n, _ := t.shape.size(t.buf[t.head:])
	return n == len(t.buf)-t.head
}

func (t *framer) Feed(p []byte, emit func(*Frame)) {
	for _, c := range p {
		if len(t.buf) == cap(t.buf) {
			t.buf = t.buf[:copy(t.buf, t.buf[t.head:])]
			t.head = 0
		}
		t.buf = append(t.buf, c)
		for t.step(emit) {
		}
	}
}

// step deals with the beginning of the buffer; false where it needs more bytes.
func (t *framer) step(emit func(*Frame)) bool {
	b := t.buf[t.head:]
	if len(b) == 0 {
		return false
	}
	if t.guard == bracketed && t.anchor == hunting {
		t.skip(NoMatch, emit)
		return true
	}
	n, ok := t.shape.size(b)
	switch {
	case !ok:
		t.skip(NoMatch, emit)
		return true
	case n == 0 || len(b) < n:
		return false
	}
	if !t.whole {
		f := t.begin(n)
		why, intact := t.shape.read(f)
		if why != None && !intact {
			t.skip(why, emit)
			return true
		}
		if t.guard == proven {
			t.take(f, why, emit)
			t.anchor = locked
			return true
		}
		t.whole = true
	}
	switch t.follows(b, n) {
	case yes:
		t.whole = false
		f := t.begin(n)
		why, _ := t.shape.read(f)
		t.take(f, why, emit)
		t.anchor = locked
		return true
	case no:
		t.skip(NotFollowed, emit)
		return true
	}
	return false
}

type answer uint8

const (
	unknown answer = iota
	yes
	no
)

// follows tells whether what stands behind the whole frame of n bytes at the
// beginning of b lets it count.
func (t *framer) follows(b []byte, n int) answer {
	rest := b[n:]
	if len(rest) == 0 {
		return unknown
	}
	if t.guard == bracketed {
		return no
	}
	size, ok := t.shape.size(rest)
	switch {
	case !ok:
		return no
	case t.guard == followed && len(rest) < t.sync:
		return unknown
	case t.guard == followed:
		if t.doubtful && t.anchor != locked && t.anchor != paused && t.ambiguous(b[:n]) {
			return no
		}
		return yes
	case size == 0 || len(rest) < size:
		return unknown
	}
	t.probe = Frame{Raw: rest[:size]}
	if _, intact := t.shape.read(&t.probe); !intact {
		return no
	}
	return yes
}

// ambiguous reports whether the sync also stands elsewhere in the frame: then
// the place found may be the wrong one, and stay it for as long as the
// instrument repeats itself.
func (t *framer) ambiguous(b []byte) bool {
	for i := 1; i+t.sync <= len(b); i++ {
		if _, ok := t.shape.size(b[i : i+t.sync]); ok {
			return true
		}
	}
	return false
}

func (t *framer) Quiet(emit func(*Frame)) {
	for len(t.buf) > t.head {
		n, _ := t.shape.size(t.buf[t.head:])
		exact := t.whole && n == len(t.buf)-t.head
		if exact && (t.sync > 0 || t.anchor != hunting) {
			t.whole = false
			f := t.begin(n)
			why, _ := t.shape.read(f)
			t.take(f, why, emit)
			break
		}
		t.skip(Unfinished, emit)
		for t.step(emit) {
		}
	}
	t.flush(emit)
	t.junk.told = false
	t.anchor = paused
}

// begin readies the frame for the n bytes at the beginning of the buffer.
func (t *framer) begin(n int) *Frame {
	t.frame = Frame{Offset: t.first, Size: n, Raw: t.buf[t.head : t.head+n]}
	return &t.frame
}

// take hands over a whole frame, after the junk before it.
func (t *framer) take(f *Frame, why Reason, emit func(*Frame)) {
	if t.junk.n > 0 && !t.junk.told {
		whole := *f
		t.flush(emit)
		t.frame = whole
	}
	t.junk = junk{raw: t.junk.raw[:0]}
	f = &t.frame
	f.settle(why)
	emit(f)
	t.advance(f.Size)
}

func (t *framer) advance(n int) {
	t.head += n
	t.first += int64(n)
}

// skip moves one byte to the junk.
func (t *framer) skip(why Reason, emit func(*Frame)) {
	j := &t.junk
	switch {
	case j.n == 0:
		j.at, j.why = t.first, why
	case (j.why == NoMatch || j.why == Unfinished) && why != NoMatch && why != Unfinished:
		j.why = why // the more telling reason
	}
	j.n++
	if len(j.raw) < cap(j.raw) {
		j.raw = append(j.raw, t.buf[t.head])
	}
	t.whole, t.anchor = false, hunting
	t.advance(1)
	if j.n >= int64(t.limit) && !j.told {
		told := *j
		t.flush(emit)
		j.n, j.told = told.n, true // the rest of it is not told of again
	}
}

// flush tells of the junk gathered.
func (t *framer) flush(emit func(*Frame)) {
	j := &t.junk
	if j.n > 0 && !j.told {
		t.frame = Frame{Offset: j.at, Size: int(j.n), Raw: j.raw, Rejected: j.why}
		emit(&t.frame)
	}
	t.junk = junk{raw: j.raw[:0], told: j.told}
}
