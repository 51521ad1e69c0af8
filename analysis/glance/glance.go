package glance

import (
	"maps"
	"math"
	"slices"
	"strings"
	"time"

	"gaugelog/config"
	"gaugelog/ingest/segment"
)

// Summary is how one run stands.
type Summary struct {
	Title, Specimen string
	// First and Last bound the readings, ns since 1970 UTC; 0 where there are none.
	First, Last int64
	// Started tells that a recorder began the run, Ended that the last one said
	// it stopped.
	Started, Ended bool
	// Gauge is the one the figures are of: the rig's creep gauge.
	Gauge string
	// SagMM is its apparent sag since before the first load, RateMMPerDay how
	// it moved over RateOverS seconds at the end.
	SagMM, RateMMPerDay *float64
	RateOverS           float64
	// SagLimitMM is the rig's limit on sag, nil for none.
	SagLimitMM *float64
	// Step is the last one marked; DaysToGo what is left of the plan from its
	// mark on, less than 0 where the plan is over; nil without a plan or step.
	Step     string
	DaysToGo *float64
	// Alarms are raised and not over, oldest first: "cause: text".
	Alarms []string
}

// window is how long a stretch of readings a figure is the median of.
const window = int64(10 * time.Minute)

// Input is what a summary is made of, wherever a run lies.
type Input struct {
	// Marks and Events are in order of time.
	Marks, Events []segment.Record
	// First and Last bound the readings, ns since 1970 UTC; both 0: there is none.
	First, Last int64
	// Medians gives, for each of the spans, the median of the indications of each
	// of the gauges (nil: of all there are) that has one in it.
	Medians func(gauges []string, spans []segment.Interval) ([]map[string]Median, error)
}

// Median is the median of some indications, mm, and about the median of their
// instants, ns.
type Median struct {
	MM float64
	At int64
}

// Look sums a run folder up. Its error is a folder that cannot be read.
func Look(fsys segment.FS, rig *config.Rig) (*Summary, error) {
	names, err := segmentsOf(fsys)
	if err != nil {
		return nil, err
	}
	d, err := segment.OpenFolder(some{fsys, names.ends()})
	if err != nil {
		return nil, err
	}
	var in Input
	if in.Marks, _, err = d.Log(segment.MarksFile); err != nil {
		return nil, err
	}
	if in.Events, _, err = d.Log(segment.EventsFile); err != nil {
		return nil, err
	}
	if first, last, ok := d.Span(); ok {
		in.First, in.Last = first, last
	}
	in.Medians = func(gauges []string, spans []segment.Interval) ([]map[string]Median, error) {
		var ends []int64
		for _, s := range spans {
			ends = append(ends, s.From, s.To)
		}
		d, err := names.with(fsys, d, ends...)
		if err != nil {
			return nil, err
		}
		return medians(d, gauges, spans)
	}
	return Sum(rig, in)
}

// Sum sums a run up. rig may be nil where the rig file is not known: then the
// gauge is the one that moved most, and the way it moved is taken to be down.
func Sum(rig *config.Rig, in Input) (*Summary, error) {
	s := &Summary{}
	if rig != nil {
		s.Title, s.Specimen, s.Gauge = rig.Title, rig.Specimen.Name, rig.Read.CreepGauge
		if rig.Limits.Sag != nil {
			s.SagLimitMM = &rig.Limits.Sag.Value
		}
	}
	s.alarms(in.Events)
	load, changed := s.steps(in.Marks)
	if in.Last == 0 {
		return s, nil
	}
	s.First, s.Last = in.First, in.Last
	if rig != nil {
		s.toGo(rig, in.Marks)
	}
	return s, s.figures(in, rig, load, changed)
}

// alarms follows what was raised and what is over. Where the words are not held,
// which say of what, a gauge's alarms are counted.
func (s *Summary) alarms(events []segment.Record) {
	type key struct{ gauge, cause string }
	var order []key
	raised, wordless := map[key]string{}, map[key]int{}
	for i := range events {
		r := &events[i]
		if r.Kind != segment.Event || r.Point == nil {
			continue
		}
		v, _ := r.Point.Value("detail")
		detail, _ := v.(string)
		cause, _, _ := strings.Cut(detail, ":")
		k := key{r.Point.Tag("gauge"), cause}
		switch r.Name {
		case "alarm-raised":
			if wordless[k]++; detail == "" {
				detail = strings.TrimPrefix(k.gauge+": an alarm, whose words are not held", ": ")
			}
			order, raised[k] = append(order, k), detail
		case "alarm-over":
			if wordless[k]--; cause != "" || wordless[k] <= 0 {
				delete(raised, k)
				wordless[k] = 0
			}
		case "started":
			s.Started, s.Ended = true, false
		case "stopped":
			s.Ended = true
		}
	}
	for _, k := range order {
		if text, ok := raised[k]; ok {
			s.Alarms = append(s.Alarms, text)
			delete(raised, k)
		}
	}
}

// steps finds the last step marked, and the instants of the first load and of
// the last change of one.
func (s *Summary) steps(marks []segment.Record) (load, changed int64) {
	gone := map[string]bool{}
	for i := range marks {
		if marks[i].Kind == segment.Withdraw {
			gone[text(&marks[i], "id")] = true
		}
	}
	at := int64(0)
	for i := range marks {
		m := &marks[i]
		if id := text(m, "id"); m.Point == nil || id != "" && gone[id] {
			continue
		}
		if m.Kind == segment.Load && (load == 0 || m.Time < load) {
			load = m.Time
		}
		if m.Kind == segment.Load {
			changed = max(changed, m.Time)
		}
		step := text(m, "step")
		if m.Kind == segment.StepMark {
			step = text(m, "name")
		}
		if step != "" && m.Time >= at {
			s.Step, at = step, m.Time
		}
	}
	return load, changed
}

