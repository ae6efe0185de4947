package calib

import (
	"fmt"
	"math"
	"slices"
)

// SkyRule chooses the blank places of a picture: those that no source reaches. Sources
// only add light, so that the level and the scatter of the blank sky come from the darker
// half (common practice, no source):
//
//  1. level = median of the places not yet taken for sources, noise scale = that of the
//     places below it, in units of their errors, 1 at least;
//  2. a place is a source where the mean over a square of a side of Sides around it lies
//     Sigmas errors above the level, for any of the sides: wide squares find what is too
//     faint to show in one place;
//  3. until nothing more is found, again from 1;
//  4. every source grows by rings of one place, while its ring is above the rest by
//     RingSigmas of its error, and Margin rings more: the wings of the seeing.
type SkyRule struct {
	Sigmas     float64
	Sides      []int
	RingSigmas float64
	Margin     int
	// Least is the smallest share of the usable places that is taken for a sky.
	Least float64
	// PeakSigmas, PeakSides and PeakMargin rule what is found in single bands, see SkyPeaks.
	PeakSigmas float64
	PeakSides  []int
	PeakMargin int
}

// DefaultSkyRule suits fields of which a tenth or more is blank.
func DefaultSkyRule() SkyRule {
	// 4 sigma of 1e5 places and six sides choose a dozen or two by chance, which costs nothing.
	// 5.5 sigma of 1e5 places in 100 bands choose less than one. A line's light falls by
	// degrees beyond where a square still sees it.
	return SkyRule{Sigmas: 4, Sides: []int{1, 3, 5, 9, 17, 33}, RingSigmas: 1, Margin: 1, Least: 0.05,
		PeakSigmas: 5.5, PeakSides: []int{3, 9}, PeakMargin: 4}
}

// SkyChoice is where the sky is blank, [row][element].
type SkyChoice struct {
	Blank []bool
	Count int
	// Level and Scale are the blank sky's median and its scatter in units of the errors.
	Level, Scale float64
	// Rings is by how many rings the source that grew most did.
	Rings int
}

// maxSkyRounds ends steps 1 to 3; they stop by themselves, as sources only grow.
const maxSkyRounds = 50

// Choose looks at a picture [row][element] of sums over wavelength, with variances;
// places whose variance is not positive and finite, or without a value, are not usable.
// Places that are known for sources may be given; nil for none.
func (r SkyRule) Choose(picture, variance []float64, elements int, known []bool) (*SkyChoice, error) {
	if elements < 1 || len(picture) != len(variance) || len(picture)%elements != 0 {
		return nil, fmt.Errorf("sky: a picture of %d places and %d variances has no rows of %d elements", len(picture), len(variance), elements)
	}
	p := newSkyPicture(picture, variance, elements)
	copy(p.source, known)
	for range maxSkyRounds {
		if !p.measure() {
			break
		}
		found := false
		for _, side := range r.Sides {
			found = p.mark(side, r.Sigmas) || found
		}
		if !found {
			break
		}
	}
	choice := &SkyChoice{Rings: p.grow(r.RingSigmas)}
	for range r.Margin {
		p.widen()
		choice.Rings++
	}
	p.measure()
	choice.Blank, choice.Level, choice.Scale = make([]bool, len(picture)), p.level, p.scale
	for i, usable := range p.usable {
		if usable && !p.source[i] {
			choice.Blank[i] = true
			choice.Count++
		}
	}
	if least := max(8, int(math.Ceil(r.Least*float64(p.places)))); choice.Count < least {
		return nil, fmt.Errorf("sky: %d of %d usable places look blank, %d are the least; name elements or rows of blank sky, or observe a field of sky", choice.Count, p.places, least)
	}
	return choice, nil
}

type skyPicture struct {
	values, sigmas  []float64
	rows, elements  int
	usable, source  []bool
	places          int // usable
	level, scale    float64
	stride          int       // every so many places are measured
	blank, deviates []float64 // scratch
}

func newSkyPicture(picture, variance []float64, elements int) *skyPicture {
	n := len(picture)
	p := &skyPicture{values: picture, sigmas: make([]float64, n), rows: n / elements, elements: elements, usable: make([]bool, n), source: make([]bool, n), stride: 1}
	p.load(variance)
	return p
}

// measure finds level and scale; false where too few places are left.
func (p *skyPicture) measure() bool {
	p.blank = p.blank[:0]
	for i := 0; i < len(p.values); i += p.stride {
		v := p.values[i]
		if p.usable[i] && !p.source[i] {
			p.blank = append(p.blank, v)
		}
	}
	if len(p.blank) < 8 {
		return false
	}
	slices.Sort(p.blank)
	p.level = p.blank[len(p.blank)/2]
	p.deviates = p.deviates[:0]
	for i := 0; i < len(p.values); i += p.stride {
		v := p.values[i]
		if p.usable[i] && !p.source[i] && v < p.level {
			p.deviates = append(p.deviates, (p.level-v)/p.sigmas[i])
		}
	}
	p.scale = 1
	if len(p.deviates) > 0 {
		slices.Sort(p.deviates)
		p.scale = max(1, madPerSigma*p.deviates[len(p.deviates)/2])
	}
	return true
}

