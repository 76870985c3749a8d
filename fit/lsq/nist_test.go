package lsq

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"gonum.org/v1/gonum/diff/fd"
)

// certified is a NIST nonlinear regression problem, read from testdata/nist.
type certified struct {
	name       string
	starts     [2][]float64
	want       []float64
	deviations []float64
	sum        float64
	y          []float64
	x          [][]float64
	model      certifiedModel
}

func readCertified(t testing.TB) []*certified {
	files, err := filepath.Glob(filepath.Join("..", "..", "testdata", "nist", "*.csv"))
	if err != nil {
		t.Fatal(err)
	}
	if len(files) != 27 || len(certifiedModels) != 27 {
		t.Fatalf("%d files and %d models, NIST has 27 problems", len(files), len(certifiedModels))
	}
	var all []*certified
	for _, name := range files {
		f, err := os.Open(name)
		if err != nil {
			t.Fatal(err)
		}
		r := csv.NewReader(f)
		r.Comment, r.FieldsPerRecord = '#', -1
		records, err := r.ReadAll()
		f.Close()
		if err != nil {
			t.Fatal(err)
		}
		c := &certified{name: strings.TrimSuffix(filepath.Base(name), ".csv")}
		c.model = certifiedModels[c.name]
		for _, record := range records {
			v := make([]float64, len(record)-1)
			for i, text := range record[1:] {
				if v[i], err = strconv.ParseFloat(text, 64); err != nil {
					t.Fatalf("%s: %v", name, err)
				}
			}
			switch record[0] {
			case "parameter":
				c.starts[0], c.starts[1] = append(c.starts[0], v[0]), append(c.starts[1], v[1])
				c.want, c.deviations = append(c.want, v[2]), append(c.deviations, v[3])
			case "sum":
				c.sum = v[0]
			case "data":
				if c.name == "nelson" {
					v[0] = math.Log(v[0])
				}
				c.y, c.x = append(c.y, v[0]), append(c.x, v[1:])
			}
		}
		if c.model == nil {
			t.Fatalf("%s: no model", name)
		}
		all = append(all, c)
	}
	return all
}

func (c *certified) squares() Squares {
	n := len(c.want)
	d := make([]float64, n)
	return Squares{
		Rows: len(c.y), Params: n,
		Residuals: func(r, p []float64) {
			for i, y := range c.y {
				r[i] = c.model(d, c.x[i], p) - y
			}
		},
		Jacobian: func(j, p []float64) {
			for i := range c.y {
				c.model(j[i*n:i*n+n], c.x[i], p)
			}
		},
	}
}

// digits counts correct significant digits, at most 11: the NIST tables certify no more. NaN stays NaN: fail on !(d >= 6).
func digits(got, certified float64) float64 {
	if got == certified {
		return 11
	}
	return max(0, min(11, -math.Log10(math.Abs(got/certified-1))))
}

func worst(got, want []float64) float64 {
	least := 11.0
	for i, v := range got {
		least = min(least, digits(v, want[i])) // min keeps NaN
	}
	return least
}

func TestNISTJacobians(t *testing.T) {
	for _, c := range readCertified(t) {
		n := len(c.want)
		f := c.squares()
		jac, ignored := make([]float64, f.Rows*n), make([]float64, n)
		for _, at := range [][]float64{c.want, c.starts[0], c.starts[1]} {
			f.Jacobian(jac, at)
			for j, b := range at {
				most := 0.0 // of the column
				for i := range c.x {
					most = max(most, math.Abs(jac[i*n+j]))
				}
				for i, x := range c.x {
					// By a factor on the parameter. Central differences lose the step's square, times 1e4 at worst (a position in units of
					// its width, squared), and rounding of the value over the step.
					const step = 1e-6
					q := append([]float64(nil), at...)
					got := fd.Derivative(func(factor float64) float64 {
						q[j] = b * factor
						return c.model(ignored, x, q)
					}, 1, &fd.Settings{Formula: fd.Central, Step: step}) / b
					value := c.model(ignored, x, at)
					tol := 1e4*step*step*most + 10*epsilon/step*math.Abs(value/b)
					if d := jac[i*n+j]; !(math.Abs(got-d) <= tol) {
						t.Errorf("%s row %d at %v: derivative %d is %g, by differences %g", c.name, i, at, j+1, d, got)
					}
				}
			}
		}
	}
}

