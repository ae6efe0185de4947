package skyflux

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
)

// Wide is a reference star seen through neighbouring elements that are all open, First to
// Last: a wide slit, in which the star's own width blurs its spectrum, and its place
// decides which wavelength falls where. Sky and star are in the same rows: the sky is that
// of the rows away from the star, and with it goes whatever closed mirrors send.
type Wide struct {
	// Edges of the voxels, nm at the telescope: those that are wanted, and Beyond more at
	// either end, by which the ends of the band can be seen.
	Edges       []float64
	Beyond      int
	First, Last int
	// Rows of the detector; Usable are those that all open mirrors light alike.
	Usable []bool
	// Row takes the light of trace row y, electrons of one exposure, to all voxels, as that of
	// element place: wavelengths are those of light that falls there.
	Row func(y int, place float64, signal, variance []float32, flags []calib.Flag)
	// Response divides the light of an element and row at a wanted voxel.
	Response func(element, y, voxel int) float64
	// Drift is by how many elements refraction moves the star at each voxel, nil for none.
	Drift []float64
	// Model is what a voxel is expected to show of the star, but for a smooth factor;
	// the profile's word for it. 0 or NaN where nothing is known.
	Model []float64
	// Blur is the standard deviation, in voxels, of a line in one element; Slope the voxels
	// from one element to the next. BlurRows is the same of a point along the slit, rows,
	// which is not of the star's own width.
	Blur, Slope []float64
	BlurRows    float64
	// ElementArcsec and RowArcsec are the steps on the sky.
	ElementArcsec, RowArcsec float64
	// RadiusArcsec of the aperture, 0 for apertureFWHM widths.
	RadiusArcsec float64
	// Correlated is by how much the variance of a sum is above that of independent voxels.
	Correlated float64
}

const (
	// wideGuard rows more than the aperture are kept out of the sky.
	wideGuard = 2
	// leastSkyRows show a sky.
	leastSkyRows = 4
	// skyClip sigmas from the median a row is no sky.
	skyClip = 4
	// mostSkyRows nearest to the star are enough.
	mostSkyRows = 128
	// placeAssumedArcsec is the error of a star's place that nothing but the pointing tells
	// (common practice, no source).
	placeAssumedArcsec = 1.0
	// badPlace, in elements, is the largest error of a place that is measured.
	badPlace = 0.5
)

// wideRows are voxels of some rows, [row][voxel].
type wideRows struct {
	rows             []int
	signal, variance [][]float32
	flags            [][]calib.Flag
}

// read takes rows to voxels.
func (w *Wide) read(rows []int, place float64) *wideRows {
	n := len(w.Edges) - 1
	out := &wideRows{rows: rows}
	for _, y := range rows {
		s, v, f := make([]float32, n), make([]float32, n), make([]calib.Flag, n)
		w.Row(y, place, s, v, f)
		out.signal, out.variance, out.flags = append(out.signal, s), append(out.variance, v), append(out.flags, f)
	}
	return out
}

// wideBad are flags of voxels that are not used.
const wideBad = calib.NoData | calib.Saturated | calib.BadPixel | calib.LowFlat | calib.Partial

func (r *wideRows) good(i, l int) bool {
	s, v := r.signal[i][l], r.variance[i][l]
	return r.flags[i][l]&wideBad == 0 && s == s && v > 0
}

// inner is the wanted voxel next to l.
func (w *Wide) inner(l int) int {
	return min(max(l-w.Beyond, 0), len(w.Edges)-2-2*w.Beyond)
}

// even is the mean response of the open elements: what light that fills all of them gets.
func (w *Wide) even(y, l int) float64 {
	sum := 0.0
	for j := w.First; j <= w.Last; j++ {
		sum += w.Response(j, y, w.inner(l))
	}
	return sum / float64(w.Last-w.First+1)
}

// drift of a voxel.
func (w *Wide) drift(l int) float64 {
	if w.Drift == nil {
		return 0
	}
	return w.Drift[l]
}

// pointed is the mean response weighed by a star's light.
func (w *Wide) pointed(y, l int, place, sigma float64) float64 {
	at, sum, weight := place+w.drift(l), 0.0, 0.0
	for j := max(w.First, int(math.Floor(at-3*sigma))); j <= min(w.Last, int(math.Ceil(at+3*sigma))); j++ {
		u := (float64(j) - at) / sigma
		g := math.Exp(-u * u / 2)
		sum += g * w.Response(j, y, w.inner(l))
		weight += g
	}
	if !(weight > 0) {
		return w.even(y, l)
	}
	return sum / weight
}

