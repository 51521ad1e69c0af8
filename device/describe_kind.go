package device

import (
	"bytes"
	"encoding/hex"
	"fmt"
	"strconv"
	"strings"

	"gaugelog/config"
	"gaugelog/device/frame"
)

// describeKind fills in the part of the options that only one kind has.
func describeKind(o *frame.Options, f config.Frame, channel string) (err error) {
	switch o.Kind {
	case frame.Text:
	case frame.Nibbles:
		o.Nibbles, err = nibblesOf(f.Nibbles)
		// Packed nibbles hold raw bytes, so their sum is one too unless said.
		if c := f.Checksum; c != nil && c.Form == "" && o.Nibbles != nil {
			o.Checksum.Binary = o.Nibbles.Packed
		}
	case frame.Binary:
		o.Binary, err = binaryOf(f.Binary)
		if c := f.Checksum; c != nil && c.Form == "" {
			o.Checksum.Binary = true
		}
	case frame.ModbusReply:
		o.Modbus, err = modbusOf(f.Modbus, channel)
	case frame.SCPIReply:
		if f.SCPI == nil {
			return fmt.Errorf("a scpi frame needs its query")
		}
		o.SCPI = &frame.SCPIOptions{}
		o.SCPI.Scale, err = scaleOf(f.SCPI.Scale)
	default:
		return fmt.Errorf("frame %s: kind %q has no decoder", f.Name, f.Kind)
	}
	return err
}

// requestFor returns the bytes that ask the instrument on the given channel,
// empty where it sends unasked.
func requestFor(f config.Frame, channel string) ([]byte, error) {
	text := f.Request
	switch frame.Kind(f.Kind) {
	case frame.ModbusReply:
		return modbusRequest(f.Modbus, channel)
	case frame.SCPIReply:
		if f.SCPI == nil || f.SCPI.Query == "" {
			return nil, fmt.Errorf("a scpi frame needs its query, such as READ?")
		}
		text = f.SCPI.Query
	}
	request, err := unescape(text)
	if err != nil {
		return nil, fmt.Errorf("request: %w", err)
	}
	request = bytes.ReplaceAll(request, []byte("{channel}"), []byte(channel))
	if f.SCPI != nil {
		return terminated(request, f.End)
	}
	return request, nil
}

// terminated closes a query as its answers are closed: with end, a line feed
// where that is empty, unless it is closed already.
func terminated(query []byte, end string) ([]byte, error) {
	if n := len(query); n > 0 && (query[n-1] == '\n' || query[n-1] == '\r') {
		return query, nil
	}
	tail, err := unescape(end)
	if err != nil {
		return nil, fmt.Errorf("end: %w", err)
	}
	if len(tail) == 0 {
		tail = []byte{'\n'}
	}
	return append(query, tail...), nil
}

// scaleOf takes the scale as the rig file shows it, digit for digit; 1 where
// none is given.
func scaleOf(n *config.Number) (frame.Decimal, error) {
	if n == nil {
		return frame.Decimal{Digits: 1}, nil
	}
	for _, text := range []string{n.Shown, strconv.FormatFloat(n.Value, 'e', -1, 64)} {
		if d, ok := frame.ParseDecimal([]byte(text)); ok && d.Digits != 0 {
			return d, nil
		}
	}
	return frame.Decimal{}, fmt.Errorf("scale %v: it must be a number other than zero, of at most 18 digits", n.Value)
}

func binaryOf(b *config.Binary) (*frame.BinaryOptions, error) {
	if b == nil {
		return nil, fmt.Errorf("a binary frame needs its binary group")
	}
	sync, err := hex.DecodeString(strings.ReplaceAll(b.Sync, " ", ""))
	if err != nil {
		return nil, fmt.Errorf("sync %q is not of hex bytes", b.Sync)
	}
	scale, err := scaleOf(b.Scale)
	if err != nil {
		return nil, err
	}
	o := &frame.BinaryOptions{
		Length: b.Length, Sync: sync, Offset: b.Offset, Width: b.Width,
		BigEndian: b.Order == "big", Type: b.Type, Scale: scale,
	}
	for _, f := range b.Flags {
		if f.Means != "negative" && f.Means != "in" && (f.Means == "" || !knownStatus(f.Means)) {
			return nil, fmt.Errorf("flag %q: negative, in and the words of a status are known", f.Means)
		}
		o.Flags = append(o.Flags, frame.Flag{Byte: f.Byte, Bit: f.Bit, Means: f.Means})
	}
	return o, nil
}

func nibblesOf(n *config.Nibbles) (*frame.NibblesOptions, error) {
	if n == nil {
		return nil, fmt.Errorf("a nibbles frame needs its nibbles group")
	}
	o := &frame.NibblesOptions{
		Count: n.Count, Packed: n.Coding == "packed", LowFirst: n.Order == "low-first",
		DigitsAt: n.Digits.At, Digits: n.Digits.Count, LeastFirst: n.Digits.First == "least", Decimals: n.Digits.Decimals,
	}
	for _, c := range n.Header {
		v, err := strconv.ParseUint(string(c), 16, 4)
		if err != nil {
			return nil, fmt.Errorf("header %q is not of hex digits", n.Header)
		}
		o.Header = append(o.Header, byte(v))
	}
	for _, f := range []struct {
		to   **frame.NibbleField
		from *config.NibbleField
		what string
	}{{&o.Sign, n.Sign, "sign"}, {&o.Point, n.Point, "point"}, {&o.Unit, n.Unit, "unit"}, {&o.Status, n.Status, "status"}} {
		if f.from == nil {
			continue
		}
		*f.to = &frame.NibbleField{At: f.from.At, Codes: map[byte]string{}}
		for code, means := range f.from.Codes {
			v, err := strconv.ParseUint(code, 16, 4)
			if err != nil {
				return nil, fmt.Errorf("%s: code %q is not one hex digit", f.what, code)
			}
			(*f.to).Codes[byte(v)] = means
		}
	}
	return o, nil
}
