package report

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// place is an element and a row whose spectrum is shown.
type place struct {
	label        string // A, B, C: as in the picture
	what         string
	element, row int
}

const (
	// A place is worth a spectrum if it has at least this part of the good voxels
	// of the best one.
	coveredPart = 0.5
	// The second source lies at least this part of the field's diagonal from the
	// first, so as not to be its wing.
	apartPart = 0.1
	// Blank sky is the place whose surroundings (a square of this half width) are
	// at the lower quartile of the field: the very faintest are edges.
	surroundings  = 2
	blankQuantile = 0.25
)

// mostSources are the bright places that are shown.
const mostSources = 3

// choosePlaces picks the brightest places that lie apart from each other, and one of blank
// sky, as far as the field has them.
func choosePlaces(w *Light, sky skyPlane) []place {
	usable := w.usable()
	if len(usable) == 0 {
		return nil
	}
	var chosen []place
	diagonal := math.Hypot(float64(w.elements)*sky.stepX, float64(w.rows)*sky.stepY)
	apart := func(i int) bool {
		for _, p := range chosen {
			if w.distance(p.row*w.elements+p.element, i, sky) <= apartPart*diagonal {
				return false
			}
		}
		return true
	}
	for _, what := range []string{"the brightest place", "the brightest place apart from A", "the brightest place apart from A and B"}[:mostSources] {
		i := w.brightest(usable, apart)
		if i < 0 {
			break
		}
		chosen = append(chosen, w.place(i, what))
	}
	blank := w.blank(usable)
	if !slices.ContainsFunc(chosen, func(p place) bool { return p.row*w.elements+p.element == blank }) {
		chosen = append(chosen, w.place(blank, "blank sky"))
	}
	for i := range chosen {
		chosen[i].label = string(rune('A' + i))
	}
	return chosen
}

// brightest is the first of the brightest of places that suit, -1 for none.
func (w *Light) brightest(places []int, suits func(i int) bool) int {
	best := -1
	for _, i := range places {
		if (best < 0 || w.mean[i] > w.mean[best]) && suits(i) {
			best = i
		}
	}
	return best
}

// usable gives the places with enough good voxels.
func (w *Light) usable() []int {
	least := max(1, int32(math.Ceil(coveredPart*float64(slices.Max(w.good)))))
	var usable []int
	for i, n := range w.good {
		if n >= least {
			usable = append(usable, i)
		}
	}
	return usable
}

// usableRows are the rows that have such places, in order.
func (w *Light) usableRows() []int {
	var rows []int
	for _, i := range w.usable() {
		if y := i / w.elements; len(rows) == 0 || rows[len(rows)-1] != y {
			rows = append(rows, y)
		}
	}
	return rows
}

func (w *Light) place(i int, what string) place {
	return place{what: what, element: i % w.elements, row: i / w.elements}
}

func (w *Light) distance(a, b int, sky skyPlane) float64 {
	return math.Hypot(float64(a%w.elements-b%w.elements)*sky.stepX, float64(a/w.elements-b/w.elements)*sky.stepY)
}

// blank gives the place whose surroundings are at the lower quartile, one with
// all its surroundings in the field if there is any.
func (w *Light) blank(usable []int) int {
	inner := slices.DeleteFunc(slices.Clone(usable), func(i int) bool {
		x, y := i%w.elements, i/w.elements
		return min(x, w.elements-1-x, y, w.rows-1-y) < surroundings
	})
	if len(inner) > 0 {
		usable = inner
	}
	type around struct {
		at   int
		mean float64
	}
	all := make([]around, len(usable))
	for n, i := range usable {
		all[n] = around{i, w.around(i)}
	}
	slices.SortFunc(all, func(a, b around) int { return cmp.Or(cmp.Compare(a.mean, b.mean), cmp.Compare(a.at, b.at)) })
	return all[int(blankQuantile*float64(len(all)-1))].at
}

// around is the mean white light of a place's surroundings.
func (w *Light) around(i int) float64 {
	sum, n := 0.0, 0
	for y := max(0, i/w.elements-surroundings); y <= min(w.rows-1, i/w.elements+surroundings); y++ {
		for x := max(0, i%w.elements-surroundings); x <= min(w.elements-1, i%w.elements+surroundings); x++ {
			if v := w.mean[y*w.elements+x]; !math.IsNaN(v) {
				sum += v
				n++
			}
		}
	}
	return sum / float64(n)
}

// describe says where a place lies.
func (p place) describe(w *Light, sky skyPlane) string {
	east, north := sky.offset(float64(p.element), float64(p.row))
	return fmt.Sprintf("%s: element %d, row %d; %s and %s of the field's centre; mean %s", p.what, p.element, p.row,
		toward(east, "east", "west"), toward(north, "north", "south"), figure(w.mean[p.row*w.elements+p.element]))
}

func toward(arcsec float64, positive, negative string) string {
	if arcsec < 0 {
		arcsec, positive = -arcsec, negative
	}
	return fmt.Sprintf("%.1f″ %s", arcsec, positive)
}
