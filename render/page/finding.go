package page

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"bandgrid/mapio/scan"
	"bandgrid/mapio/survey"
)

// LayerName says a layer number in words.
func LayerName(n float64) string {
	switch n {
	case 0:
		return "bare substrate"
	case 1:
		return "single layer"
	case 2:
		return "two layers"
	case 3:
		return "three layers"
	case 4:
		return "four layers"
	case 5:
		return "five or more layers"
	}
	return "undetermined"
}

// Summary says in sentences what was found: areas by layer number, then the median D/G of single layers, G position and 2D
// width. The command prints it and the report opens with it.
func Summary(s *survey.Survey) []string {
	list := verdicts(s)
	number := s.Map("layer_number")
	if number != nil {
		list = append(list, layerSentences(s, number)...)
	}
	of, mask := "the whole map", func(int) bool { return true }
	if number != nil && slices.Contains(number.Values, 1) {
		of, mask = "single layers", func(i int) bool { return number.Values[i] == 1 }
	}
	for _, q := range []struct{ name, words, unit string }{
		{"d_g_ratio", "D/G height ratio", ""}, {"g_position", "G position", " cm⁻¹"}, {"2d_width", "2D width", " cm⁻¹"},
		{"strain", "Strain (biaxial)", " %"}, {"hole_density", "Hole density", " × 10¹² cm⁻²"},
	} {
		m := s.Map(q.name)
		if m == nil {
			continue
		}
		if median, spread, n := middle(m.Values, mask); n > 0 {
			list = append(list, fmt.Sprintf("%s of %s: median %s, spread %s%s (%d pixels).", q.words, of, decimals(median, spread), decimals(spread, spread), q.unit, n))
		}
	}
	return append(list, damage(s)...)
}

// verdicts say whether the limits that were given are kept.
func verdicts(s *survey.Survey) (list []string) {
	for _, v := range s.Verdicts {
		word := "Go"
		if !v.Go {
			word = "No go"
		}
		text := fmt.Sprintf("%s: %s is %s ± %s, %s is wanted", word, v.What, significant(v.Value), significant(v.SE), v.Limit)
		if v.SE > 0 {
			text += fmt.Sprintf(" (margin %+.1f standard errors)", v.Margin)
		}
		list = append(list, text+".")
	}
	return list
}

// damage says how many defects the single layers have, where that can be told.
func damage(s *survey.Survey) (list []string) {
	stage, density := s.Map("disorder_stage"), s.Map("defect_density")
	if stage == nil || density == nil {
		return nil
	}
	var undecided, beyond int
	for _, v := range stage.Values {
		switch v {
		case 1.5:
			undecided++
		case 2:
			beyond++
		}
	}
	if median, spread, n := middle(density.Values, func(int) bool { return true }); n > 0 {
		list = append(list, fmt.Sprintf("Defect density of single layers: median %.1e, spread %.1e cm⁻² (%d pixels); a scale error of 28 %% is common to all.", median, spread, n))
	}
	if undecided > 0 {
		list = append(list, fmt.Sprintf("Near the turning point of D/G against dose, where few and many defects look alike: %s.", plural(undecided, "pixel")))
	}
	if beyond > 0 {
		list = append(list, fmt.Sprintf("Beyond the turning point, on the way to amorphous carbon: %s.", plural(beyond, "pixel")))
	}
	return list
}

// layerSentences gives a sentence for each layer number, single layers first.
func layerSentences(s *survey.Survey, number *survey.Quantity) (list []string) {
	type sum struct {
		pixels, regions int
		area, variance  float64
	}
	var sums [6]sum
	undetermined := 0
	measured := s.Map("status")
	cell := s.Grid.CellArea()
	for i, v := range number.Values {
		switch {
		case v >= 0 && v <= 5:
			sums[int(v)].pixels++
		case measured == nil || measured.Values[i] == measured.Values[i]:
			undetermined++
		}
	}
	for _, r := range s.Regions {
		if r.Layer >= 0 && r.Layer <= 5 {
			a := &sums[int(r.Layer)]
			a.regions++
			a.area += r.Area
			a.variance += r.AreaSE * r.AreaSE
		}
	}
	for _, n := range []int{1, 2, 3, 4, 5, 0} {
		a := sums[n]
		if a.pixels == 0 && n != 1 {
			continue
		}
		name := LayerName(float64(n))
		name = strings.ToUpper(name[:1]) + name[1:]
		switch {
		case a.pixels == 0:
			list = append(list, name+": none found.")
		case s.Grid.Layout == scan.Points:
			list = append(list, fmt.Sprintf("%s: %s.", name, plural(a.pixels, "point")))
		case a.regions == 0 || !(a.area > 0):
			list = append(list, fmt.Sprintf("%s: %s, no connected region.", name, plural(a.pixels, "pixel")))
		default:
			list = append(list, fmt.Sprintf("%s: %s µm² in %s.", name, plusMinus(a.area, math.Sqrt(a.variance)), plural(a.regions, "region")))
		}
	}
	if undetermined > 0 {
		amount := plural(undetermined, "pixel")
		if s.Grid.Layout == scan.Raster && cell > 0 {
			amount = significant(cell*float64(undetermined)) + " µm²"
		}
		all := undetermined + total(sums[:], func(a sum) int { return a.pixels })
		list = append(list, fmt.Sprintf("Undetermined: %s, %.1f %% of the measured pixels.", amount, 100*float64(undetermined)/float64(all)))
	}
	return list
}

