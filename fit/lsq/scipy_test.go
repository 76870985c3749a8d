package lsq

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"

	"bandgrid/fit/line"
)

// TestBandsAgainstSciPy compares the fit of 24 noisy spectra, with frozen weights, with what an independent library found
// (MINPACK by way of SciPy; versions and script in testdata/scipy).
func TestBandsAgainstSciPy(t *testing.T) {
	type fitted struct{ value, se, chi2 float64 }
	spectra := map[string][][]float64{} // spectrum -> channels of shift, counts, sigma
	window := map[string]string{}
	for _, row := range readCSV(t, "../../testdata/scipy/spectra.csv") {
		window[row[0]] = row[1]
		spectra[row[0]] = append(spectra[row[0]], []float64{number(t, row[2]), number(t, row[3]), number(t, row[4])})
	}
	want := map[string]map[string]fitted{}
	for _, row := range readCSV(t, "../../testdata/scipy/fits.csv") {
		if want[row[0]] == nil {
			want[row[0]] = map[string]fitted{}
		}
		want[row[0]][row[2]] = fitted{number(t, row[3]), number(t, row[4]), number(t, row[5])}
	}
	if len(spectra) < 20 || len(want) != len(spectra) {
		t.Fatalf("%d spectra and %d fits; at least 20 of each are needed", len(spectra), len(want))
	}
	worst, worstSE := 0.0, 0.0
	for id, channels := range spectra {
		bands := []string{"d", "g", "dprime"}
		start := []float64{0, 0, 100, 1341, 24, 100, 1581.6, 15, 30, 1619, 13}
		if window[id] == "2d" {
			bands, start = []string{"2d"}, []float64{0, 0, 100, 2670, 30}
		}
		x := make([]float64, len(channels))
		for i, c := range channels {
			x[i] = c[0]
		}
		b := NewBands(x, 1, lorentzians(len(bands))...)
		for i, c := range channels {
			b.Y[i], b.RootW[i] = c[1], 1/c[2]
		}
		b.SetWeights()
		p := start
		lo, hi, free := unbounded(len(p))
		// Heights and background first, as the fitter does.
		for k := range bands {
			free[b.Band(k)+line.Position], free[b.Band(k)+line.Width] = false, false
		}
		s := NewSolver(len(p))
		s.Minimize(b, p, lo, hi, free, len(x), Settings{})
		for i := range free {
			free[i] = true
		}
		res := s.Minimize(b, p, lo, hi, free, len(x), Settings{})
		cov := make([]float64, len(p)*len(p))
		if res.End != Converged || !s.Covariance(cov, len(p)) {
			t.Errorf("spectrum %s: %v", id, res.End)
			continue
		}
		names := []string{"b0", "b1"}
		for _, band := range bands {
			names = append(names, band+"_height", band+"_position", band+"_width")
		}
		for i, name := range names {
			w, ok := want[id][name]
			if !ok {
				t.Fatalf("spectrum %s: the library's fit has no %s", id, name)
			}
			d := math.Abs(p[i]-w.value) / w.se
			e := math.Abs(math.Sqrt(cov[i*len(p)+i])/w.se - 1)
			worst, worstSE = math.Max(worst, d), math.Max(worstSE, e)
			// The search ends when the remaining step is 1e-4 standard errors of all parameters together. Standard errors change
			// with the parameters, by about as much again.
			if !(d <= 1e-3) || !(e <= 1e-3) {
				t.Errorf("spectrum %s: %s is %.8g ± %.4g, the library found %.8g ± %.4g", id, name, p[i], math.Sqrt(cov[i*len(p)+i]), w.value, w.se)
			}
		}
		if chi2 := want[id]["b0"].chi2; !(math.Abs(res.Sum/chi2-1) <= 1e-6) {
			t.Errorf("spectrum %s: chi-square %.8g, the library found %.8g", id, res.Sum, chi2)
		}
	}
	t.Logf("%d spectra: at most %.1e standard errors apart, standard errors within %.1e", len(spectra), worst, worstSE)
}

func readCSV(t *testing.T, name string) [][]string {
	t.Helper()
	f, err := os.Open(name)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	return rows[1:]
}

func number(t *testing.T, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func lorentzians(n int) (shapes []line.Shape) {
	for range n {
		shapes = append(shapes, line.Lorentzian{})
	}
	return shapes
}