// Measure finds the star and adds its light up. Errors say what is wrong and the cure.
func (w *Wide) Measure(ctx context.Context) (*Star, error) {
	middle := float64(w.First+w.Last) / 2
	shape, err := w.alongSlit(middle)
	if err != nil {
		return nil, err
	}
	place, placeError, measured := middle, placeAssumedArcsec/w.ElementArcsec, false
	for range 2 { // the width and the rows of the star hardly depend on its place
		found, foundError, err := w.locate(ctx, shape)
		if err != nil {
			return nil, err
		}
		if foundError < badPlace {
			place, placeError, measured = found, foundError, true
		}
		if shape, err = w.alongSlit(place); err != nil {
			return nil, err
		}
	}
	star := &Star{
		Edges: w.Edges[w.Beyond : len(w.Edges)-w.Beyond], LossError: lossError,
		Element: place, Row: shape.row, FWHMArcsec: fwhmPerSigma * w.sigmaArcsec(shape), RadiusArcsec: w.radius(shape) * w.RowArcsec,
		PlaceError: placeError, PlaceMeasured: measured,
	}
	if err := w.addUp(star, shape); err != nil {
		return nil, err
	}
	return star, nil
}

// rowShape is where a star lies along the slit by voxel, its place in the mean and its
// standard deviation, rows.
type rowShape struct {
	rows       []float64
	row, sigma float64
}

// radius of the aperture in rows.
func (w *Wide) radius(s *rowShape) float64 {
	if w.RadiusArcsec > 0 {
		return w.RadiusArcsec / w.RowArcsec
	}
	return apertureFWHM * fwhmPerSigma * s.sigma
}

// sigmaArcsec is the standard deviation of the star on the slit.
func (w *Wide) sigmaArcsec(s *rowShape) float64 {
	const least = 0.2 // of what is seen: nothing is told by differences of less
	return w.RowArcsec * math.Sqrt(max(s.sigma*s.sigma-w.BlurRows*w.BlurRows, least*least*s.sigma*s.sigma))
}

// sigmaElements is the star's width in elements: images are round.
func (w *Wide) sigmaElements(s *rowShape) float64 { return w.sigmaArcsec(s) / w.ElementArcsec }

// alongSlit finds the star along the slit, in all light and in blocks of wavelengths: the
// logarithm of a Gaussian is a parabola, fitted to the rows about its peak with the square
// of the light for weights.
func (w *Wide) alongSlit(place float64) (*rowShape, error) {
	var rows []int
	for y, ok := range w.Usable {
		if ok {
			rows = append(rows, y)
		}
	}
	if len(rows) < 2*leastSkyRows {
		return nil, fmt.Errorf("the star's frames have %d usable rows; open more", len(rows))
	}
	all := w.read(rows, place)
	for i, even := range w.evens(rows) {
		for l, e := range even {
			all.signal[i][l] /= float32(e)
			all.variance[i][l] /= float32(e * e)
		}
	}
	n := len(w.Edges) - 1
	row, sigma, ok := all.peak(w, w.Beyond, n-w.Beyond)
	if !ok {
		return nil, errors.New("no star stands out of the sky in the refstar frames; check calibration.refstar's position, and that its frames show the star")
	}
	shape := &rowShape{row: row, sigma: sigma}
	var places []float64
	var tops []starShape
	var widths []float64 // that of all light has the star's drift in it
	for b := range starBlocks {
		from, to := w.Beyond+b*(n-2*w.Beyond)/starBlocks, w.Beyond+(b+1)*(n-2*w.Beyond)/starBlocks
		if r, s, ok := all.peak(w, from, to); ok && math.Abs(r-row) < apertureFWHM*fwhmPerSigma*sigma {
			places, tops = append(places, float64(from+to-1)/2), append(tops, starShape{row: r, rowSigma: s})
			widths = append(widths, s)
		}
	}
	if len(widths) > 0 {
		shape.sigma = median(widths)
	}
	for l := range n {
		at := row
		if len(tops) > 0 {
			at = between(places, tops, float64(l)).row
		}
		shape.rows = append(shape.rows, at)
	}
	return shape, nil
}

