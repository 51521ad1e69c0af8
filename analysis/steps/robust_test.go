package steps

import (
	"encoding/json"
	"math"
	"os"
	"strconv"
	"testing"
)

// The published examples of testdata/robust_checks.json; sources stand in it.
func TestRobustAgainstPublishedExamples(t *testing.T) {
	text, err := os.ReadFile("testdata/robust_checks.json")
	if err != nil {
		t.Fatal(err)
	}
	var ref struct {
		Scale struct {
			Value float64 `json:"1/Phi^-1(3/4)"`
		} `json:"mad_constant"`
		Tuning struct {
			K float64 `json:"k_95pct_efficiency"`
		} `json:"huber_tuning"`
		MAD struct {
			Data   []float64 `json:"data"`
			Median float64   `json:"median"`
			Raw    float64   `json:"MAD_raw"`
		} `json:"mad_example"`
		Exact struct {
			X         []float64 `json:"x"`
			Y         []string  `json:"y"`
			Slope     float64   `json:"median_slope_float"`
			Intercept []float64 `json:"scipy_theilslopes_0.95"`
		} `json:"theil_sen_exact_example"`
		Sen struct {
			X, Y []float64
		} `json:"sen_1968_example"`
		Chem struct {
			Data []float64 `json:"data"`
			Re   struct {
				Median float64 `json:"median"`
				MAD    float64 `json:"mad*1.4826"`
				Huber  float64 `json:"huber_mu_converged"`
			} `json:"recomputed"`
		} `json:"huber_location_chem"`
	}
	if err := json.Unmarshal(text, &ref); err != nil {
		t.Fatal(err)
	}
	check := func(what string, got, want, tol float64) {
		t.Helper()
		if math.Abs(got-want) > tol {
			t.Errorf("%s: %.12g, published %.12g", what, got, want)
		}
	}
	check("scale of the MAD", madScale, ref.Scale.Value, 1e-15)
	check("Huber's constant", huberK, ref.Tuning.K, 0)
	check("median", Median(ref.MAD.Data), ref.MAD.Median, 0)
	check("MAD", MAD(ref.MAD.Data), ref.MAD.Raw, 0)
	var y []float64
	for _, s := range ref.Exact.Y {
		v, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		y = append(y, v)
	}
	slope, intercept := TheilSen(ref.Exact.X, y)
	check("slope, exact example", slope, ref.Exact.Slope, 1e-12)
	check("intercept, exact example", intercept, ref.Exact.Intercept[1], 1e-12)
	slope, _ = TheilSen(ref.Sen.X, ref.Sen.Y)
	check("slope, Sen 1968 section 6 (read: 4)", slope, 4, 1e-12)
	check("median of the copper data", Median(ref.Chem.Data), ref.Chem.Re.Median, 1e-12)
	check("scaled MAD of the copper data", madScale*MAD(ref.Chem.Data), ref.Chem.Re.MAD, 1e-6)
	check("Huber's location of the copper data, k = 1.5", HuberLocation(ref.Chem.Data, 1.5), ref.Chem.Re.Huber, 1e-6)
}

// A local fit returns what made its points, whatever the outlier.
func TestLocalFitIsExactAndRobust(t *testing.T) {
	var x, y, u []float64
	for i := range 20 {
		v := float64(i) / 10
		x, y, u = append(x, v), append(y, 1+2*v-0.5*v*v), append(u, 0.001)
	}
	y[7] += 5
	f, ok := fitPoly(x, y, u, 2)
	if !ok || math.Abs(f.at(1.3)-(1+2.6-0.845)) > 1e-3 {
		t.Errorf("fit %v at 1.3: %v", f, f.at(1.3))
	}
	if f, ok := fitPoly([]float64{1}, []float64{3}, []float64{0.1}, 2); !ok || f.at(9) != 3 {
		t.Errorf("one point carries a constant: %v", f)
	}
	if _, ok := fitPoly(nil, nil, nil, 1); ok {
		t.Error("no points carry no fit")
	}
}
