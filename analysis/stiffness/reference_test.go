package stiffness

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"gaugelog/analysis/lsq"
)

// Source: testdata/gum_H1_end_gauge.json: JCGM 100:2008 annex H.1, inputs
// unrounded as the file recommends; its nu_eff 16.75 and uc 31.66 nm are
// recomputed there, the published 16 and 32 nm their roundings.
func TestBudgetOfEndGauge(t *testing.T) {
	const lS, alpha = 50000623.0, 11.5e-6
	d0, d1, d2 := 13/math.Sqrt(5), 10/2.57, 20.0/3
	q, lines := combine(50000838, []Line{
		{Input: "standard", U: 25, DOF: 18, Sensitivity: 1},
		{Input: "repeats", U: d0, DOF: 24, Sensitivity: 1},
		{Input: "comparator, random", U: d1, DOF: 5, Sensitivity: 1},
		{Input: "comparator, systematic", U: d2, DOF: 8, Sensitivity: 1},
		{Input: "expansion coefficients", U: 1e-6 / math.Sqrt(3), DOF: 50, Sensitivity: lS * 0.1},
		{Input: "temperatures", U: 0.05 / math.Sqrt(3), DOF: 2, Sensitivity: -lS * alpha},
	})
	if math.Abs(q.U-31.66) > 0.01 {
		t.Errorf("uc %g nm, want 31.66", q.U)
	}
	// Three comparator parts stand singly here and as one part with 25.4
	// degrees of freedom there: the same by Welch and Satterthwaite.
	if math.Abs(q.DOF-16.75) > 0.01 || math.Floor(q.DOF) != 16 {
		t.Errorf("effective degrees of freedom %g, want 16.75", q.DOF)
	}
	sum := 0.0
	for _, l := range lines {
		sum += l.Share
	}
	relative(t, "sum of shares", sum, 1, 1e-12)
}

// Source: testdata/welch_satterthwaite.json: JCGM 100:2008 G.4.1 (FROM
// MEMORY there, recomputed).
func TestWelchSatterthwaite(t *testing.T) {
	q, _ := combine(1, []Line{{U: 0.25, DOF: 9, Sensitivity: 1}, {U: 0.57, DOF: 4, Sensitivity: 1}, {U: 0.82, DOF: 14, Sensitivity: 1}})
	relative(t, "uc", q.U, 1.0294658809304948, 1e-12)
	relative(t, "nu", q.DOF, 18.998742314267957, 1e-12)
	relative(t, "U", q.U95, 2.1546968519801184, 1e-4) // there with t(19), here with t(18.9987)
	four := Line{U: 1, DOF: 10, Sensitivity: 1}
	if q, _ = combine(1, []Line{four, four, four, four}); math.Abs(q.DOF-40) > 1e-9 {
		t.Errorf("four equal parts of 10: %g, want 40", q.DOF)
	}
}

// Source: testdata/student_t_gum_table_G2.csv (JCGM 100:2008 table G.2,
// computed there with more digits).
func TestCoverageFactors(t *testing.T) {
	raw, err := os.ReadFile("testdata/student_t_gum_table_G2.csv")
	if err != nil {
		t.Fatal(err)
	}
	r := csv.NewReader(strings.NewReader(string(raw)))
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil || len(rows) != 29 {
		t.Fatalf("%d rows, %v", len(rows), err)
	}
	for _, row := range rows[1:] {
		nu, err := strconv.ParseFloat(row[0], 64)
		if err != nil {
			t.Fatal(err)
		}
		want, _ := strconv.ParseFloat(row[3], 64)
		if got := lsq.Coverage95(nu); math.Abs(got-want) > 1e-6*want {
			t.Errorf("t95(%g) = %.7g, want %.7g", nu, got, want)
		}
	}
}

// Source: testdata/standards_formulas.json. The formulas are FROM MEMORY
// there, each derived again from beam theory; the numeric cases are exact.
func TestStandardsFormulas(t *testing.T) {
	var ref struct {
		Cases []struct {
			Case string
			A    float64 `json:"a"`
			AMM  float64 `json:"a_mm"`
			L1   float64 `json:"l1_mm"`
			L    float64
			B, H float64
			DF   float64 `json:"dF_N"`
			DW   string  `json:"dw_mm"`
			E    string  `json:"E_MPa"`
			P    float64
			D    string `json:"Delta_mm"`
			EApp string `json:"E_app_MPa"`
			F    float64
			FN   float64 `json:"F_N"`
			S    string  `json:"s_t_mm"`
			Et   string  `json:"E_t_MPa"`
			DL   string  `json:"D_over_L"`
			HL   string  `json:"d_over_L"`
			K    string  `json:"factor"`
		} `json:"numeric_cases"`
	}
	raw, err := os.ReadFile("testdata/standards_formulas.json")
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, &ref); err != nil {
		t.Fatal(err)
	}
	ratio := func(s string) float64 {
		n, d, found := strings.Cut(s, "/")
		v, err := strconv.ParseFloat(n, 64)
		if err != nil {
			t.Fatal(err)
		}
		if found {
			w, err := strconv.ParseFloat(d, 64)
			if err != nil {
				t.Fatal(err)
			}
			v /= w
		}
		return v
	}
	done := 0
	for _, c := range ref.Cases {
		var got float64
		want := c.E
		switch c.Case {
		case "EN 408 local":
			got = EN408Local(c.AMM, c.L1, c.B*c.H*c.H*c.H/12, c.DF, ratio(c.DW))
		case "EN 408 global, no shear":
			got = EN408Global(c.A, c.L, c.B, c.H, c.DF, ratio(c.DW), math.Inf(1))
		case "EN 408 global, G=650":
			got = EN408Global(c.A, c.L, c.B, c.H, c.DF, ratio(c.DW), 650)
		case "ISO 899-2":
			got, want = ThreePoint(c.L, c.B, c.H, c.FN/ratio(c.S)), c.Et
		case "D198 third point, P total":
			got, want = D198TwoPoint(c.L/3, c.L, c.B, c.H, c.P, ratio(c.D)), c.EApp
		case "D790 large-span factor":
			got, want = D790LargeSpan(ratio(c.DL), ratio(c.HL), 1), c.K
		default:
			continue
		}
		done++
		relative(t, c.Case, got, ratio(want), 1e-12)
	}
	if done != 6 {
		t.Errorf("%d cases checked, want 6", done)
	}
	relative(t, "ASTM D198 shear-free equals EN 408 local", D198ShearFree(600, 500, 50, 100, 1000, 9.0/40), 10000, 1e-12)
}