// toGo sums up the holds of the plan from the present step on.
func (s *Summary) toGo(rig *config.Rig, marks []segment.Record) {
	began, i := s.First, 0
	if s.Step != "" {
		i = slices.IndexFunc(rig.Plan, func(p config.PlanStep) bool { return p.Step == s.Step })
		for k := range marks {
			if m := &marks[k]; (text(m, "step") == s.Step || m.Kind == segment.StepMark && text(m, "name") == s.Step) && m.Time > began {
				began = m.Time
			}
		}
	}
	if len(rig.Plan) == 0 || i < 0 {
		return
	}
	left := -float64(s.Last-began) / 1e9
	for _, p := range rig.Plan[i:] {
		left += p.Hold.Value
	}
	days := left / 86400
	s.DaysToGo = &days
}

func text(r *segment.Record, key string) string {
	if r.Point == nil {
		return ""
	}
	v, _ := r.Point.Value(key)
	t, _ := v.(string)
	return t
}

// figures takes three windows in one pass: before the first load, a day before
// the end (or as near to it as there is), and the end. Where the rig names no
// creep gauge it is the one on the beam that sagged most, as in the analysis.
func (s *Summary) figures(in Input, rig *config.Rig, load, changed int64) error {
	day := s.dayBefore(changed)
	spans := []segment.Interval{{From: max(s.Last-window, changed+(s.Last-changed)/2), To: s.Last}, {From: day, To: day + window}}
	if load > 0 {
		spans = append(spans, segment.Interval{From: load - window, To: load - int64(30*time.Second)})
	}
	gauges, scale := s.chosen(rig)
	all, err := in.Medians(gauges, spans)
	if err != nil {
		return err
	}
	now, before := all[0], all[1]
	if load > 0 {
		s.sag(now, all[2], scale, rig == nil)
	}
	n, there := now[s.Gauge]
	b, known := before[s.Gauge]
	if !there || !known || s.Last-window-day < 3*window || n.At-b.At < 2*window {
		return nil
	}
	s.RateOverS = float64(n.At-b.At) / 1e9
	rate := scale(s.Gauge) * (n.MM - b.MM) / s.RateOverS * 86400
	if rig == nil && s.SagMM != nil && n.MM < all[2][s.Gauge].MM {
		rate = -rate // the indication falls where the sag grows
	}
	s.RateMMPerDay = &rate
	return nil
}

// chosen are the gauges that the sag may be of, nil for all there are, and what
// turns their indications into sag.
func (s *Summary) chosen(rig *config.Rig) (gauges []string, scale func(string) float64) {
	if rig == nil {
		return nil, func(string) float64 { return 1 }
	}
	by := map[string]float64{}
	for _, g := range rig.Gauges {
		if s.Gauge == g.Name || s.Gauge == "" && (g.Sees == "" || g.Sees == "beam") {
			by[g.Name] = scaleOf(g)
			gauges = append(gauges, g.Name)
		}
	}
	return gauges, func(name string) float64 { return by[name] }
}

// sag finds the gauge that sagged most; unsigned, where no sense is known, the
// one that moved most.
func (s *Summary) sag(now, base map[string]Median, scale func(string) float64, unsigned bool) {
	for _, name := range slices.Sorted(maps.Keys(now)) {
		b, known := base[name]
		sag := scale(name) * (now[name].MM - b.MM)
		if unsigned {
			sag = math.Abs(sag)
		}
		if known && (s.SagMM == nil || sag > *s.SagMM) {
			s.Gauge, s.SagMM = name, &sag
		}
	}
}

// dayBefore is where the window begins that the end is compared with: a day
// before it, but after the last change of a load and within the run.
func (s *Summary) dayBefore(changed int64) int64 {
	return max(s.Last-int64(24*time.Hour), changed+window, s.First)
}

// scaleOf turns an indication into sag but for its zero: sense and gain.
func scaleOf(g config.Gauge) float64 {
	down := 1.0
	if g.Sense == "up" {
		down = -1
	}
	if g.Calibration != nil && g.Calibration.Gain.Value != 0 {
		down /= g.Calibration.Gain.Value
	}
	return down
}

// medians are those of the gauges' readings in each of the spans; a gauge
// without one is not among them.
func medians(d *segment.Folder, gauges []string, spans []segment.Interval) ([]map[string]Median, error) {
	type values struct {
		mm []float64
		at []int64
	}
	found := make([]map[string]*values, len(spans))
	for i := range found {
		found[i] = map[string]*values{}
	}
	r := d.Read(segment.ReadOptions{Workers: 1, Spans: spans, Only: gauges})
	defer r.Close()
	for rec, err := range r.Records() {
		if err != nil {
			return nil, err
		}
		for i, s := range spans {
			if rec.Time < s.From || rec.Time > s.To {
				continue
			}
			v := found[i][rec.Name]
			if v == nil {
				v = &values{}
				found[i][rec.Name] = v
			}
			v.mm, v.at = append(v.mm, rec.MM), append(v.at, rec.Time)
		}
	}
	out := make([]map[string]Median, len(spans))
	for i := range found {
		out[i] = map[string]Median{}
		for name, v := range found[i] {
			slices.Sort(v.mm)
			slices.Sort(v.at)
			n := len(v.mm)
			out[i][name] = Median{(v.mm[n/2] + v.mm[(n-1)/2]) / 2, v.at[n/2]}
		}
	}
	return out, nil
}