func total[T any](list []T, of func(T) int) (n int) {
	for _, v := range list {
		n += of(v)
	}
	return n
}

func plural(n int, noun string) string {
	if n == 1 {
		return "1 " + noun
	}
	return fmt.Sprintf("%d %ss", n, noun)
}

// middle returns the median, the robust spread (1.4826 times the median absolute deviation) and the number of values that are
// there where mask holds.
func middle(values []float32, mask func(int) bool) (median, spread float64, n int) {
	var v []float32
	for i, x := range values {
		if x == x && mask(i) {
			v = append(v, x)
		}
	}
	if len(v) == 0 {
		return math.NaN(), math.NaN(), 0
	}
	slices.SortFunc(v, cmp.Compare)
	m := v[len(v)/2]
	d := make([]float32, len(v))
	for i, x := range v {
		d[i] = max(x-m, m-x)
	}
	slices.SortFunc(d, cmp.Compare)
	return float64(m), 1.4826 * float64(d[len(d)/2]), len(v)
}

// significant writes a number with three significant digits, without exponent where it is of ordinary size.
func significant(v float64) string {
	switch a := math.Abs(v); {
	case math.IsNaN(v):
		return "–"
	case v == 0:
		return "0"
	case a >= 1e6 || a < 1e-4:
		return strconv.FormatFloat(v, 'e', 2, 64)
	case a >= 100:
		return strconv.FormatFloat(v, 'f', 0, 64)
	default:
		return strconv.FormatFloat(v, 'f', 2-int(math.Floor(math.Log10(a))), 64)
	}
}

// decimals writes a value to the second significant digit of its error or spread.
func decimals(v, spread float64) string {
	if !(spread > 0) || math.IsInf(spread, 0) || math.IsNaN(v) {
		return significant(v)
	}
	return strconv.FormatFloat(v, 'f', min(6, max(0, 1-int(math.Floor(math.Log10(spread))))), 64)
}

// plusMinus writes a value with its standard error, both to the error's second significant digit.
func plusMinus(v, se float64) string {
	if !(se > 0) {
		return significant(v)
	}
	return decimals(v, se) + " ± " + decimals(se, se)
}

// quality says how well the model explains the spectra.
func quality(s *survey.Survey) (list []string) {
	everywhere := func(int) bool { return true }
	if q := s.Map("chi2"); q != nil {
		if median, _, n := middle(q.Values, everywhere); n > 0 {
			list = append(list, fmt.Sprintf("Median reduced chi-square %s over %d pixels; 1 means that the model explains a spectrum to within its noise.", significant(median), n))
		}
	}
	if q := s.Map("spikes"); q != nil {
		channels, pixels := 0, 0
		for _, v := range q.Values {
			if v > 0 {
				channels += int(v)
				pixels++
			}
		}
		list = append(list, fmt.Sprintf("Cosmic rays: %s left out, in %s.", plural(channels, "channel"), plural(pixels, "pixel")))
	}
	list = append(list, s.Calibration...)
	if d := s.Drift; d != nil {
		list = append(list, fmt.Sprintf("Drift of the axis, followed with the %s line: %.2f cm⁻¹ over the run, known to %.2f, taken out of all positions.", d.Band, d.Range, d.Error))
		for _, j := range d.Jumps {
			list = append(list, fmt.Sprintf("The axis jumped by %+.2f ± %.2f cm⁻¹ before pixel %d: a grating that moved, or the laser's mode.", j.Size, j.SE, j.Pixel))
		}
	}
	for _, l := range s.Learned {
		list = append(list, learned(l)...)
	}
	return list
}

// learned says what a sample of the run told beforehand.
func learned(l survey.Learned) (list []string) {
	switch {
	case l.NoiseChannels > 0 && l.Gain > 0:
		list = append(list, fmt.Sprintf("Noise, from the scatter of %s: gain %s electrons per count, read noise %s counts.", plural(l.Pixels, "pixel"), significant(l.Gain), significant(l.ReadNoise)))
	case l.NoiseChannels > 0:
		list = append(list, fmt.Sprintf("Noise, from the scatter of %s: %s counts, whatever the light.", plural(l.Pixels, "pixel"), significant(l.ReadNoise)))
	}
	if l.Inflation > 1 {
		list = append(list, fmt.Sprintf("The noise of neighbouring channels is correlated (%s): standard errors are %s times what independent channels would give.", significant(l.Correlation[0]), significant(math.Sqrt(l.Inflation))))
	}
	if len(l.Substrate) > 0 {
		list = append(list, fmt.Sprintf("The bare substrate shows lines of its own in the window %s; their spectrum, from %s, is part of the background.", strings.Join(l.Substrate, ", "), plural(l.Bare, "pixel")))
	}
	for _, b := range l.Bands {
		if b.Discrepancy > 0 {
			list = append(list, fmt.Sprintf("The %s band differs from its shape by some %s of its height, which widens its errors.", b.Name, percent(b.Discrepancy)))
		}
		if b.Name == "d" {
			list = append(list, fmt.Sprintf("D, where too weak to be located, is sought at %.1f ± %.1f cm⁻¹, width %.1f ± %.1f cm⁻¹, as in the %s that show it clearly.", b.Position, b.PositionSpread, b.Width, b.WidthSpread, plural(b.Pixels, "pixel")))
		}
	}
	return list
}

func percent(v float64) string { return significant(100*v) + " %" }
