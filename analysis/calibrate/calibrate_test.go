package calibrate

import (
	"bytes"
	"math"
	"os"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"
)

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol*math.Max(math.Abs(want), 1e-300)) {
		t.Errorf("%s: %.15g, want %.15g", what, got, want)
	}
}

// The thermometer of JCGM 100:2008, annex H.3: t - 20 C for the block, the
// correction b for the reading. Published (table H.6 and H.3.3, H.3.4):
// y1 = -0.1712(29), y2 = 0.00218(67), r = -0.930, s = 0.0035,
// b(30) = -0.1494(41); the further digits are the exact rational solution of
// the same data.
func TestGUMThermometer(t *testing.T) {
	temperature := []float64{1.521, 2.012, 2.512, 3.003, 3.507, 3.999, 4.513, 5.002, 5.503, 6.010, 6.511}
	correction := []float64{-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160}
	s := Session{Resolution: 1e-3}
	for i := range temperature {
		s.Points = append(s.Points, Point{BlockMM: temperature[i], ReadingMM: correction[i], Direction: Up})
	}
	l, err := Fit(s)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "y1", l.Offset, -0.17120379013135, 1e-11)
	near(t, "y2", l.Gain, 0.00218269773988728, 1e-10)
	near(t, "u(y1)", l.UOffset, 0.00287759783515995, 1e-10)
	near(t, "u(y2)", l.UGain, 0.000667938773227832, 1e-10)
	near(t, "r", l.Correlation, -0.930429603093446, 1e-10)
	near(t, "s", l.ResidualSD, 0.00349756396350528, 1e-10)
	at30 := l.Indicated(10)
	near(t, "b(30)", at30.MM, -0.149376812732477, 1e-11)
	near(t, "u(b(30))", at30.U, 0.00413859575285495, 1e-9)
	if l.DOF != 9 {
		t.Errorf("dof %d, want 9", l.DOF)
	}
}

// Certified values: NIST StRD Norris, calibration of ozone monitors.
func TestNorrisAsCalibration(t *testing.T) {
	f, err := os.Open("testdata/norris.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	points, err := ReadCSV("norris.csv", f)
	if err != nil {
		t.Fatal(err)
	}
	l, err := Fit(Session{Points: points, Resolution: 0.1})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "B0", l.Offset, -0.262323073774029, 1e-10)
	near(t, "B1", l.Gain, 1.00211681802045, 1e-12)
	near(t, "sd B0", l.UOffset, 0.232818234301152, 1e-10)
	near(t, "sd B1", l.UGain, 0.429796848199937e-3, 1e-10)
	near(t, "residual sd", l.ResidualSD, 0.884796396144373, 1e-10)
}

// session is a gauge with known faults, up and down twice over ten blocks.
func session(bend, back float64) Session {
	s := Session{Resolution: 0.001}
	for round := range 2 {
		for _, way := range []string{Up, Down} {
			for i := range 10 {
				b := float64(i)
				if way == Down {
					b = 9 - b
				}
				// Half a step up in the first round, down in the second: repeats differ by 0.001.
				r := 0.012 + 1.0005*b + bend*b*b + (0.5-float64(round))*0.001
				if way == Down {
					r += back
				}
				s.Points = append(s.Points, Point{BlockMM: b, ReadingMM: r, Direction: way})
			}
		}
	}
	return s
}

func TestStraightGauge(t *testing.T) {
	l, err := Fit(session(0, 0.004))
	if err != nil {
		t.Fatal(err)
	}
	near(t, "gain", l.Gain, 1.0005, 1e-12)
	near(t, "offset", l.Offset, 0.014, 1e-9) // the hysteresis lies half above, half below
	near(t, "hysteresis", l.Hysteresis.MM, 0.004, 1e-9)
	if l.Hysteresis.Blocks != 10 {
		t.Errorf("%d blocks both ways, want 10", l.Hysteresis.Blocks)
	}
	near(t, "repeatability", l.Repeatability.SD, 0.001/math.Sqrt2, 1e-9)
	if !l.Curvature.LineEnough || len(l.Warnings) != 0 {
		t.Errorf("a straight gauge is warned of: %+v %+v", l.Curvature, l.Warnings)
	}
}

func TestBentGauge(t *testing.T) {
	l, err := Fit(session(1e-4, 0))
	if err != nil {
		t.Fatal(err)
	}
	near(t, "coefficient", l.Curvature.Coefficient, 1e-4, 1e-9)
	near(t, "bulge", l.Curvature.Bulge, 1e-4*81/4, 1e-9)
	if l.Curvature.LineEnough || l.Warnings[0].Code != "not-straight" {
		t.Errorf("a bend of 0.002 mm against repeats of 0.0007 mm was not seen: %+v", l.Curvature)
	}
}

// A difference carries no offset: shifting every reading changes nothing, and
// near zero length its uncertainty is that of two readings alone.
func TestDifference(t *testing.T) {
	s := session(0, 0)
	a, _ := Fit(s)
	for i := range s.Points {
		s.Points[i].ReadingMM += 5
	}
	b, err := Fit(s)
	if err != nil {
		t.Fatal(err)
	}
	da, db := a.Difference(2, 7), b.Difference(7, 12)
	near(t, "difference", db.MM, da.MM, 1e-12)
	near(t, "its u", db.U, da.U, 1e-9)
	near(t, "u of nothing", a.Difference(3, 3).U, math.Sqrt2*a.ReadingU/a.Gain, 1e-12)
	// By hand from the covariance of two corrected readings that share the line:
	// u^2(x1) + u^2(x2) - 2 cov(x1, x2).
	x1, x2 := a.Corrected(2).MM, a.Corrected(7).MM
	cov := a.Correlation * a.UOffset * a.UGain
	shared := (a.UOffset*a.UOffset + (x1+x2)*cov + x1*x2*a.UGain*a.UGain) / (a.Gain * a.Gain)
	u1, u2 := a.Corrected(2).U, a.Corrected(7).U
	near(t, "u by covariance", da.U, math.Sqrt(u1*u1+u2*u2-2*shared), 1e-9)
}