// leastPeak, in sigmas, of a star in a block of wavelengths.
const leastPeak = 20

// peak fits a star along the slit in the mean of voxels from..to-1.
func (r *wideRows) peak(w *Wide, from, to int) (row, sigma float64, ok bool) {
	profile, noise := make([]float64, len(r.rows)), make([]float64, len(r.rows))
	for i := range r.rows {
		some := 0.0
		for l := from; l < to; l++ {
			if r.good(i, l) {
				profile[i] += float64(r.signal[i][l])
				noise[i] += float64(r.variance[i][l])
				some++
			}
		}
		if some < leastFraction*float64(to-from) {
			profile[i], noise[i] = math.NaN(), math.NaN()
			continue
		}
		profile[i], noise[i] = profile[i]/some, math.Sqrt(noise[i])/some
	}
	known := slices.DeleteFunc(slices.Clone(profile), math.IsNaN)
	if len(known) < leastSkyRows {
		return 0, 0, false
	}
	level := median(known)
	top := -1
	for i, v := range profile {
		if v == v && (top < 0 || v > profile[top]) {
			top = i
		}
	}
	peak := profile[top] - level
	if !(peak > leastPeak*noise[top]) {
		return 0, 0, false
	}
	// ln f = a + b u + c u^2 about the top, over the rows above a part of it.
	const least = 0.15
	var normal [3][4]float64
	use := func(i int) bool {
		f := profile[i] - level
		if !(f > least*peak) {
			return false
		}
		u, weight, ln := float64(r.rows[i]-r.rows[top]), f*f, math.Log(f)
		powers := [3]float64{1, u, u * u}
		for a := range 3 {
			for b := range 3 {
				normal[a][b] += weight * powers[a] * powers[b]
			}
			normal[a][3] += weight * powers[a] * ln
		}
		return true
	}
	count := 0
	for i := top; i >= 0 && use(i); i-- {
		count++
	}
	for i := top + 1; i < len(profile) && use(i); i++ {
		count++
	}
	c, solved := solve3(normal)
	if count < 3 || !solved || !(c[2] < 0) {
		return 0, 0, false
	}
	return float64(r.rows[top]) - c[1]/(2*c[2]), math.Sqrt(-1 / (2 * c[2])), true
}

// solve3 solves three normal equations by elimination.
func solve3(m [3][4]float64) (x [3]float64, ok bool) {
	for k := range 3 {
		if !(math.Abs(m[k][k]) > 0) {
			return x, false
		}
		for i := k + 1; i < 3; i++ {
			f := m[i][k] / m[k][k]
			for j := k; j < 4; j++ {
				m[i][j] -= f * m[k][j]
			}
		}
	}
	for k := 2; k >= 0; k-- {
		x[k] = m[k][3]
		for j := k + 1; j < 3; j++ {
			x[k] -= m[k][j] * x[j]
		}
		x[k] /= m[k][k]
	}
	return x, true
}

// apertureRows are the usable rows within a radius of the star at any wavelength; skyRows
// those beyond it, the nearest first.
func (w *Wide) apertureRows(s *rowShape) (star, sky []int) {
	radius, sure := w.radius(s), max(w.radius(s), apertureFWHM*fwhmPerSigma*s.sigma)+wideGuard
	low, high := slices.Min(s.rows), slices.Max(s.rows)
	for y, ok := range w.Usable {
		switch at := float64(y); {
		case !ok:
		case at >= low-radius && at <= high+radius:
			star = append(star, y)
		case at < low-sure || at > high+sure:
			sky = append(sky, y)
		}
	}
	slices.SortStableFunc(sky, func(a, b int) int {
		return int(math.Abs(float64(a)-s.row)) - int(math.Abs(float64(b)-s.row))
	})
	return star, sky[:min(len(sky), mostSkyRows)]
}

