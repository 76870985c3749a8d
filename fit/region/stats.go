package region

import (
	"math"
	"slices"

	"bandgrid/fit/clean"
	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// A summary computes statistics; its slices are scratch memory that grows to the largest region.
type summary struct {
	v, d []float32
	e    []float32 // of the whole map
}

// of summarises a quantity over cells, rising indices into the map.
func (u *summary) of(q *survey.Quantity, cells []int32, g scan.Grid) survey.Stat {
	u.v = u.v[:0]
	sum := 0.0
	for _, c := range cells {
		if x := q.Values[c]; x == x {
			u.v = append(u.v, x)
			sum += float64(x)
		}
	}
	n := len(u.v)
	nan := math.NaN()
	st := survey.Stat{Quantity: q.Name, N: n, Median: nan, Spread: nan, Mean: nan, MeanSE: nan, P5: nan, P95: nan}
	if n == 0 {
		return st
	}
	st.Median, st.P5, st.P95 = quantile(u.v, 0.5), quantile(u.v, 0.05), quantile(u.v, 0.95)
	u.d = u.d[:0]
	for _, x := range u.v {
		u.d = append(u.d, float32(math.Abs(float64(x)-st.Median)))
	}
	st.Spread = 1.4826 * quantile(u.d, 0.5)
	st.Mean = sum / float64(n)
	if n > 1 {
		st.MeanSE = meanSE(q.Values, cells, st.Mean, n, g)
	}
	return st
}

// ratio replaces the mean of a ratio by the ratio of the means of what it is made of, over the cells where it is defined. The
// mean of ratios would give weak pixels, whose ratios scatter most, as much weight as strong ones. The error is that of the
// mean of a - r b, to first order.
func (u *summary) ratio(st *survey.Stat, q, a, b *survey.Quantity, cells []int32, g scan.Grid) {
	if a == nil || b == nil || st.N == 0 {
		return
	}
	var above, below float64
	for _, c := range cells {
		if x := q.Values[c]; x == x {
			above += float64(a.Values[c])
			below += float64(b.Values[c])
		}
	}
	st.Mean = above / below
	if st.N < 2 {
		return
	}
	if u.e == nil {
		u.e = make([]float32, len(q.Values))
	}
	for _, c := range cells {
		u.e[c] = float32(math.NaN())
		if x := q.Values[c]; x == x {
			u.e[c] = float32(float64(a.Values[c]) - st.Mean*float64(b.Values[c]))
		}
	}
	st.MeanSE = meanSE(u.e, cells, 0, st.N, g) / math.Abs(below/float64(st.N))
}

// quantile interpolates linearly between order statistics: the value at rank p(n-1), from 0. It reorders v.
func quantile(v []float32, p float64) float64 {
	at := p * float64(len(v)-1)
	k := int(at)
	low := clean.Select(v, k)
	if k+1 >= len(v) {
		return float64(low)
	}
	high := slices.Min(v[k+1:])
	return float64(low) + (at-float64(k))*(float64(high)-float64(low))
}

// meanSE returns the standard error of a mean over n cells whose values are correlated with their neighbours'.
//
// The variance of a mean is σ²/n times the sum of the correlations of all pairs over n. With a correlation that falls as rx per
// column and ry per row (our choice: a separable first-order process) that sum tends to (1+rx)/(1-rx) (1+ry)/(1-ry). rx and ry
// are estimated from pairs of neighbours; negative estimates count as zero, so the error is never understated by chance.
func meanSE(values []float32, cells []int32, mean float64, n int, g scan.Grid) float64 {
	var square, right, up float64
	var rights, ups int
	cols := int32(g.Cols)
	j := 0 // the first cell that is not before the one above c
	for i, c := range cells {
		x := float64(values[c]) - mean
		if x != x {
			continue
		}
		square += x * x
		if g.Layout == scan.Points {
			continue
		}
		if i+1 < len(cells) && cells[i+1] == c+1 && (c+1)%cols != 0 {
			if y := float64(values[c+1]) - mean; y == y {
				right += x * y
				rights++
			}
		}
		for j < len(cells) && cells[j] < c+cols {
			j++
		}
		if j < len(cells) && cells[j] == c+cols {
			if y := float64(values[c+cols]) - mean; y == y {
				up += x * y
				ups++
			}
		}
	}
	variance := square / float64(n-1)
	inflate := 1.0
	for _, r := range []float64{correlation(right, rights, variance), correlation(up, ups, variance)} {
		inflate *= (1 + r) / (1 - r)
	}
	return math.Sqrt(variance / float64(n) * min(inflate, float64(n)))
}

// correlation is the lag-one correlation from the sum of products of pairs; too few pairs say nothing.
func correlation(sum float64, pairs int, variance float64) float64 {
	if pairs < 3 || !(variance > 0) {
		return 0
	}
	return min(max(sum/float64(pairs)/variance, 0), 0.99)
}
