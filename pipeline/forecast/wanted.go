package forecast

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/scene"
)

// wanted is a measurement, ready to be laid on a field.
type wanted struct {
	name string
	// source is an index, -1 for all sources.
	source int
	// u, w is the middle of a circle, arc seconds from the field's, radius its own.
	u, w, radius float64
	// line tells whether the light of lines alone is meant; fromNM and toNM bound what is
	// added up.
	line         bool
	fromNM, toNM float64
}

// of tells whether the light of a source is meant; that of the sky, -1, never is.
func (w *wanted) of(source int) bool {
	return source >= 0 && (w.source < 0 || source == w.source)
}

// Where nothing else is said, apertures and windows are the best ones for a Gaussian on an
// even background whose noise rules: the radius r = 1.585 sigma at which (1 - exp(-r^2/2
// sigma^2))/r is largest, and the half width h = 1.400 sigma at which erf(h/(sqrt 2
// sigma))/sqrt h is.
const (
	bestRadiusSigmas = 1.585
	bestHalfSigmas   = 1.400
)

// newWanted lays out one of the target's measurements.
func (l *Light) newWanted(i int) (wanted, error) {
	t := l.target.Forecast.Wanted[i]
	w := wanted{name: t.Name, source: -1, line: t.LineNM != nil}
	if t.Source != nil {
		w.source = *t.Source
		s := &l.scene.Sources[w.source]
		w.u, w.w = l.fieldPlace(s.EastArcsec, s.NorthArcsec)
		w.radius = l.usualRadius(s)
	} else {
		w.u, w.w = l.fieldPlace(*t.EastArcsec, *t.NorthArcsec)
	}
	if t.RadiusArcsec != nil {
		w.radius = *t.RadiusArcsec
	}
	path := fmt.Sprintf("forecast.wanted[%d]", i)
	if w.line {
		own, ok := l.lineNear(&w, *t.LineNM)
		if !ok {
			return w, &config.Error{Path: path + ".line_nm", What: fmt.Sprintf("no line of its sources is seen at %v nm (vacuum); give the wavelength of one", *t.LineNM)}
		}
		half := l.lineHalf(*t.LineNM, own)
		w.fromNM, w.toNM = *t.LineNM-half, *t.LineNM+half
	} else {
		w.fromNM, w.toNM = t.BandNM[0], t.BandNM[1]
	}
	if first, last := l.edgesNM[0], l.edgesNM[len(l.edgesNM)-1]; w.fromNM < first || w.toNM > last {
		return w, &config.Error{Path: path, What: fmt.Sprintf("%.6g to %.6g nm reach beyond the profile's grid of %.6g to %.6g nm; give wavelengths within", w.fromNM, w.toNM, first, last)}
	}
	return w, nil
}

// usualRadius is that of a source's circle, arc seconds.
func (l *Light) usualRadius(s *scene.Source) float64 {
	seeing := l.scene.SeeingFWHMArcsec
	best := func(fwhm float64) float64 { return bestRadiusSigmas * fwhm / fwhmPerSigma }
	switch s.Kind {
	case scene.KindRing:
		return s.RadiusArcsec + best(math.Hypot(seeing, s.WidthArcsec))
	case scene.KindGalaxy:
		return math.Hypot(2*s.RadiusArcsec, best(seeing))
	}
	return best(math.Hypot(seeing, s.WidthArcsec))
}

// lineNear is the width (standard deviation, px) of the line of a measurement's sources that
// is seen next to a wavelength.
func (l *Light) lineNear(w *wanted, nm float64) (sigma float64, ok bool) {
	at, slope := dispersed(&l.profile.Spectrograph, nm)
	best := 2 * l.profile.Spectrograph.LSFFWHMPx // px: farther off it is another line
	for i := range l.scene.Sources {
		if !w.of(i) {
			continue
		}
		s := &l.scene.Sources[i]
		for _, e := range s.Lines {
			px, _ := dispersed(&l.profile.Spectrograph, e.WavelengthNM*(1+s.Velocity.SystemicKmS/lightKmS))
			own := e.FWHMKmS / fwhmPerSigma / lightKmS * nm * slope
			if d := math.Abs(px - at); e.FluxWM2 > 0 && d <= best+math.Abs(own) {
				best, sigma, ok = d, math.Abs(own), true
			}
		}
	}
	return sigma, ok
}

const lightKmS = 299792.458

// lineHalf is half the width of a line's window, nm: own is the line's standard deviation, px.
func (l *Light) lineHalf(nm, own float64) float64 {
	s := &l.profile.Spectrograph
	_, slope := dispersed(s, nm)
	const pixel = 1 / 12.0 // the variance of a pixel's width
	sigma := math.Sqrt(math.Pow(s.LSFFWHMPx/fwhmPerSigma, 2) + own*own + pixel)
	return bestHalfSigmas * sigma / math.Abs(slope)
}

// cell is an element and a row with the part of it inside a circle.
type cell struct {
	element, row int
	area         float64
}

// cellSamples a side tell the part of a cell in a circle to better than 1 %.
const cellSamples = 16

// cells are those of a measurement, by element and row.
func (l *Light) cells(w *wanted, c Candidate) []cell {
	p := l.profile
	a := p.ArcsecPerU()
	stepU, stepW := a*float64(c.ElementMirrors), a/p.Spectrograph.WStepPx
	// Elements and rows of the circle's ends; rows may run down.
	j0, j1 := spanOf(w.u, w.radius, stepU, float64(c.N-1)/2, c.N)
	y0, y1 := spanOf(w.w, w.radius, stepW, p.Spectrograph.YCenterPx, p.Detector.Rows)
	var list []cell
	for j := j0; j <= j1; j++ {
		u := (float64(j) - float64(c.N-1)/2) * stepU
		for y := y0; y <= y1; y++ {
			area := inCircle(u-w.u, (float64(y)-p.Spectrograph.YCenterPx)*stepW-w.w, stepU, stepW, w.radius)
			if area > 0 {
				list = append(list, cell{j, y, area})
			}
		}
	}
	return list
}

// spanOf is the range of cells, `step` apart and number `middle` at 0, that reach into
// centre +- radius, among 0..count-1.
func spanOf(centre, radius, step, middle float64, count int) (first, last int) {
	a, b := (centre-radius)/step, (centre+radius)/step
	if a > b {
		a, b = b, a
	}
	return max(0, int(math.Ceil(middle+a-0.5))), min(count-1, int(math.Floor(middle+b+0.5)))
}

// inCircle is the part of a rectangle about (x, y) within a radius of 0.
func inCircle(x, y, width, height, radius float64) float64 {
	inside := 0
	for i := range cellSamples {
		for k := range cellSamples {
			dx := x + width*((float64(i)+0.5)/cellSamples-0.5)
			dy := y + height*((float64(k)+0.5)/cellSamples-0.5)
			if dx*dx+dy*dy <= radius*radius {
				inside++
			}
		}
	}
	return float64(inside) / (cellSamples * cellSamples)
}

// channels are the voxels of the grid that a measurement's wavelengths reach, with the part
// of each.
func (l *Light) channels(w *wanted) (first int, parts []float64) {
	for i := range len(l.edgesNM) - 1 {
		a, b := l.edgesNM[i], l.edgesNM[i+1]
		part := max(0, min(b, w.toNM)-max(a, w.fromNM)) / (b - a)
		switch {
		case part > 0 && parts == nil:
			first, parts = i, []float64{part}
		case part > 0:
			parts = append(parts, part)
		}
	}
	return first, parts
}