// mark takes for sources the middles of squares that are too bright; it tells whether
// there are new ones. Sources already known are left out of the squares, so that their
// light does not widen them beyond what they are.
func (p *skyPicture) mark(side int, sigmas float64) bool {
	half := side / 2
	light, noise := newAreaSums(p.rows, p.elements), newAreaSums(p.rows, p.elements)
	for i, v := range p.values {
		if p.usable[i] && !p.source[i] {
			light.set(i, v-p.level)
			noise.set(i, p.sigmas[i]*p.sigmas[i])
		}
	}
	light.finish()
	noise.finish()
	found := false
	for y := range p.rows {
		for j := range p.elements {
			i := y*p.elements + j
			if !p.usable[i] || p.source[i] {
				continue
			}
			y0, y1, j0, j1 := max(0, y-half), min(p.rows, y+half+1), max(0, j-half), min(p.elements, j+half+1)
			if light.over(y0, y1, j0, j1) > sigmas*p.scale*math.Sqrt(noise.over(y0, y1, j0, j1)) {
				p.source[i], found = true, true
			}
		}
	}
	return found
}

// grow adds rings to each source, a set of places that touch, while its ring is brighter
// than the blank rest, and says how many times.
func (p *skyPicture) grow(sigmas float64) int {
	for rings := 0; ; rings++ {
		if !p.measure() {
			return rings
		}
		// The error of the level, a median, is that of the blank places' mean, 1.2533 as large.
		blank := 0.0
		for i, usable := range p.usable {
			if usable && !p.source[i] {
				blank += 1 / (p.sigmas[i] * p.sigmas[i])
			}
		}
		label, count := p.label()
		around := p.rings(label)
		sum, noise := make([]float64, count), make([]float64, count)
		for _, r := range around {
			weight := 1 / (p.sigmas[r.place] * p.sigmas[r.place])
			sum[r.source] += weight * (p.values[r.place] - p.level)
			noise[r.source] += weight
		}
		found := false
		for _, r := range around {
			k := r.source
			if sum[k]/noise[k] > sigmas*p.scale*math.Sqrt(1/noise[k]+math.Pi/2/blank) {
				p.source[r.place], found = true, true
			}
		}
		if !found {
			return rings
		}
	}
}

// label numbers the sources from 0, by place; -1 elsewhere.
func (p *skyPicture) label() (label []int, count int) {
	label = make([]int, len(p.source))
	for i := range label {
		label[i] = -1
	}
	var todo []int
	for i, is := range p.source {
		if !is || label[i] >= 0 {
			continue
		}
		label[i], todo = count, append(todo, i)
		for len(todo) > 0 {
			at := todo[len(todo)-1]
			todo = todo[:len(todo)-1]
			p.neighbours(at, func(k int) {
				if p.source[k] && label[k] < 0 {
					label[k], todo = count, append(todo, k)
				}
			})
		}
		count++
	}
	return label, count
}

// ringPlace is a usable place next to a source.
type ringPlace struct{ place, source int }

// rings lists the places around every source, corners included; a place between two
// sources is in both their rings.
func (p *skyPicture) rings(label []int) []ringPlace {
	var all []ringPlace
	for i, usable := range p.usable {
		if !usable || p.source[i] {
			continue
		}
		first := len(all)
		p.neighbours(i, func(k int) {
			if label[k] >= 0 && !slices.Contains(all[first:], ringPlace{i, label[k]}) {
				all = append(all, ringPlace{i, label[k]})
			}
		})
	}
	return all
}

// neighbours visits the up to 8 places around a place.
func (p *skyPicture) neighbours(i int, visit func(k int)) {
	y, j := i/p.elements, i%p.elements
	for a := max(0, y-1); a < min(p.rows, y+2); a++ {
		for b := max(0, j-1); b < min(p.elements, j+2); b++ {
			if k := a*p.elements + b; k != i {
				visit(k)
			}
		}
	}
}

// widen adds a ring to every source.
func (p *skyPicture) widen() {
	label, _ := p.label()
	for _, r := range p.rings(label) {
		p.source[r.place] = true
	}
}

// areaSums are sums over rectangles from running sums along both axes.
type areaSums struct {
	sums  []float64 // [row+1][element+1]
	width int
}

func newAreaSums(rows, elements int) *areaSums {
	return &areaSums{sums: make([]float64, (rows+1)*(elements+1)), width: elements + 1}
}

func (a *areaSums) set(i int, v float64) {
	y, j := i/(a.width-1), i%(a.width-1)
	a.sums[(y+1)*a.width+j+1] = v
}

func (a *areaSums) finish() {
	for at := a.width; at < len(a.sums); at++ {
		if at%a.width > 0 {
			a.sums[at] += a.sums[at-1] + a.sums[at-a.width] - a.sums[at-a.width-1]
		}
	}
}

// over is the sum over rows y0..y1-1 and elements j0..j1-1.
func (a *areaSums) over(y0, y1, j0, j1 int) float64 {
	return a.sums[y1*a.width+j1] - a.sums[y0*a.width+j1] - a.sums[y1*a.width+j0] + a.sums[y0*a.width+j0]
}
