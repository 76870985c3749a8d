package fit

// A StatusCount is how many pixels carry a status bit.
type StatusCount struct {
	Name        string // short, for a table
	Description string
	Pixels      int
}

// CountStatus counts the bits of a status map. bands are the recipe's, in order.
func CountStatus(values []float32, bands []string) []StatusCount {
	list := []StatusCount{
		{"converged", "the fit of every window reached an optimum", 0},
		{"out of iterations", "the best values so far stand", 0},
		{"band at its bound", "a band ran into the end of its range and counts as not found", 0},
		{"cosmic ray", "channels hit by cosmic rays were left out", 0},
		{"channels missing", "channels without counts, or saturated, were left out", 0},
		{"several starts", "the first fit was poor; the best of several starts stands", 0},
		{"poor fit", "reduced chi-square above the recipe's limit, of several lines too where the 2D band is better described by them", 0},
		{"not fitted", "too few channels, or no noise, in a window", 0},
	}
	for _, b := range bands {
		list = append(list, StatusCount{"no " + b, "the " + b + " band is below its detection limit", 0})
	}
	for _, v := range values {
		if v != v {
			continue
		}
		s := Status(v)
		for i := range list {
			if s&(1<<i) != 0 {
				list[i].Pixels++
			}
		}
	}
	return list
}
