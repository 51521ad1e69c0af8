package report

import (
	"fmt"
	"strings"
	"time"

	"gaugelog/analysis"
	"gaugelog/config"
)

// builder carries what every section needs.
type builder struct {
	r    *analysis.Result
	rig  *config.Rig
	o    Options
	u    units
	zone *time.Location
}

func (b *builder) title() string {
	if b.r.Run.Title != "" {
		return b.r.Run.Title
	}
	return "Sag test"
}

func (b *builder) subtitle() string {
	return fmt.Sprintf("Sag test, %s to %s, %s readings",
		b.local(b.r.Run.First), b.local(b.r.Run.Last), grouped(fmt.Sprint(b.r.Run.Readings)))
}

// answers is the first page: what a client asks, in words and numbers.
func (b *builder) answers() Section {
	t := Table{
		Columns: []Column{{Name: "Question", Text: true}, {Name: "Answer", Text: true}, {Name: "How sure, and on what terms", Text: true}},
	}
	add := func(q, a, sure string) { t.Rows = append(t.Rows, []string{q, a, sure}) }
	b.answerStiff(add)
	b.answerSag(add)
	b.answerCreep(add)
	b.answerForecast(add)
	b.answerTrouble(add)
	b.answerRules(add)
	s := Section{ID: "answers", Title: "In short", Blocks: []Block{t, List{Grave: true, Items: []string{
		Cautions[0] + " All cautions stand at the end.", Cautions[len(Cautions)-1]}}}}
	if f, ok := b.historyFigure(); ok {
		s.Blocks = append(s.Blocks, f)
	}
	return s
}

func (b *builder) answerStiff(add func(q, a, s string)) {
	s := b.r.Stiffness
	after := span(s.InitialAfterS)
	if s.Modulus == nil {
		add("How stiff is it?", "not measured", b.whyMissing("modulus"))
		return
	}
	f := b.figure(*s.Modulus)
	sure := "standard uncertainty " + percentU(s.Modulus)
	if f.expanded != "" {
		sure = "± " + f.expanded + " " + f.unit + " for 95 % (k = " + f.k + ")"
	}
	add("How stiff is it?", "E = "+f.value+" "+f.unit, sure+"; "+after+" after full load, so it holds the creep of that time; "+b.shearWords())
}

// shearWords says where the shear stiffness behind E comes from.
func (b *builder) shearWords() string {
	switch b.r.Stiffness.ShearFrom {
	case "test":
		return "shear told apart by the test"
	case "prior":
		return "shear taken from a stated assumption"
	}
	return "shear not separated"
}

func (b *builder) answerSag(add func(q, a, s string)) {
	c := b.r.Creep
	if len(c.After) == 0 {
		add("How far did it sag?", "not measured", b.whyMissing("creep"))
		return
	}
	var a []string
	for _, p := range c.After {
		a = append(a, b.short(&p.Sag)+" at "+span(p.AfterS))
	}
	last := c.After[len(c.After)-1]
	add("How far did it sag?", strings.Join(a, ", "),
		fmt.Sprintf("gauge %s, step %s, from full load, net of support movement; u = %s %s at the last", c.Gauge, c.Step, b.cellU(&last.Sag), b.u.of("mm")))
}

func (b *builder) answerCreep(add func(q, a, s string)) {
	c := b.r.Creep
	if n, ok := c.Parameters["n"]; ok && c.Model == "power" {
		last := ""
		for _, p := range c.After {
			if p.Coefficient != nil {
				last = "creep coefficient " + b.short(p.Coefficient) + " at " + span(p.AfterS) + ", "
			}
		}
		add("How does it creep?", last+"time exponent n = "+b.short(&n), "against the sag "+span(c.InitialAfterS)+" after full load of the same step; "+b.stageWords())
	}
	if len(c.Recovery) > 0 {
		p := c.Recovery[len(c.Recovery)-1]
		share := p.Recovered
		share.Value *= 100
		if share.U != nil {
			u := *share.U * 100
			share.U = &u
		}
		share.Unit, share.K, share.U95 = "%", nil, nil
		add("Did it come back?", b.short(&share)+" of the sag, "+span(p.AfterS)+" after unloading", "left then: "+b.with(&p.Residual))
	}
}

func (b *builder) stageWords() string {
	switch b.r.Creep.Stage {
	case "primary":
		return "the creep is slowing down (primary)"
	case "secondary":
		return "the creep is steady (secondary)"
	case "tertiary":
		return "THE CREEP IS SPEEDING UP (tertiary): clear the area, do not go near to check"
	}
	return "no stage could be told"
}

