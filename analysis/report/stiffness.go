package report

import (
	"cmp"
	"fmt"
	"slices"
	"strings"

	"gaugelog/analysis"
)

// stiffness is the result, its fit and its budget.
func (b *builder) stiffness() Section {
	st := b.r.Stiffness
	s := Section{ID: "stiffness", Title: "Stiffness",
		Lead: "One weighted least-squares estimate from all gauges and steps, " + span(st.InitialAfterS) + " after full load."}
	t := Table{Caption: "Stiffness", Columns: []Column{{Name: "Quantity", Text: true}, {Name: "Value", Text: true}}}
	add := func(name string, q *analysis.Q) {
		if q != nil {
			t.Rows = append(t.Rows, []string{name, b.with(q)})
		}
	}
	add("Modulus of elasticity E (shear taken out)", st.Modulus)
	add("Apparent modulus (from the creep gauge, all its sag taken for bending)", st.ApparentModulus)
	add("Shear modulus G, "+b.shearWords(), st.ShearModulus)
	add("Bending stiffness EI", st.Bending)
	add("Shear stiffness", st.Shear)
	for _, c := range st.Supports {
		add("Compliance of support "+c.Name, c.Compliance)
	}
	for _, g := range st.StiffnessAt {
		add("Load over sag at "+g.Gauge, g.Ratio)
	}
	for _, m := range st.Standards {
		add(m.Standard+" at "+m.Gauge+": "+m.Includes, &m.Modulus)
	}
	if len(t.Rows) == 0 {
		s.Lead = ""
		s.Blocks = append(s.Blocks, Paragraph{"No stiffness was worked out: " + b.whyMissing("modulus") + "."})
		return s
	}
	t.Says = "Intervals are U = k u for 95 % (JCGM 100). E divides EI by the second moment of area measured; the apparent modulus leaves shear in. Self-weight was on before the baseline and is in no sag."
	s.Blocks = append(s.Blocks, t)
	s.Blocks = append(s.Blocks, b.fitWords()...)
	s.Blocks = append(s.Blocks, b.fitTables()...)
	if len(st.Budget) > 0 {
		s.Blocks = append(s.Blocks, b.budgetTable())
	}
	if st.MonteCarlo != nil {
		s.Blocks = append(s.Blocks, b.drawsTable(st.MonteCarlo))
	}
	return s
}

// fitWords say how well the model holds the readings and what they cannot tell
// apart.
func (b *builder) fitWords() []Block {
	st := b.r.Stiffness
	f := st.Fit
	if f == nil {
		return nil
	}
	text := fmt.Sprintf("Fit: chi-square %s with %d degrees of freedom (p = %s); condition number %s.",
		significant(f.Chi2, 3), f.DOF, significant(f.P, 2), significant(f.Condition, 3))
	if f.Birge > 1 {
		text += " The uncertainties were widened by " + fixed(f.Birge, 2) + " because the residuals are larger than stated uncertainties allow."
	}
	if st.CorrelationBendingShear != nil {
		text += " Correlation of bending and shear: " + fixed(*st.CorrelationBendingShear, 3) + "."
	}
	if st.ShearText != "" {
		text += " Shear stiffness: " + st.ShearText + "."
	}
	out := []Block{Paragraph{text}}
	if n := len(f.Unknowns); n > 1 && n <= mostGauges && len(f.Correlation) == n {
		t := Table{Caption: "Correlation of what was fitted", Columns: []Column{{Name: "", Text: true}}}
		for i, name := range f.Unknowns {
			t.Columns = append(t.Columns, Column{Name: fmt.Sprint(i + 1)})
			row := []string{fmt.Sprintf("%d: %s", i+1, name)}
			for j := range n {
				row = append(row, fixed(f.Correlation[i][j], 2))
			}
			t.Rows = append(t.Rows, row)
		}
		t.Says = "Of the flexibilities (1/EI, 1/S) and compliances as fitted. Two with a correlation near 1 or −1 are known together better than each alone."
		out = append(out, t)
	}
	return out
}

