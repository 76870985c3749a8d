package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestSpikes hits spectra with cosmic rays of known place and height, from 8 times the noise up, one to three channels wide. At
// least 99 % of their main channels are left out, at most one channel in 100,000 that was not hit, and the bands of pixels
// that were hit are right. Half of the rays fall on a band.
func TestSpikes(t *testing.T) {
	t.Parallel()
	const n = 3000
	b := &bench{axis: evenAxis(1200, 2850, 1.3), level: 300, gain: 1, read: 4,
		bands: []lorentz{{250, 1345, 26}, {400, 1584.5, 14}, {0, 1621, 11}, {900, 2676, 29}}}
	f, column := b.learned(t, Graphene(), 91)
	r := rand.New(rand.NewPCG(92, 1))
	counts := make([]float32, len(b.axis))
	v, se := make([]float32, len(column)), make([]float32, len(column))
	truth := map[string]float64{"d_height": 250, "d_position": 1345, "g_position": 1584.5, "g_width": 14, "g_height": 400, "2d_position": 2676, "2d_width": 29, "2d_height": 900, "d_g_ratio": 0.625}
	sums := map[string]*pulls{}
	for name := range truth {
		sums[name] = new(pulls)
	}
	var rays, found, onBand, onBandFound, clean, wrong int
	hit := make([]bool, len(counts))
	for range n {
		b.draw(r, counts)
		clear(hit)
		var main []int
		for range 2 {
			x := 1200 + 1650*r.Float64()
			if r.IntN(2) == 0 {
				band := b.bands[[]int{0, 1, 3}[r.IntN(3)]]
				x = band.position + band.width*(2*r.Float64()-1)
			}
			c := min(max(int((x-1200)/1.3), 2), len(counts)-3)
			if hit[c-2] || hit[c-1] || hit[c] || hit[c+1] || hit[c+2] {
				continue
			}
			sigma := math.Sqrt(float64(counts[c]) + 16)
			height := sigma * 8 * math.Exp(4*r.Float64()) // 8 to 440 times the noise
			counts[c] += float32(height)
			hit[c] = true
			for side := range r.IntN(3) { // its neighbours get less
				k := c + 1 - 2*side
				counts[k] += float32(height * 0.4 * r.Float64())
				hit[k] = true
			}
			main = append(main, c)
		}
		f.Fit(counts, v, se)
		for _, w := range f.windows {
			for i, c := range w.channels {
				switch {
				case w.skip[i] && !hit[c] && !(c > 0 && hit[c-1]) && !(c+1 < len(hit) && hit[c+1]):
					wrong++
				case !hit[c]:
					clean++
				}
			}
			for _, c := range main {
				for i, k := range w.channels {
					if k != c {
						continue
					}
					rays++
					near := false
					for _, band := range b.bands {
						near = near || band.height > 0 && math.Abs(w.x[i]-band.position) < band.width
					}
					if near {
						onBand++
					}
					if w.skip[i] {
						found++
						if near {
							onBandFound++
						}
					}
				}
			}
		}
		for name, want := range truth {
			if x := v[column[name]]; x == x {
				sums[name].add(x, se[column[name]], want)
			}
		}
	}
	t.Logf("%d of %d rays found, %d of %d on a band; %d of %d channels left out without a ray", found, rays, onBandFound, onBand, wrong, clean)
	if !(float64(found) >= 0.99*float64(rays)) || !(float64(wrong) <= 1e-5*float64(clean)) || onBand < 1000 {
		t.Errorf("%d of %d rays found, %d of %d channels left out without a ray", found, rays, wrong, clean)
	}
	for name, p := range sums {
		t.Logf("%-12s %4.0f pixels, bias %+.3f, pull width %.3f", name, p.n, p.bias(), p.width())
		// Masked channels carry no information but no bias either: four standard errors. Neighbours of a ray that got less than the
		// noise of it stay in, which makes the scatter a tenth larger where every second spectrum has a ray on a band.
		if p.n < 0.995*n || !(math.Abs(p.bias()) <= 4/math.Sqrt(n)) || !(p.width() <= 1.15) {
			t.Errorf("%s: %0.f of %d pixels, bias %+.3f, pull width %.3f", name, p.n, n, p.bias(), p.width())
		}
	}
}