func (b *builder) answerForecast(add func(q, a, s string)) {
	for _, f := range b.r.Creep.Forecast {
		q := "How far after " + strings.ReplaceAll(span(f.AfterS), " ", "\u00a0") + "?"
		if f.Sag == nil || f.Lo95 == nil || f.Hi95 == nil {
			add(q, "no figure", f.Refused)
			continue
		}
		factor, unit := b.u.convert("mm")
		d := decimalsFor((*f.Hi95 - *f.Lo95) * factor / 4)
		how := "within the time read"
		if f.Decades > 0 {
			how = fixed(f.Decades, 2) + " decades beyond the data: " + forecastWords(f.Label)
		}
		add(q, b.short(f.Sag), fmt.Sprintf("%s to %s %s for 95 %%; %s", fixed(*f.Lo95*factor, d), fixed(*f.Hi95*factor, d), unit, how))
	}
	b.answerStop(add)
}

// answerStop says what the band of the farthest forecast was, is and would be.
func (b *builder) answerStop(add func(q, a, s string)) {
	var before, later []string
	var now, far string
	for _, s := range b.r.Creep.MayStop {
		width := b.short(&s.ForecastWidth)
		far = span(s.ForecastAfterS)
		switch {
		case s.MoreS < 0:
			before = append(before, width+" "+span(-s.MoreS)+" earlier")
		case s.MoreS == 0:
			now = width
		default:
			later = append(later, width+" after "+span(s.MoreS)+" more")
		}
	}
	if now == "" {
		if len(b.r.Creep.Forecast) > 0 {
			add("May we stop?", "not to be told", "no forecast stands whose interval could shrink; the decision is the engineer's")
		}
		return
	}
	a, would := "the 95 % interval for "+far+" is "+now+" wide", "it would be "
	if b.unloaded() {
		a, would = "the 95 % interval for "+far+" was "+now+" wide at the unloading", "had the load stayed it would be "
	}
	sure := "the decision is the engineer's"
	if len(later) > 0 {
		sure = would + strings.Join(later, ", ") + "; " + sure
	}
	if len(before) > 0 {
		sure = "it was " + strings.Join(before, ", ") + "; " + sure
	}
	add("May we stop?", a, sure)
}

// unloaded reports whether load was taken off after the creep step.
func (b *builder) unloaded() bool {
	for i, s := range b.r.Steps {
		if s.Step == b.r.Creep.Step && i+1 < len(b.r.Steps) {
			return total(b.r.Steps[i+1]) < total(s)
		}
	}
	return false
}

func forecastWords(label string) string {
	switch label {
	case "plain":
		return "within half a decade"
	case "caution":
		return "use with caution"
	case "informative":
		return "informative, not for acceptance"
	}
	return label
}

func (b *builder) answerTrouble(add func(q, a, s string)) {
	n := len(b.r.Disturbances)
	if n == 0 {
		add("Was it disturbed?", "no disturbance found", "searched in every gauge")
		return
	}
	counts := map[string]int{}
	var kinds []string
	for _, d := range b.r.Disturbances {
		if counts[d.Kind]++; counts[d.Kind] == 1 {
			kinds = append(kinds, d.Kind)
		}
	}
	for i, k := range kinds {
		words, known := disturbanceWords[k]
		if !known {
			words = k
		}
		if kinds[i] = words; counts[k] > 1 {
			kinds[i] = fmt.Sprintf("%s (%d times)", words, counts[k])
		}
	}
	add("Was it disturbed?", strings.Join(kinds, ", "), "each is listed with how it was treated")
}

// disturbanceWords says the result's kinds of disturbance as people do.
var disturbanceWords = map[string]string{
	"bench-knock": "the bench knocked", "gauge-knock": "a gauge knocked", "zero-pressed": "a zero pressed",
	"spike": "a spike", "load-change": "a load changed", "support-shift": "a support shifted", "unit-key": "a unit key pressed",
	"frozen": "a gauge frozen", "end-of-travel": "a gauge at its end of travel", "gap": "a gap in the readings", "undecided": "something undecided",
}

// answerRules counts the clauses that were decided.
func (b *builder) answerRules(add func(q, a, s string)) {
	if len(b.r.Evaluations) == 0 {
		return
	}
	held, decided := 0, 0
	var failed []string
	for _, e := range b.r.Evaluations {
		if e.Pass == nil {
			continue
		}
		decided++
		if *e.Pass {
			held++
		} else {
			failed = append(failed, e.Rule+": "+e.Clause)
		}
	}
	a := fmt.Sprintf("%d of %d decided clauses hold", held, decided)
	switch {
	case decided == 0:
		a = "no clause could be decided"
	case len(failed) > 0:
		a = "NO: " + strings.Join(failed, ", ")
	}
	sure := "informative; the standard's text, its edition and a licensed engineer decide"
	if open := len(b.r.Evaluations) - decided; open > 0 {
		sure += fmt.Sprintf("; %d more are figures or could not be decided", open)
	}
	add("Does it hold the rules asked for?", a, sure)
}

// whyMissing finds the warning that explains a missing figure.
func (b *builder) whyMissing(code string) string {
	for _, w := range b.r.Warnings {
		if strings.Contains(w.Code, code) {
			return w.Text
		}
	}
	return "the readings do not allow it"
}
