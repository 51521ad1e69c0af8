package steps

import (
	"math"
	"math/rand/v2"
	"time"

	"gaugelog/analysis/history"
	"gaugelog/config"
)

// world is a made-up test: a beam on two supports in closed form (Euler-
// Bernoulli, textbook), power-law creep by superposition, gauges with
// resolution and noise, a daily temperature. It shares no code with what it
// tests.
type world struct {
	span, ei      float64 // mm, N.mm2
	creep, power  float64 // J/J0 = 1 + creep t_h^power
	gauges        []wgauge
	loads         []float64 // places, mm
	compliance    float64   // of each support, mm/N
	changes       []wchange
	every         float64 // s
	length        float64 // s
	daily         float64 // amplitude on gauges with a frame, mm
	drift         float64 // over the whole test, on all gauges, mm
	seed          uint64
	happenings    []happening
	silent        [][2]float64 // no readings between, s
	marks         []history.Mark
	sparse        bool // mark the loads that changed only
	amend         []config.Amendment
	readTimes     []float64
	noInfluence   bool
	jitter        float64 // s, of each reading
	stands        []string
	travel        [2]float64
	fallSupport   float64 // mm, at fallAt, left support
	fallAt        float64
	temporaryLoad [3]float64 // N on load 0 from s to s
}

type wgauge struct {
	at    float64
	sees  string
	res   float64
	noise float64
	sense string
}

// wchange is a change of the loads at a true instant, marked off by late
// seconds (NaN: not marked).
type wchange struct {
	at, late float64
	newton   []float64
	ramp     float64
	name     string
}

// happening disturbs one gauge's indication (mm in sag) from, to (0: for good).
type happening struct {
	gauge    int
	from, to float64
	by       float64
	// zero makes the indication 0 from then on; inch divides it by 25.4;
	// freeze holds it.
	zero, inch, freeze bool
}

const epoch = int64(1_790_000_000) * second

func at(s float64) int64 { return epoch + nanos(s) }

// sagPer is the sag at x per newton at p: two supports at 0 and L.
func (w *world) sagPer(x, p float64) float64 {
	l, ei := w.span, w.ei
	if x > p {
		x, p = l-x, l-p // mirror
	}
	b := l - p
	if x < 0 {
		return x * p * b * (l + b) / (6 * l * ei)
	}
	return p0(x, b, l) / ei
}

func p0(x, b, l float64) float64 { return b * x * (l*l - b*b - x*x) / (6 * l) }

func (w *world) influence() [][]float64 {
	out := make([][]float64, len(w.gauges))
	for i, g := range w.gauges {
		for _, p := range w.loads {
			v := 0.0
			switch g.sees {
			case "reference":
			case "seat":
			default:
				v = w.sagPer(g.at, p)
			}
			out[i] = append(out[i], v)
		}
	}
	return out
}

// sag is the true downward movement of gauge g at time t, with supports.
func (w *world) sag(g int, t float64) (gross, net float64) {
	gg := w.gauges[g]
	former := make([]float64, len(w.loads))
	var left, right float64
	for _, c := range w.changes {
		for j, n := range c.newton {
			d := n - former[j]
			former[j] = n
			if d == 0 || t <= c.at {
				continue
			}
			s := t - c.at
			f := 1.0
			if s < c.ramp {
				f = s / c.ramp
			}
			late := max(s-c.ramp, 0)
			if gg.sees != "seat" && gg.sees != "reference" {
				net += d * f * w.sagPer(gg.at, w.loads[j]) * (1 + w.creep*math.Pow(late/3600, w.power))
			}
			left += d * f * (w.span - w.loads[j]) / w.span * w.compliance
			right += d * f * w.loads[j] / w.span * w.compliance
		}
	}
	if q := w.temporaryLoad; q[0] != 0 && t > q[1] && t <= q[2] && gg.sees == "" {
		net += q[0] * w.sagPer(gg.at, w.loads[0])
	}
	if w.fallSupport != 0 && t > w.fallAt {
		left += w.fallSupport
	}
	if gg.sees == "reference" {
		return 0, 0
	}
	return net + left*(w.span-gg.at)/w.span + right*gg.at/w.span, net
}

func (w *world) rig() *config.Rig {
	r := &config.Rig{}
	length := func(v float64) config.Length { return config.Length{Quantity: config.Quantity{Value: v}} }
	r.Specimen.Length = length(w.span + 600)
	r.Specimen.Section.Depth = []config.Length{length(38)}
	r.Supports = []config.Support{{Name: "left", At: length(0)}, {Name: "right", At: length(w.span)}}
	for i, g := range w.gauges {
		c := config.Gauge{Name: "g" + string(rune('1'+i)), At: length(g.at), Sees: g.sees, Sense: g.sense, Resolution: length(g.res)}
		if c.Sense == "" {
			c.Sense = "down"
		}
		if i < len(w.stands) {
			c.Stand = w.stands[i]
		}
		if w.travel[1] != 0 {
			c.Travel = []config.Length{length(w.travel[0]), length(w.travel[1])}
		}
		r.Gauges = append(r.Gauges, c)
	}
	for j, p := range w.loads {
		v := length(p)
		r.Loads = append(r.Loads, config.Load{Name: "load" + string(rune('a'+j)), At: &v})
	}
	r.Read.InitialAfter.Value = 60
	for _, t := range w.readTimes {
		d := config.Duration{}
		d.Value = t
		r.Read.Times = append(r.Read.Times, d)
	}
	return r
}

