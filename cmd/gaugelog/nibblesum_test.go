package main

import (
	"fmt"
	"testing"

	"gaugelog/config"
	"gaugelog/device"
	"gaugelog/device/frame"
	"gaugelog/simulators/wire"
)

// Where the checksum of nibbles stands has one meaning in the rig file, in the
// simulator and in the device: bytes of the frame, its start included; left
// out, it follows the nibbles.
func TestPlaceOfTheSumOfNibbles(t *testing.T) {
	at := func(n int) *int { return &n }
	for name, tt := range map[string]struct {
		coding, start, end string
		sum                config.Checksum
		// stands is the byte at which the sum must stand, and size its bytes.
		stands, size int
	}{
		"packed, behind":           {"packed", "", "", config.Checksum{Kind: "xor8"}, 6, 1},
		"packed, behind an start":  {"packed", "\x02", "", config.Checksum{Kind: "sum8"}, 7, 1},
		"packed, crc behind":       {"packed", "", "", config.Checksum{Kind: "crc16"}, 6, 2},
		"packed, in its last byte": {"packed", "", "", config.Checksum{Kind: "xor8", At: at(-1)}, 5, 1},
		"packed, in byte 5":        {"packed", "", "", config.Checksum{Kind: "xor8", At: at(5)}, 5, 1},
		"hex, behind":              {"hex", "", "\r", config.Checksum{Kind: "sum8"}, 12, 2},
		"hex, in its last two":     {"hex", "\x02", "\r", config.Checksum{Kind: "sum8", At: at(-2)}, 11, 2},
	} {
		t.Run(name, func(t *testing.T) {
			f := config.Frame{Name: "n", Kind: "nibbles", Unit: "mm", Start: tt.start, End: tt.end, Checksum: &tt.sum,
				Nibbles: &config.Nibbles{Count: 12, Coding: tt.coding, Header: "F",
					Sign:   &config.NibbleField{At: 1, Codes: map[string]string{"0": "+", "8": "-"}},
					Digits: config.NibbleSpan{At: 2, Count: 6, Decimals: 3}}}
			e, err := wire.New(&f, wire.Instrument{Resolution: 0.001})
			if err != nil {
				t.Fatal(err)
			}
			bytes, ok := e.Append(nil, &wire.Value{Shown: -12.345, Unit: "mm"})
			if !ok {
				t.Fatal("the simulator cannot say it")
			}
			if body := len(bytes) - len(tt.end); tt.sum.At == nil && body != tt.stands+tt.size {
				t.Errorf("%x: a frame of %d bytes, want the sum at %d", bytes, body, tt.stands)
			}
			o, err := device.FrameOptions(f, "")
			if err != nil {
				t.Fatal(err)
			}
			read := func(p []byte) (got string) {
				d, err := frame.New(o)
				if err != nil {
					t.Fatal(err)
				}
				emit := func(f *frame.Frame) { got += fmt.Sprint(f.Value, f.Unit, f.Rejected) }
				d.Feed(p, emit)
				d.Quiet(emit)
				return got
			}
			if got, want := read(bytes), fmt.Sprint(frame.Decimal{Digits: -12345, Scale: 3}, frame.Millimetre, frame.None); got != want {
				t.Errorf("%x reads %q, want %q", bytes, got, want)
			}
			bytes[tt.stands+tt.size-1] ^= 1
			if got := read(bytes); got != "" && got[len(got)-len(frame.BadChecksum.String()):] != frame.BadChecksum.String() {
				t.Errorf("with byte %d changed: %q", tt.stands, got)
			}
		})
	}
}
