package lsq

import "fmt"

// A Linear ties parameters to each other: p = C q + p0, with fewer free parameters q. Shared widths, fixed ratios and fixed
// values are of this kind. The constraint is eliminated, not penalised: the solver sees q only, so it holds exactly and the
// covariance counts the degrees of freedom right. Bounds are those of q.
type Linear struct {
	Params, Free int
	C            []float64 // row-major, Params by Free
	P0           []float64 // Params; nil means zero
}

// Shared ties each group of parameters, by index, to one value. The free parameters keep the order of the first member of
// their group; a parameter in no group stays on its own. It panics where an index is out of range or used twice.
func Shared(params int, groups ...[]int) Linear {
	first := make([]int, params)
	for i := range first {
		first[i] = i
	}
	seen := make([]bool, params)
	for _, group := range groups {
		least := params
		for _, i := range group {
			if i < 0 || i >= params || seen[i] {
				panic(fmt.Sprintf("lsq: shared parameter %d is out of range or in two groups", i))
			}
			seen[i] = true
			least = min(least, i)
		}
		for _, i := range group {
			first[i] = least
		}
	}
	l := Linear{Params: params}
	place := make([]int, params)
	for i, f := range first {
		if f == i {
			place[i] = l.Free
			l.Free++
		}
	}
	l.C = make([]float64, params*l.Free)
	for i, f := range first {
		l.C[i*l.Free+place[f]] = 1
	}
	return l
}

// Expand stores p = C q + p0 in p.
func (l Linear) Expand(p, q []float64) {
	for i := range p[:l.Params] {
		t := 0.0
		if l.P0 != nil {
			t = l.P0[i]
		}
		for k, c := range l.C[i*l.Free : (i+1)*l.Free] {
			if c != 0 { // so that a free parameter at infinity stays out of what it does not touch
				t += c * q[k]
			}
		}
		p[i] = t
	}
}

// Reduce returns f as a problem in q, with no bounds. The problem has scratch memory of its own: one goroutine at a time.
func (l Linear) Reduce(f Squares) Squares {
	if f.Params != l.Params || len(l.C) != l.Params*l.Free || l.P0 != nil && len(l.P0) != l.Params {
		panic("lsq: the constraint is not of the problem's size")
	}
	p := make([]float64, l.Params)
	reduced := Squares{Rows: f.Rows, Params: l.Free, Residuals: func(r, q []float64) {
		l.Expand(p, q)
		f.Residuals(r, p)
	}}
	if f.Jacobian == nil {
		return reduced
	}
	full := make([]float64, f.Rows*f.Params)
	reduced.Jacobian = func(jac, q []float64) {
		l.Expand(p, q)
		f.Jacobian(full, p)
		clear(jac[:f.Rows*l.Free])
		for i := range f.Rows {
			out := jac[i*l.Free : (i+1)*l.Free]
			for j, d := range full[i*l.Params : (i+1)*l.Params] {
				for k, c := range l.C[j*l.Free : (j+1)*l.Free] {
					if c != 0 {
						out[k] += d * c
					}
				}
			}
		}
	}
	return reduced
}

// Covariance stores in covP, Params by Params, the covariance of p that follows from that of q, C covQ C'. NaN in covQ spreads
// only to parameters that depend on it.
func (l Linear) Covariance(covP, covQ []float64) {
	for i := range l.Params {
		for j := range l.Params {
			t := 0.0
			for a, ci := range l.C[i*l.Free : (i+1)*l.Free] {
				if ci == 0 {
					continue
				}
				for b, cj := range l.C[j*l.Free : (j+1)*l.Free] {
					if cj != 0 {
						t += ci * cj * covQ[a*l.Free+b]
					}
				}
			}
			covP[i*l.Params+j] = t
		}
	}
}
