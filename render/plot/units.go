package plot

import "strings"

// Unit typesets a unit as quantities carry it: "cm-1" becomes cm⁻¹, "um2" µm², "10^12 cm-2" 10¹² cm⁻². What it does not know
// stays as it is.
func Unit(unit string) string {
	words := strings.Fields(unit)
	for i, w := range words {
		if base, power, ok := strings.Cut(w, "^"); ok {
			words[i] = base + Superscript(power)
			continue
		}
		end := len(w)
		for end > 0 && w[end-1] >= '0' && w[end-1] <= '9' {
			end--
		}
		power := w[end:]
		if power != "" && end > 0 && w[end-1] == '-' {
			end--
			power = "-" + power
		}
		base := w[:end]
		if base == "" { // a bare number
			continue
		}
		if base == "um" {
			base = "µm"
		}
		words[i] = base + Superscript(power)
	}
	return strings.Join(words, " ")
}

// Superscript returns digits and signs as superscript characters.
func Superscript(digits string) string {
	return strings.NewReplacer("0", "⁰", "1", "¹", "2", "²", "3", "³", "4", "⁴", "5", "⁵", "6", "⁶", "7", "⁷", "8", "⁸", "9", "⁹",
		"-", "⁻", "+", "⁺").Replace(digits)
}
