package frame

import "fmt"

// Kind is the shape of a frame.
type Kind string

// The five shapes. ModbusReply and SCPIReply decode answers; the requests are
// made by the caller.
const (
	Text        Kind = "text"
	Nibbles     Kind = "nibbles"
	Binary      Kind = "binary"
	ModbusReply Kind = "modbus"
	SCPIReply   Kind = "scpi"
)

// Options describes a frame. Which parts count depends on Kind.
type Options struct {
	Kind Kind

	// Start (optional) and End (required) enclose a text frame. Start must
	// not occur inside a frame: where it appears, a new frame begins.
	Start, End []byte
	// Pattern is the grammar of a text frame between Start and End: a regular
	// expression in Go's syntax, matched whole, with named groups. value,
	// unit, channel, status and sum have their meaning; any other becomes a Field.
	Pattern string
	// Longest is the longest frame in bytes, terminator included; 0 means 256.
	Longest int
	// Unit is the unit where the frame sends none.
	Unit Unit
	// Units translates what the instrument prints, beside mm, in, inch and ".
	Units map[string]Unit
	// Statuses translates status codes to the words of Frame.Status. A blank
	// or absent code is ordinary unless it stands here; a frame with any other
	// code is rejected, since what it says of the value is not known.
	Statuses map[string]string
	// NoReadings are whole texts, or texts of the value group, that are no
	// number, with the reason.
	NoReadings map[string]string

	Checksum Checksum

	// The parts of the other kinds; nil for text.
	Nibbles *NibblesOptions
	Binary  *BinaryOptions
	Modbus  *ModbusOptions
	SCPI    *SCPIOptions
}

// NibbleField is one nibble with a closed set of codes and their meanings.
type NibbleField struct {
	At    int
	Codes map[byte]string
}

// NibblesOptions describes decimal digits packed two to a byte or sent as one
// hex character each. Positions count nibbles from the frame's first.
type NibblesOptions struct {
	Count    int
	Packed   bool // two nibbles a byte; else one hex character each
	LowFirst bool // within a packed byte
	Header   []byte
	Sign     *NibbleField // "+", "-"
	Point    *NibbleField // digits behind the point
	Unit     *NibbleField // "mm", "in"
	Status   *NibbleField
	DigitsAt int
	Digits   int
	// LeastFirst: the least significant digit comes first.
	LeastFirst bool
	// Decimals counts the digits behind the point where no nibble says so.
	Decimals int
}

// BinaryOptions describes a frame of fixed length.
type BinaryOptions struct {
	Length    int
	Sync      []byte
	Offset    int
	Width     int // bytes: 1 2 3 4 8
	BigEndian bool
	Type      string  // signed | unsigned | float
	Scale     Decimal // shown = raw * Scale
	Flags     []Flag
}

// Flag is one bit of a binary frame: its meaning is negative, in, or a status.
type Flag struct {
	Byte, Bit int
	Means     string
}

// ModbusOptions describes the answer to a read of registers.
type ModbusOptions struct {
	Function   byte // 3 or 4
	Address    byte // 1..247
	Registers  int  // number of registers in the answer
	ValueAt    int  // index of the value's first register
	Type       string
	LowFirst   bool // word order
	Scale      Decimal
	StatusAt   int // index of the status register, -1: none
	StatusBits map[int]string
}

// SCPIOptions describes the answer to a query for one number.
type SCPIOptions struct {
	Scale Decimal
}

// New returns a decoder for o, or an error that says what in o is wrong.
func New(o Options) (Decoder, error) {
	if o.Longest == 0 {
		o.Longest = 256
	}
	if o.Longest < 2 || o.Longest > 1<<16 {
		return nil, fmt.Errorf("longest frame of %d bytes: it must be from 2 to 65536", o.Longest)
	}
	switch o.Kind {
	case Text:
		return newText(o)
	case Nibbles:
		return newNibbles(o)
	case Binary:
		return newBinary(o)
	case ModbusReply:
		return newModbus(o)
	case SCPIReply:
		return newSCPI(o)
	}
	return nil, fmt.Errorf("unknown kind of frame %q", o.Kind)
}
