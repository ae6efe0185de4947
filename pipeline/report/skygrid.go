package report

import (
	"fmt"
	"math"
	"slices"

	"mirrorloom/calib/physics"
)

// gridLine is a line of one right ascension or declination across the field.
type gridLine struct {
	words  string // its coordinate
	dec    bool
	points [][2]float64 // element and row
}

// Steps of the grid: seconds of time of right ascension, and arc seconds of declination.
var (
	raSteps  = []float64{0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 30, 60, 120, 300, 600, 1200, 1800, 3600, 7200}
	decSteps = []float64{0.1, 0.2, 0.5, 1, 2, 5, 10, 20, 30, 60, 120, 300, 600, 1200, 1800, 3600, 7200, 18000, 36000}
)

const (
	gridLines    = 4 // about so many of each across the field
	gridPoints   = 33
	secondsOfDeg = 240 // of time
)

// skyGrid gives the lines that cross a field of so many elements and rows.
func skyGrid(s skyPlane, elements, rows int) []gridLine {
	right, top := float64(elements)-0.5, float64(rows)-0.5
	ra, dec := []float64{0}, []float64{s.decDeg}
	for i := range gridPoints {
		part := float64(i) / (gridPoints - 1)
		x, y := -0.5+part*(right+0.5), -0.5+part*(top+0.5)
		for _, p := range [][2]float64{{x, -0.5}, {x, top}, {-0.5, y}, {right, y}} {
			a, d := s.world(p[0], p[1])
			ra, dec = append(ra, math.Remainder(a-s.raDeg, 360)), append(dec, d)
		}
	}
	ra0, ra1, dec0, dec1 := slices.Min(ra), slices.Max(ra), slices.Min(dec), slices.Max(dec)
	if e, r := s.pixel(s.raDeg, math.Copysign(90, s.decDeg)); e > -0.5 && e < right && r > -0.5 && r < top {
		ra0, ra1 = -180, 180 // a pole is in the field
		dec0, dec1 = min(dec0, math.Copysign(90, s.decDeg)), max(dec1, math.Copysign(90, s.decDeg))
	}
	var all []gridLine
	step := stepFrom(raSteps, (ra1-ra0)*secondsOfDeg/gridLines)
	first := math.Ceil((s.raDeg + ra0) * secondsOfDeg / step)
	for i := first; i*step <= (s.raDeg+ra1)*secondsOfDeg; i++ {
		a := i * step / secondsOfDeg
		all = append(all, s.across(raWords(i*step, step), false, elements, rows, func(part float64) (float64, float64) { return a, dec0 + part*(dec1-dec0) })...)
	}
	step = stepFrom(decSteps, (dec1-dec0)*arcsecPerDeg/gridLines)
	for i := math.Ceil(dec0 * arcsecPerDeg / step); i*step <= dec1*arcsecPerDeg; i++ {
		d := i * step / arcsecPerDeg
		all = append(all, s.across(decWords(i*step, step), true, elements, rows, func(part float64) (float64, float64) { return s.raDeg + ra0 + part*(ra1-ra0), d })...)
	}
	return all
}

// stepFrom is the largest step that is not above x, or the smallest.
func stepFrom(steps []float64, x float64) float64 {
	step := steps[0]
	for _, s := range steps {
		if s <= x {
			step = s
		}
	}
	return step
}

// across follows a line of the sky, given from 0 to 1, through the field and cuts it at the
// field's edges.
func (s skyPlane) across(words string, dec bool, elements, rows int, at func(part float64) (raDeg, decDeg float64)) []gridLine {
	inside := func(p [2]float64) bool {
		return p[0] >= -0.5 && p[0] <= float64(elements)-0.5 && p[1] >= -0.5 && p[1] <= float64(rows)-0.5
	}
	place := func(part float64) [2]float64 {
		e, r := s.pixel(at(part))
		return [2]float64{e, r}
	}
	// edge finds where the line crosses the edge, between a part inside and one outside.
	edge := func(in, out float64) [2]float64 {
		for range 40 {
			if middle := (in + out) / 2; inside(place(middle)) {
				in = middle
			} else {
				out = middle
			}
		}
		return place(in)
	}
	var lines []gridLine
	open := false
	const from, to = -0.1, 1.1 // edges may bulge
	for i := range gridPoints {
		part := from + (to-from)*float64(i)/(gridPoints-1)
		before := part - (to-from)/(gridPoints-1)
		p := place(part)
		switch in := inside(p); {
		case in && !open:
			line := gridLine{words: words, dec: dec}
			if i > 0 {
				line.points = append(line.points, edge(part, before))
			}
			line.points = append(line.points, p)
			lines, open = append(lines, line), true
		case in:
			l := &lines[len(lines)-1]
			l.points = append(l.points, p)
		case open:
			l := &lines[len(lines)-1]
			l.points, open = append(l.points, edge(before, part)), false
		}
	}
	return lines
}

// raWords writes seconds of time as hours, minutes and seconds.
func raWords(seconds, step float64) string {
	return sexagesimal(math.Mod(math.Mod(seconds, 86400)+86400, 86400), step, "")
}

// decWords writes arc seconds as degrees, minutes and seconds.
func decWords(arcsec, step float64) string {
	sign := "+"
	if arcsec < 0 {
		sign, arcsec = "−", -arcsec
	}
	return sexagesimal(arcsec, step, sign)
}

func sexagesimal(x, step float64, sign string) string {
	decimals := 0
	for s := step; s < 0.999 && decimals < 2; s *= 10 {
		decimals++
	}
	unit := math.Pow(10, float64(decimals))
	whole := math.Round(x * unit)
	minutes := math.Floor(whole / unit / 60)
	width := 2
	if decimals > 0 {
		width += 1 + decimals
	}
	return fmt.Sprintf("%s%02.0f:%02.0f:%0*.*f", sign, math.Floor(minutes/60), math.Mod(minutes, 60), width, decimals, whole/unit-60*minutes)
}

// world is the ICRS place, degrees, of a place of the cube.
func (s skyPlane) world(element, row float64) (raDeg, decDeg float64) {
	east, north := s.offset(element, row)
	return physics.FromGnomonic(east, north, s.raDeg, s.decDeg)
}

// pixel inverts world.
func (s skyPlane) pixel(raDeg, decDeg float64) (element, row float64) {
	east, north := physics.Gnomonic(raDeg, decDeg, s.raDeg, s.decDeg)
	det := s.determinant()
	return s.refX + (s.cd[1][1]*east-s.cd[0][1]*north)/det, s.refY + (s.cd[0][0]*north-s.cd[1][0]*east)/det
}