// skyOf is the light of the sky, in a row that answers evenly, by voxel, and its variance.
func (w *Wide) skyOf(r *wideRows, even [][]float64) (level, variance []float64) {
	n := len(w.Edges) - 1
	level, variance = make([]float64, n), make([]float64, n)
	values, scratch := make([]float32, 0, len(r.rows)), make([]float32, len(r.rows))
	for l := range n {
		values = values[:0]
		for i := range r.rows {
			if r.good(i, l) {
				values = append(values, r.signal[i][l]/float32(even[i][l]))
			}
		}
		level[l], variance[l] = math.NaN(), math.Inf(1)
		if len(values) < leastSkyRows {
			continue
		}
		middle, scatter := calib.RobustLevel(values, scratch)
		sum, some, own := 0.0, 0.0, 0.0
		for i := range r.rows {
			v := float64(r.signal[i][l]) / even[i][l]
			if r.good(i, l) && math.Abs(v-middle) <= skyClip*scatter {
				sum, some, own = sum+v, some+1, own+float64(r.variance[i][l])/(even[i][l]*even[i][l])
			}
		}
		if some > 0 {
			level[l], variance[l] = sum/some, own/(some*some)
		}
	}
	return level, variance
}

// evens are the even responses of rows, [row][voxel].
func (w *Wide) evens(rows []int) [][]float64 {
	all := make([][]float64, len(rows))
	for i, y := range rows {
		all[i] = make([]float64, len(w.Edges)-1)
		for l := range all[i] {
			all[i][l] = w.even(y, l)
		}
	}
	return all
}

// sum is the star's light by voxel, less the sky's, the part of it that the rows of the
// aperture hold, and its variance; 0 and +Inf where there is none.
func (w *Wide) sum(place float64, s *rowShape, star, sky []int, evenSky [][]float64) (counts, variance, part []float64) {
	n := len(w.Edges) - 1
	level, levelVariance := w.skyOf(w.read(sky, place), evenSky)
	r := w.read(star, place)
	counts, variance, part = make([]float64, n), make([]float64, n), make([]float64, n)
	radius, sigma := w.radius(s), w.sigmaElements(s)
	for l := range n {
		rows, own := 0.0, 0.0
		for i, y := range star {
			u := float64(y) - s.rows[l]
			if math.Abs(u) > radius || !r.good(i, l) {
				continue
			}
			response := w.pointed(y, l, place, sigma)
			seen := w.even(y, l) / response
			counts[l] += float64(r.signal[i][l])/response - level[l]*seen
			own += float64(r.variance[i][l]) / (response * response)
			rows += seen
			part[l] += math.Exp(-u*u/(2*s.sigma*s.sigma)) / (math.Sqrt(2*math.Pi) * s.sigma)
		}
		variance[l] = w.Correlated*own + rows*rows*levelVariance[l]
		part[l] = min(part[l], 1)
		if !(part[l] >= leastFraction) || math.IsNaN(counts[l]) || !(variance[l] > 0) {
			counts[l], variance[l], part[l] = 0, math.Inf(1), 0
		}
	}
	return counts, variance, part
}

// addUp fills in the star's light in the wanted voxels, as it would be without the blur
// of the star's own width.
func (w *Wide) addUp(star *Star, s *rowShape) error {
	rows, sky := w.apertureRows(s)
	if len(sky) < leastSkyRows {
		return fmt.Errorf("%d usable rows lie away from the star at row %.1f, %d are the least to tell the sky; give a smaller flux.radius_arcsec", len(sky), s.row, leastSkyRows)
	}
	counts, variance, part := w.sum(star.Element, s, rows, sky, w.evens(sky))
	seen := w.blurred(w.sigmaElements(s))
	width := float64(w.Last - w.First + 1)
	known := 0
	for l := w.Beyond; l < len(counts)-w.Beyond; l++ {
		off := star.Element + w.drift(l) - float64(w.First+w.Last)/2
		f := part[l] * physics.StripFraction(fwhmPerSigma*w.sigmaElements(s), width, off)
		blur, slope := 1.0, 0.0
		if m := w.Model[l]; m > 0 && seen[l] > 0 {
			blur = seen[l] / m
			slope = (seen[min(l+1, len(seen)-1)] - seen[max(l-1, 0)]) / (2 * seen[l]) * w.Slope[l]
		}
		if f > 0 {
			known++
		}
		star.Counts, star.Variance = append(star.Counts, counts[l]/blur), append(star.Variance, variance[l]/(blur*blur))
		star.Fraction = append(star.Fraction, f)
		star.Misplaced = append(star.Misplaced, math.Abs(slope)*star.PlaceError)
	}
	if known < len(star.Counts)/2 {
		return fmt.Errorf("the light of the star is good at %d of %d wavelengths; it may be saturated: expose it shorter, or take a fainter star", known, len(star.Counts))
	}
	return nil
}
