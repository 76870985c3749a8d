package clean

import "math"

// Errors stores in se a bound of the standard error of each channel of the last background that [Background.Estimate] gave with
// als or arpls, for white noise of standard deviation sigma, counts; NaN with other methods, whose error is not linear.
//
// Weights w are taken as fixed, and a band under the curve counts as no error: this is noise alone. With A = (W + λD'D)⁻¹ the
// variance is σ² A W² A, which for w <= 1 is at most σ² A; the diagonal of A is what is given. Where weights are 1 and the
// curve stiff it is 15 % too large; where als weighs 0.001 it is larger than that. It panics where the length differs.
func (b *Background) Errors(se []float64, sigma float64) {
	if len(se) != len(b.w) {
		panic("clean: errors of another length than the background was made for")
	}
	if b.set.Method != "als" && b.set.Method != "arpls" {
		for i := range se {
			se[i] = math.NaN()
		}
		return
	}
	b.band.fill(b.w, b.lambda)
	b.band.inverse(se)
	for i, v := range se {
		se[i] = sigma * math.Sqrt(v)
	}
}

// inverse stores the diagonal of the inverse of the factored matrix, in order of n operations: from the last channel up, each
// row of the inverse's band follows from the two below it (Commun. ACM 18, 177 (1975), from memory).
func (m pentadiagonal) inverse(diagonal []float64) {
	var one, two, off float64 // elements (i+1, i+1), (i+2, i+2), (i+1, i+2)
	for i := len(diagonal) - 1; i >= 0; i-- {
		l1, l2 := m.a[i], m.b[i]
		next, far := -l1*one-l2*off, -l1*off-l2*two
		diagonal[i] = 1/m.d[i] - l1*next - l2*far
		one, two, off = diagonal[i], one, next
	}
}