// Blocks at 30 C are 115 ppm longer, so the gauge's gain is that much less.
func TestBlockTemperature(t *testing.T) {
	s := session(0, 0)
	cold, _ := Fit(s)
	warm := 30.0
	s.BlockCelsius = &warm
	l, err := Fit(s)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "gain", l.Gain, cold.Gain/(1+115e-6), 1e-12)
}

// The blocks' own errors do not average out over repeats: with them the
// uncertainty no longer falls below what ten blocks allow.
func TestBlockUncertainty(t *testing.T) {
	s := session(0, 0)
	s.BlockU = 0.01
	l, err := Fit(s)
	if err != nil {
		t.Fatal(err)
	}
	// u of the gain from ten independent errors at 0..9: u/sqrt(sum (x-mean)^2) = 0.01/sqrt(82.5).
	want := math.Hypot(1.0005*0.01/math.Sqrt(82.5), l.ReadingU/math.Sqrt(4*82.5))
	near(t, "u(gain)", l.UGain, want, 1e-9)
}

func TestWhatASessionLacks(t *testing.T) {
	for name, c := range map[string]struct {
		change func(*Session)
		want   string
	}{
		"two blocks": {func(s *Session) {
			s.Points = []Point{{BlockMM: 0, Direction: Up}, {BlockMM: 1, ReadingMM: 1, Direction: Up}, {BlockMM: 1, ReadingMM: 1, Direction: Up}}
		}, "2 different block lengths"},
		"no resolution": {func(s *Session) { s.Resolution = 0 }, "resolution"},
		"not a number":  {func(s *Session) { s.Points[3].ReadingMM = math.NaN() }, "point 4"},
		"no direction":  {func(s *Session) { s.Points[0].Direction = "left" }, "neither up nor down"},
		"hot blocks":    {func(s *Session) { v := 400.0; s.BlockCelsius = &v }, "400\u202fC"},
	} {
		s := session(0, 0)
		c.change(&s)
		if _, err := Fit(s); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q in it", name, err, c.want)
		}
	}
}

func TestWrongCSV(t *testing.T) {
	for text, want := range map[string]string{
		"":                                  "s.csv:1: the file is empty",
		"block_mm\n1\n":                     "no column reading_mm",
		"block_mm,reading_mm,colour\n1,1,2": `column "colour"`,
		"block_mm,reading_mm\n1,1,004\n":    "wrong number of fields",
		"block_mm,reading_mm\n1,1\n2,x\n":   `s.csv:3: reading_mm "x"`,
		"block_mm,reading_mm\n-1,1\n":       "s.csv:2: a block of -1\u202fmm",
		"block_mm,reading_mm\n1,NaN\n":      `reading_mm "NaN"`,
	} {
		if _, err := ReadCSV("s.csv", strings.NewReader(text)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q: %v, want %q in it", text, err, want)
		}
	}
}

// What is written reads back the same, whatever the points.
func TestCSVThereAndBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		points := rapid.SliceOfN(rapid.Custom(func(t *rapid.T) Point {
			return Point{
				BlockMM: rapid.Float64Range(0, 100).Draw(t, "block"), ReadingMM: rapid.Float64Range(-100, 100).Draw(t, "reading"),
				Direction: rapid.SampledFrom([]string{Up, Down}).Draw(t, "direction"),
			}
		}), 1, 20).Draw(t, "points")
		var b bytes.Buffer
		if err := WriteCSV(&b, points); err != nil {
			t.Fatal(err)
		}
		got, err := ReadCSV("x", &b)
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(points, got); d != "" {
			t.Fatal(d)
		}
	})
}

// Whatever the points, a line has figures or there is an error; never NaN.
func TestNoNaN(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := Session{Resolution: 0.001, BlockU: rapid.Float64Range(0, 1).Draw(t, "u")}
		for range rapid.IntRange(0, 12).Draw(t, "n") {
			s.Points = append(s.Points, Point{
				BlockMM: float64(rapid.IntRange(0, 4).Draw(t, "block")), ReadingMM: rapid.Float64Range(-1e3, 1e3).Draw(t, "reading"),
				Direction: rapid.SampledFrom([]string{Up, Down}).Draw(t, "direction"),
			})
		}
		l, err := Fit(s)
		if err != nil {
			return
		}
		v, d := l.Corrected(1), l.Difference(1, 2)
		for _, x := range []float64{l.Offset, l.Gain, l.UOffset, l.UGain, l.Correlation, l.ReadingU, l.Curvature.P, l.Curvature.U, l.Indicated(3).U} {
			if math.IsNaN(x) || math.IsInf(x, 0) {
				t.Fatalf("%+v", l)
			}
		}
		if l.Gain != 0 && (math.IsNaN(v.MM+v.U+d.MM+d.U) || !(l.UOffset > 0 && l.UGain > 0)) {
			t.Fatalf("%+v %+v", v, d)
		}
	})
}