// drawsTable sets the drawn intervals beside the propagated ones.
func (b *builder) drawsTable(mc *analysis.MonteCarlo) Table {
	t := Table{Caption: "Check by draws of all inputs", Columns: []Column{{Name: "Figure", Text: true}, {Name: "Unit", Text: true},
		{Name: "Propagated, 95 %"}, {Name: "Drawn, 95 %"}, {Name: "May differ by"}, {Name: "Verdict", Text: true}}}
	for _, f := range []struct {
		name string
		d    analysis.Drawn
	}{{"Modulus of elasticity E", mc.Modulus}, {"Bending stiffness EI", mc.Bending}} {
		factor, unit := b.u.convert(f.d.Unit)
		places := decimalsFor(f.d.Tolerance * factor)
		pair := func(lo, hi float64) string { return fixed(lo*factor, places) + " to " + fixed(hi*factor, places) }
		verdict := [...]string{"DIFFER: use the drawn interval", "agree to one digit of u", "agree to two digits of u"}[min(2, max(0, f.d.Digits))]
		t.Rows = append(t.Rows, []string{f.name, unit, pair(f.d.PropagatedLo95, f.d.PropagatedHi95), pair(f.d.Lo95, f.d.Hi95),
			fixed((f.d.Tolerance+2*f.d.Noise)*factor, places), verdict})
	}
	t.Says = fmt.Sprintf("%s draws by JCGM 101, seed %d: every input drawn from its distribution, the fit made anew each time. The ends may differ by half a unit of that digit of u and by twice the draws' own noise.",
		grouped(fmt.Sprint(mc.Draws)), mc.Seed)
	if mc.Refused > 0 {
		t.Says += fmt.Sprintf(" %d draws made no beam and were left out.", mc.Refused)
	}
	return t
}

// budgetTable is the GUM's: inputs with type, distribution, degrees of
// freedom, sensitivity and share, greatest first.
func (b *builder) budgetTable() Table {
	factor, unit := b.u.convert("MPa")
	t := Table{Caption: "Uncertainty budget of E", Columns: []Column{
		{Name: "Input", Text: true}, {Name: "Type"}, {Name: "Distribution", Text: true}, {Name: "Freedom"}, {Name: "Its u", Text: true},
		{Name: "Sensitivity", Text: true}, {Name: "Share of variance", Unit: "%"}, {Name: "From", Text: true}}}
	for _, l := range b.r.Stiffness.Budget {
		f, of := b.u.convert(l.UInput.Unit)
		dof := "many"
		if l.DOF != nil {
			dof = significant(*l.DOF, 2)
		}
		per := unit
		if of != "" {
			per += " per " + of
		}
		t.Rows = append(t.Rows, []string{l.Input, l.Type, l.Distribution, dof, strings.TrimSpace(significant(l.UInput.Value*f, 2) + " " + of),
			significant(l.Sensitivity*factor/f, 2) + " " + per, fixed(100*l.Share, 1), l.Source})
	}
	t.Says = "By the GUM (JCGM 100): the share is each input's part of the variance of E."
	if q := b.r.Stiffness.Modulus; q != nil && q.U != nil {
		f := b.figure(*q)
		t.Says += " Together u = " + f.u + " " + f.unit
		if q.DOF != nil {
			t.Says += " with " + significant(*q.DOF, 2) + " effective degrees of freedom (Welch and Satterthwaite)"
		}
		if f.expanded != "" {
			t.Says += ", k = " + f.k + ", U95 = " + f.expanded + " " + f.unit
		}
		t.Says += "."
	}
	return t
}

// fitTables show what the fitted beam leaves over, by step and gauge.
func (b *builder) fitTables() []Block {
	rest := b.r.Stiffness.Residuals
	if len(rest) == 0 {
		return nil
	}
	micro, unit := b.small()
	var gauges, steps []string
	cell := map[[2]string]string{}
	for _, v := range rest {
		if !slices.Contains(gauges, v.Gauge) {
			gauges = append(gauges, v.Gauge)
		}
		if !slices.Contains(steps, v.Step) {
			steps = append(steps, v.Step)
		}
		d := max(0, decimalsFor(v.U*micro))
		cell[[2]string{v.Step, v.Gauge}] = fixed(v.MM*micro, d)
	}
	var out []Block
	for from := 0; from < len(gauges); from += mostGauges {
		part := gauges[from:min(from+mostGauges, len(gauges))]
		t := Table{Caption: "Reading less fitted beam, " + unit, Columns: []Column{{Name: "Step", Text: true}}}
		for _, g := range part {
			t.Columns = append(t.Columns, Column{Name: g})
		}
		for _, st := range steps {
			row := []string{st}
			for _, g := range part {
				row = append(row, cmp.Or(cell[[2]string{st, g}], "–"))
			}
			t.Rows = append(t.Rows, row)
		}
		t.Says = "Of the increments of initial sag, support movement and plunger forces in the model: what one gauge leaves over in every step is its own fault, what all leave over in one step is the load's."
		out = append(out, t)
	}
	return out
}
