package frame_test

import (
	"testing"

	"gaugelog/device/frame"
)

// The number forms of IEEE 488.2: NR1, NR2 and NR3 as instruments answer
// them (8.7.2 to 8.7.4), and what NRf adds (7.7.2): no digit before or behind
// the point, small e, blanks around the exponent. Sections from memory.
func TestSCPINumberForms(t *testing.T) {
	scpi := func(scale frame.Decimal) frame.Options {
		return frame.Options{Kind: frame.SCPIReply, Unit: frame.Millimetre, SCPI: &frame.SCPIOptions{Scale: scale},
			NoReadings: map[string]string{"INF": "over-range", "OVLD": "over-range"}}
	}
	const none = "!does not match the frame's grammar"
	for in, want := range map[string]string{
		"12":                  "12 mm",
		"+12":                 "12 mm",
		"-012":                "-12 mm",
		"12.50":               "12.50 mm",
		"-0.001":              "-0.001 mm",
		"+1.234500E+01":       "12.34500 mm",
		"-1.2E-03":            "-0.0012 mm",
		"1e1":                 "10 mm",
		"5.":                  "5 mm",
		".5":                  "0.5 mm",
		"1.5 E +1":            "15 mm",
		" 12.50 ":             "12.50 mm",
		"-0.0":                "0.0 mm",
		"0E0":                 "0 mm",
		"9.91E37":             "?not a number",
		"+9.910000E+37":       "?not a number",
		"991E35":              "?not a number",
		"0.991E38":            "?not a number",
		"9.9E37":              "?infinity",
		"+9.90000000E+37":     "?infinity",
		"-9.9E+37":            "?minus infinity",
		"9.92E37":             "!value is no number",
		"1E400":               "!value is no number",
		"1234567890123456789": "!value is no number",
		"INF":                 "?over-range",
		" OVLD ":              "?over-range",
		"1.234,5.678":         none,
		"1,5":                 none,
		"1.2.3":               none,
		"+-1":                 none,
		"1E":                  none,
		"E5":                  none,
		".":                   none,
		"":                    none,
		"1.234 mm":            none,
		"#H1F":                none,
		"NAN":                 none,
		"\x001.5":             none,
	} {
		for _, end := range []string{"\n", "\r\n"} {
			c := kindCase{name: in, o: scpi(one)}
			if got := heard(c.open(t), []byte(in+end)); len(got) != 1 || got[0] != want {
				t.Errorf("%q: %q, want %q", in+end, got, want)
			}
		}
	}
	c := kindCase{o: scpi(frame.Decimal{Digits: 254, Scale: 1})}
	if got := heard(c.open(t), []byte("-1.0E-1\n")); got[0] != "-2.540 mm" {
		t.Errorf("scaled: %q", got)
	}
}

func TestIdentity(t *testing.T) {
	for _, tt := range []struct {
		pattern, answer string
		right           bool
	}{
		{`,1187,`, "MADEUP,INDICATOR,1187,1.0\n", true},
		{`^MADEUP,INDICATOR,1187,1\.0$`, "MADEUP,INDICATOR,1187,1.0\r\n", true},
		{`,1188,`, "MADEUP,INDICATOR,1187,1.0\n", false},
		{`^INDICATOR`, "MADEUP,INDICATOR,1187,1.0\n", false},
		{`,1187,`, "1.234\n", false},
	} {
		d, err := frame.NewIdentity(tt.pattern, nil)
		if err != nil {
			t.Fatal(err)
		}
		n, right := 0, false
		d.Feed([]byte(tt.answer), func(f *frame.Frame) { n++; right = f.Rejected == frame.None && !f.HasValue })
		if n != 1 || right != tt.right {
			t.Errorf("%s: %q: %d frames, right %v", tt.pattern, tt.answer, n, right)
		}
	}
	if _, err := frame.NewIdentity("(", nil); err == nil {
		t.Error("a pattern that is none was taken")
	}
}
