package desk

import (
	"cmp"
	"slices"
	"time"

	"gaugelog/config"
	"gaugelog/ingest"
)

// foundNear is how far the instant found in the readings may lie from the mark
// of the same change.
const foundNear = 15 * time.Minute

// foundSame is how far two instants found for one change may differ.
const foundSame = 5 * time.Second

// readMarks reads the marks again and sets what follows from them.
func (d *Desk) readMarks() error {
	marks, err := ingest.ListMarks(d.o.FS)
	if err != nil {
		return err
	}
	d.marks, d.gone = marks, ingest.Withdrawn(marks)
	d.setLoads()
	return nil
}

// setLoads works out what hangs now, and from when the bins count.
func (d *Desk) setLoads() {
	d.loads = loadsOf(d.o.Rig.Plan, counted(d.marks, d.gone), d.loadOrder())
	l := &d.loads
	if o := d.outlook.outlook; o != nil {
		d.adopt(o.StepFull)
	}
	if far := time.Duration(d.found - unix(l.Since)); d.found != 0 && !l.Since.IsZero() && -foundNear < far && far < foundNear {
		l.Since, l.Found = time.Unix(0, d.found), true
	}
	if !d.book.SetOrigin(unix(l.Since)) {
		d.baseline.since = true
	}
	if first := unix(l.First); first != d.baseline.before || !d.baseline.asked {
		d.baseline.before, d.baseline.reread = first, true
	}
}

// adopt takes the instant of full load found in the readings. One that is
// hardly different from the last stays, so that bins are not begun anew for it.
func (d *Desk) adopt(full int64) {
	if far := time.Duration(full - d.found); full != 0 && (d.found == 0 || far < -foundSame || far > foundSame) {
		d.found = full
	}
}

func unix(t time.Time) int64 {
	if t.IsZero() {
		return 0
	}
	return t.UnixNano()
}

func (d *Desk) loadOrder() []string {
	var names []string
	for _, l := range d.o.Rig.Loads {
		names = append(names, l.Name)
	}
	return names
}

// counted are the marks that were not withdrawn, in order of their times.
func counted(marks []ingest.Mark, gone map[string]string) []ingest.Mark {
	var out []ingest.Mark
	for _, m := range marks {
		if _, withdrawn := gone[m.ID]; m.Withdraw == "" && (m.ID == "" || !withdrawn) {
			out = append(out, m)
		}
	}
	slices.SortStableFunc(out, func(a, b ingest.Mark) int { return cmp.Compare(a.Time, b.Time) })
	return out
}

// loadsOf follows the marks to what hangs now.
func loadsOf(plan []config.PlanStep, marks []ingest.Mark, order []string) Loads {
	l := Loads{Planned: -1}
	now := map[string]ingest.LoadValue{}
	for _, m := range marks {
		at := time.Unix(0, m.Time)
		before := total(now)
		changed := false
		for _, v := range m.Loads {
			if old, ok := now[v.Name]; !ok && v.Newton != 0 || ok && old.Newton != v.Newton {
				changed = true
			}
			now[v.Name] = v
		}
		if changed {
			l.Since = at
			if l.First.IsZero() && total(now) > before {
				l.First = at
			}
		}
		if m.Step != "" {
			l.Step, l.Planned, l.Ends = m.Step, -1, time.Time{}
			for i, p := range plan {
				if p.Step == m.Step {
					l.Planned, l.Ends = i, at.Add(time.Duration(p.Hold.Value*float64(time.Second)))
				}
			}
		} else if changed {
			l.Step, l.Planned, l.Ends = "", -1, time.Time{}
		}
	}
	for _, name := range order {
		if v, ok := now[name]; ok {
			l.Now = append(l.Now, v)
		}
	}
	l.Newton = total(now)
	return l
}

func total(loads map[string]ingest.LoadValue) float64 {
	sum := 0.0
	for _, v := range loads {
		sum += v.Newton
	}
	return sum
}