// TestNISTNumbers guards the files: the certified sum of squares follows from data and certified parameters.
func TestNISTNumbers(t *testing.T) {
	for _, c := range readCertified(t) {
		if c.name == "lanczos1" {
			continue // its sum is below what eleven digits of the parameters give
		}
		r := make([]float64, len(c.y))
		c.squares().Residuals(r, c.want)
		// One in the eleventh digit, and what rounding of the model's values does to the sum.
		tol := 1e-10 + 2*epsilon*norm(c.y)/norm(r)
		if got := squares(r); !(math.Abs(got/c.sum-1) <= tol) {
			t.Errorf("%s: sum %.11g at the certified parameters, certified %.11g", c.name, got, c.sum)
		}
	}
}

// TestNIST fits all problems from both starts, all with the zero settings. Six digits of the certified values are asked of
// every parameter and standard deviation; the table (go test -v) shows the worst of each.
func TestNIST(t *testing.T) {
	for _, c := range readCertified(t) {
		n := len(c.want)
		s := NewGeneral(len(c.y), n)
		for k, start := range c.starts {
			p := append([]float64(nil), start...)
			res := s.Minimize(c.squares(), p, GeneralSettings{})
			se := s.deviations(res, n)
			params, deviations := worst(p, c.want), worst(se, c.deviations)
			t.Logf("%-9s %d  %4d steps  %-10v %.1e  parameters %4.1f  deviations %4.1f  sum %4.1f",
				c.name, k+1, res.Iterations, res.End, res.Remaining, params, deviations, digits(res.Sum, c.sum))
			if res.End != Converged {
				t.Errorf("%s from start %d: %v", c.name, k+1, res.End)
			}
			if !(params >= 6) {
				t.Errorf("%s from start %d: %.1f digits in the parameters", c.name, k+1, params)
			}
			if c.name == "lanczos1" {
				continue // residuals at the rounding of the data: the deviations are noise
			}
			if !(deviations >= 6) {
				t.Errorf("%s from start %d: %.1f digits in the standard deviations", c.name, k+1, deviations)
			}
		}
	}
}

// TestNISTInsideBounds fits in a box just around start and solution, which the search must not ask outside. A box makes local
// optima of its own on its faces: one problem, a peak that starts beyond nearly all its data, runs into one.
func TestNISTInsideBounds(t *testing.T) {
	onFace := 0
	for _, c := range readCertified(t) {
		for k, start := range c.starts {
			f := c.squares()
			f.Lower, f.Upper = make([]float64, f.Params), make([]float64, f.Params)
			for j, v := range start {
				margin := 0.1 * math.Abs(v-c.want[j])
				f.Lower[j], f.Upper[j] = min(v, c.want[j])-margin, max(v, c.want[j])+margin
			}
			residuals, outside := f.Residuals, 0
			f.Residuals = func(r, p []float64) {
				for j, v := range p {
					if !(v >= f.Lower[j] && v <= f.Upper[j]) {
						outside++
					}
				}
				residuals(r, p)
			}
			p := append([]float64(nil), start...)
			res := NewGeneral(f.Rows, f.Params).Minimize(f, p, GeneralSettings{})
			digits := worst(p, c.want)
			if res.End == Converged && res.Free < f.Params {
				onFace++
				t.Logf("%s from start %d: on the face of the box, sum %g, certified %g", c.name, k+1, res.Sum, c.sum)
				digits = 6
			}
			if res.End != Converged || outside > 0 || !(digits >= 6) {
				t.Errorf("%s from start %d: %v after %d steps, %.1f digits, %d times outside the bounds", c.name, k+1, res.Reason(), res.Iterations, digits, outside)
			}
		}
	}
	if onFace > 1 {
		t.Errorf("%d fits ended on a face", onFace)
	}
}

// TestNISTWithoutDerivatives repeats the fits with numerical Jacobians. They must not be the weak link: the same digits are
// asked.
func TestNISTWithoutDerivatives(t *testing.T) {
	for _, c := range readCertified(t) {
		n := len(c.want)
		f := c.squares()
		f.Jacobian = nil
		s := NewGeneral(len(c.y), n)
		for k, start := range c.starts {
			p := append([]float64(nil), start...)
			res := s.Minimize(f, p, GeneralSettings{})
			params, deviations := worst(p, c.want), worst(s.deviations(res, n), c.deviations)
			if res.End != Converged || !(params >= 6) || c.name != "lanczos1" && !(deviations >= 6) {
				t.Errorf("%s from start %d: %v after %d steps, %.1f and %.1f digits", c.name, k+1, res.End, res.Iterations, params, deviations)
			}
		}
	}
}

// deviations are the standard errors after a fit with weights known up to a factor.
func (s *General) deviations(res GeneralResult, n int) []float64 {
	cov := make([]float64, n*n)
	for i := range cov {
		cov[i] = math.NaN()
	}
	s.Covariance(cov)
	se := make([]float64, n)
	for i := range se {
		se[i] = math.Sqrt(cov[i*n+i] * res.Sum / float64(s.rows-n))
	}
	return se
}
