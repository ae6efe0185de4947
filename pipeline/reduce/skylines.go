package reduce

import (
	"math"
	"slices"
)

const (
	// continuumWidth px around a place the median of the sky's spectrum is its continuum:
	// many times a line's width.
	continuumWidth = 41
	// lineSigmas above the continuum a line begins, and lineWings px beyond that it ends.
	lineSigmas = 5
	lineWings  = 2
	// leastBin samples make a median.
	leastBin = 9
)

// skyLines makes the table of the sky's lines, their light in one element at a detector
// pixel, from a sample's decodes: the median over all elements and rows at a place along
// the dispersion is the sky, if most of the field is. nil without lines.
type skyLines struct {
	table *termTable // the slope's, for its extent
	bins  [][]float32
}

func newSkyLines(extent *termTable) *skyLines {
	return &skyLines{table: extent, bins: make([][]float32, len(extent.values))}
}

// add takes a decoded block of n pixels at these places.
func (s *skyLines) add(t *terms, decoded []float32, places []float64, n int) {
	for j, column := range t.elements {
		shift := t.geometry.X_e * (float64(j) - t.geometry.J_c)
		for p, x := range decoded[column*n : (column+1)*n] {
			i := int(math.Round((places[p] - shift - s.table.first) * termSteps))
			if x == x && i >= 0 && i < len(s.bins) {
				s.bins[i] = append(s.bins[i], x)
			}
		}
	}
}

// lines finds the table.
func (s *skyLines) lines() *termTable {
	sky := make([]float64, len(s.bins))
	for i, bin := range s.bins {
		sky[i] = math.NaN()
		if len(bin) >= leastBin {
			slices.Sort(bin)
			sky[i] = float64(bin[len(bin)/2])
		}
	}
	const reach = continuumWidth * termSteps / 2
	above := make([]float64, len(sky)) // the continuum
	var scatter, near []float64
	for i, x := range sky {
		near = near[:0]
		for _, y := range sky[max(0, i-reach):min(len(sky), i+reach+1)] {
			if y == y {
				near = append(near, y)
			}
		}
		if x == x && len(near) > 0 {
			slices.Sort(near)
			above[i] = x - near[len(near)/2]
			scatter = append(scatter, math.Abs(above[i]))
		}
	}
	if len(scatter) == 0 {
		return nil
	}
	slices.Sort(scatter)
	const normal = 1.4826 // of the median deviation to the standard one
	least := lineSigmas * normal * scatter[len(scatter)/2]
	found := &termTable{first: s.table.first, values: make([]float32, len(sky))}
	any := false
	for i, x := range above {
		if !(x > least) {
			continue
		}
		any = true
		for k := max(0, i-lineWings*termSteps); k <= min(len(above)-1, i+lineWings*termSteps); k++ {
			found.values[k] = float32(max(0, above[k]))
		}
	}
	if !any {
		return nil
	}
	return found
}
