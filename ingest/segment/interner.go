package segment

import (
	"encoding/binary"
	"math"
	"math/bits"
)

// interner gives each gauge name a small number. Names of up to seven bytes
// are found by their bytes as one word, in a table that is only a shortcut to
// the map.
type interner struct {
	ids   map[string]uint16
	names []string
	marks []*gaugeMark // by number, those that the fast path met
	cache [256]*gaugeMark
	start gaugeMark // where a text begins
}

// gaugeMark is what the fast path knows of a gauge: how it stands in a line,
// and which one came behind it.
type gaugeMark struct {
	word, mask uint64 // the first bytes of the name with its blank, as far as they fit
	name       string // where they do not
	id         uint16
	size       uint8
	length     uint8 // of its last line
	next       *gaugeMark
}

// impossible stands in no line.
var impossible = &gaugeMark{word: 1}

func newInterner(names []string) *interner {
	in := &interner{ids: make(map[string]uint16), start: gaugeMark{next: impossible}}
	for _, n := range names {
		if validName([]byte(n)) {
			in.add([]byte(n))
		}
	}
	return in
}

// add returns the number of a valid name, false where there are too many.
func (in *interner) add(name []byte) (uint16, bool) {
	if id, ok := in.ids[string(name)]; ok {
		return id, true
	}
	if len(in.names) >= math.MaxUint16 {
		return 0, false
	}
	id := uint16(len(in.names))
	s := string(name)
	in.ids[s] = id
	in.names = append(in.names, s)
	return id, true
}

// stands tells whether the gauge is that of the line.
func (g *gaugeMark) stands(line *[lineRoom]byte) bool {
	return binary.LittleEndian.Uint64(line[fastName:])&g.mask == g.word && (g.name == "" || g.standsWhole(line))
}

func (g *gaugeMark) standsWhole(line *[lineRoom]byte) bool {
	end := fastName + len(g.name)
	return string(line[fastName:end]) == g.name && line[end] == ' '
}

// find returns the gauge of a line that begins as the fast path wants; nil
// where its name is not of the form, or one too many.
func (in *interner) find(line *[lineRoom]byte) *gaugeMark {
	w := binary.LittleEndian.Uint64(line[fastName:])
	x := w ^ spaces
	// The high bit of the first blank, and of some behind it.
	found := (x - ones) &^ x & highs
	size := 8
	var slot **gaugeMark
	if found != 0 {
		size = bits.TrailingZeros64(found) >> 3
		w &= 1<<(8*size) - 1
		slot = &in.cache[(w*0x9E3779B97F4A7C15)>>56]
		if g := *slot; g != nil && int(g.size) == size && g.word == w|' '<<(8*size) {
			return g
		}
	} else {
		for size <= maxFastName && line[fastName+size] != ' ' {
			size++
		}
	}
	g := in.mark(line[fastName : fastName+size])
	if g != nil && slot != nil {
		*slot = g
	}
	return g
}

// mark returns what is known of a gauge by its name.
func (in *interner) mark(name []byte) *gaugeMark {
	if !validName(name) {
		return nil
	}
	id, ok := in.add(name)
	if !ok {
		return nil
	}
	for int(id) >= len(in.marks) {
		in.marks = append(in.marks, nil)
	}
	if in.marks[id] == nil {
		in.marks[id] = newMark(name, id)
	}
	return in.marks[id]
}

func newMark(name []byte, id uint16) *gaugeMark {
	g := &gaugeMark{id: id, size: uint8(len(name)), next: impossible}
	var b [8]byte
	if n := copy(b[:], name); n < 8 {
		b[n] = ' '
		g.mask = 1<<(8*(n+1)%64) - 1
	} else {
		g.name = string(name)
	}
	if g.mask == 0 { // all eight
		g.mask = math.MaxUint64
	}
	g.word = binary.LittleEndian.Uint64(b[:])
	return g
}

// maxFastName is the longest name that the fast path takes.
const maxFastName = 64

// validName tells whether the fast path may take a gauge name: characters that
// line protocol neither escapes nor refuses.
func validName(name []byte) bool {
	if len(name) == 0 || len(name) > maxFastName {
		return false
	}
	for _, c := range name {
		if !(c >= 'a' && c <= 'z' || c >= '0' && c <= '9' || c == '_' || c == '-' || c == '.' || c >= 'A' && c <= 'Z') {
			return false
		}
	}
	return true
}