// failer is a test, of this package's or of a property.
type failer interface {
	Helper()
	Fatal(...any)
}

// history makes the run as recorded.
func (w *world) history(t failer) *history.History {
	t.Helper()
	rig := w.rig()
	rng := rand.New(rand.NewPCG(w.seed, 77))
	samples := make([][]history.Sample, len(w.gauges))
	for g, gg := range w.gauges {
		sign := 1.0
		if gg.sense == "up" {
			sign = -1
		}
		zero := map[int]float64{}
		frozen, held := false, 0.0
		last := int64(math.MinInt64)
	reading:
		for s := 0.0; s <= w.length; s += w.every {
			when := s + w.jitter*(rng.Float64()-0.5)
			for _, q := range w.silent {
				if when > q[0] && when < q[1] {
					continue reading
				}
			}
			gross, _ := w.sag(g, when)
			y := 3 + gross + w.daily*math.Sin(2*math.Pi*when/86400) + w.drift*when/w.length + gg.noise*rng.NormFloat64()
			ind := sign * y
			quantum := gg.res
			freeze := false
			for k, h := range w.happenings {
				if h.gauge != g || when <= h.from || h.to != 0 && when > h.to {
					continue
				}
				switch {
				case h.zero:
					if _, ok := zero[k]; !ok {
						zero[k] = ind
					}
					ind -= zero[k]
				case h.inch:
					ind /= 25.4
				case h.freeze:
					freeze = true
				default:
					ind += sign * h.by
				}
			}
			if w.travel[1] != 0 {
				ind = min(max(ind, w.travel[0]), w.travel[1])
			}
			ind = math.Round(ind/quantum) * quantum
			if freeze {
				if !frozen {
					held, frozen = ind, true
				}
				ind = held
			}
			stamp := at(when)
			if stamp <= last {
				stamp = last + 1
			}
			last = stamp
			samples[g] = append(samples[g], history.Sample{Time: stamp, MM: ind})
		}
	}
	h, err := history.FromSamples(history.Given{Rig: rig, Samples: samples, Marks: w.marked(rig), Amendments: w.amend})
	if err != nil {
		t.Fatal(err)
	}
	return h
}

// marked are the operator's entries.
func (w *world) marked(rig *config.Rig) []history.Mark {
	marks := append([]history.Mark(nil), w.marks...)
	for i, c := range w.changes {
		if math.IsNaN(c.late) {
			continue
		}
		for j, n := range c.newton {
			if w.sparse && i > 0 && n == w.changes[i-1].newton[j] {
				continue
			}
			m := history.Mark{Kind: "load", Load: rig.Loads[j].Name, Newton: n, Step: c.name, Time: at(c.at + c.late)}
			marks = append(marks, m)
		}
	}
	return marks
}

func (w *world) find(t failer) *Findings {
	t.Helper()
	opt := Options{}
	if !w.noInfluence {
		opt.Influence = w.influence()
	}
	f, err := Find(w.history(t), opt)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// plank is the demo scenario in little: overhang, left support, three in the
// span, right support, reference.
func plank() *world {
	q := func(at float64, sees string) wgauge { return wgauge{at: at, sees: sees, res: 0.001, noise: 0.0005} }
	return &world{
		span: 2100, ei: 7.554e9, creep: 0.085, power: 0.23, compliance: 2.5e-4,
		gauges: []wgauge{q(-250, ""), q(0, ""), q(550, ""), q(1000, ""), q(1550, ""), q(2100, ""), q(1050, "reference")},
		loads:  []float64{700, 1400},
		every:  1, length: 3 * 3600, seed: 1, daily: 0.005,
		changes: []wchange{
			{at: 1800.4, late: 5, newton: []float64{24.5, 24.5}, name: "s1"},
			{at: 2160.3, late: -8, newton: []float64{171.8, 24.5}, name: "s2"},
			{at: 2520.7, late: 35, newton: []float64{171.8, 171.8}, name: "s3"},
			{at: 2880.2, late: 3, newton: []float64{319, 171.8}, name: "s4"},
			{at: 9000.6, late: 4, newton: []float64{0, 0}, name: "bare"},
		},
		readTimes: []float64{60, 600, 3600},
	}
}

// stamp is RFC 3339 for a second of the world.
func stamp(s float64) string {
	return time.Unix(0, at(s)).UTC().Format(time.RFC3339Nano)
}
