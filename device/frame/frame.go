package frame

// Unit is the unit a gauge shows.
type Unit uint8

// The units of an indication. NoUnit is that of a frame that carries no
// indication (a probe's).
const (
	NoUnit Unit = iota
	Millimetre
	Inch
)

// String returns "", "mm" or "in".
func (u Unit) String() string {
	switch u {
	case Millimetre:
		return "mm"
	case Inch:
		return "in"
	}
	return ""
}

// Reason says why bytes were rejected.
type Reason uint8

// The reasons for a rejection; None is that of a frame that counts.
const (
	None Reason = iota
	// NoMatch: the bytes up to the terminator are not one frame by the grammar.
	NoMatch
	// TooLong: no terminator came within the longest frame.
	TooLong
	// Unfinished: the line fell quiet, or another frame began, before this one ended.
	Unfinished
	// BadChecksum: the checksum sent is not that of the bytes.
	BadChecksum
	// BadNumber: the value is no decimal number of at most 18 digits.
	BadNumber
	// BadDigit: a nibble that must be a decimal digit is not one.
	BadDigit
	// BadCode: a code for sign, point, unit or fixed header is none of those described.
	BadCode
	// UnknownUnit: the unit sent is none of those described.
	UnknownUnit
	// UnknownStatus: the status sent is none of those described.
	UnknownStatus
	// BadAddress: the answer is from another bus address than was asked.
	BadAddress
	// Refused: the instrument answered that it refuses the request.
	Refused
	// NotFollowed: bytes that would be a frame, but neither the next frame nor
	// an idle gap stood behind them.
	NotFollowed
)

var reasonTexts = [...]string{
	None:          "",
	NoMatch:       "does not match the frame's grammar",
	TooLong:       "no terminator within the longest frame",
	Unfinished:    "unfinished frame",
	BadChecksum:   "wrong checksum",
	BadNumber:     "value is no number",
	BadDigit:      "a nibble is no decimal digit",
	BadCode:       "unknown code",
	UnknownUnit:   "unknown unit",
	UnknownStatus: "unknown status",
	BadAddress:    "answer from another address",
	Refused:       "the instrument refused the request",
	NotFollowed:   "neither a frame nor a pause stands behind it",
}

// String returns the reason in words, "" for None.
func (r Reason) String() string {
	if int(r) < len(reasonTexts) {
		return reasonTexts[r]
	}
	return "unknown reason"
}

// Field is one further named group of a text frame, such as a temperature.
type Field struct {
	// Name is the group's name in the pattern.
	Name string
	// Text is what the group matched, nil where it did not take part.
	Text []byte
	// Value is Text as a decimal where Number is true.
	Value  Decimal
	Number bool
}

// Frame is one frame found, whole or rejected. It belongs to the decoder: its
// slices are overwritten after emit returns.
type Frame struct {
	// Offset is where the frame's first byte stands, counted from the offset
	// given to Reset (0 at first) over every byte fed since; Size is the
	// number of bytes, terminator included.
	Offset int64
	Size   int
	// Rejected is None for a frame that counts.
	Rejected Reason
	// Exception is the code with which a modbus instrument refused the
	// request, where Rejected is Refused; else 0.
	Exception byte
	// NoReading says why a whole frame carries no number ("over-range"); ""
	// where it carries one.
	NoReading string
	// Value is the indication as shown, in Unit, where HasValue is true.
	Value    Decimal
	HasValue bool
	Unit     Unit
	// Channel tells instruments on one port apart; nil where the frame has none.
	Channel []byte
	// Status is "" where ordinary, else hold, battery-low, high-limit,
	// low-limit, over-range, under-range or error.
	Status string
	// Fields are the pattern's further groups, in the pattern's order.
	Fields []Field
	// Raw holds the frame's bytes without terminator (of a rejected one, as
	// many as were kept).
	Raw []byte
}

// settle gives the frame its verdict: a rejected one carries no value, and one
// whose status says that the number shown is none is a non-reading.
func (f *Frame) settle(why Reason) {
	f.Rejected = why
	if why != None {
		f.HasValue, f.NoReading, f.Status = false, "", ""
		return
	}
	switch f.Status {
	case "over-range", "under-range", "error":
		if f.NoReading == "" {
			f.NoReading = f.Status
		}
		f.HasValue = false
	}
}

// Decoder finds the frames of one kind in a stream of bytes. It is not safe
// for concurrent use.
type Decoder interface {
	// Feed takes the next bytes, split anywhere, and calls emit once for each
	// frame that ended in them, rejected ones included, in order. The Frame is
	// valid until emit returns; emit must not call the decoder.
	Feed(p []byte, emit func(*Frame))
	// Quiet tells that nothing followed for longer than bytes of one frame
	// lie apart: a whole frame that waited for that counts, an unfinished one
	// is rejected. Kinds that end by their terminator keep waiting.
	Quiet(emit func(*Frame))
	// Whole reports that what is pending is one whole frame, which waits only
	// for Quiet or for the next frame to count.
	Whole() bool
	// Reset forgets what is unfinished; the next byte fed stands at offset.
	Reset(offset int64)
	// Pending is the number of bytes of the unfinished frame.
	Pending() int
}
