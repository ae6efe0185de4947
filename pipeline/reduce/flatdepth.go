package reduce

import (
	"context"
	"math"

	"mirrorloom/calib"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
)

// Depth is looked at in cells of up to 2^(depthLevels-1) pixels, in so many rows in the
// middle of the field that the wavelengths of about depthLookups pixels and elements
// are computed: seconds, whatever the detector.
const (
	depthLevels  = 6
	depthLookups = 8e6
)

// flatDepth compares the lamp's all-on frames, which no fit has seen, with the light
// that the fitted responses predict of them,
//
//	light(x, y) = P(x, y) sum_j F(j, y0, L) dL/dx,   F = lamp(L) colour(L) s(j, y0) b(j, L),
//
// less what mirrors that do not move take of it,
// L the wavelength that element j has at x, y0 = y - t(x), scaled to the frames' total.
// Pixels that any element feeds with a wavelength beyond the grid, or from a row that
// is not lit in full, are left out: nothing was fitted there.
func (r *reduction) flatDepth(ctx context.Context, m *wholeMasters) error {
	frames := r.roles.calibration.lamps.on
	p := r.newFlatPrediction()
	if len(frames) == 0 || p.first >= p.last {
		return nil
	}
	on, err := r.sumExposures(ctx, frames, m, true)
	if err != nil {
		return err
	}
	columns := r.camera.Columns
	light := make([]float32, (p.last-p.first)*columns)
	err = parallel.Do(ctx, r.opts.Workers, p.last-p.first, func(_, i int) error {
		p.row(light[i*columns:(i+1)*columns], p.first+i)
		return nil
	})
	if err != nil {
		return err
	}
	r.report.FlatDepth = compareDepth(on, light, p.first)
	return nil
}

// compareDepth bins what differs between an exposure and the light predicted from row
// first on, 0 where nothing is, both brought to the same total.
func compareDepth(on *calib.Exposure, light []float32, first int) []product.DepthAtSN {
	from := first * on.Columns
	var seen, predicted float64
	flags := make([]calib.Flag, len(light))
	for i, v := range light {
		if flags[i] = on.Flags[from+i]; v <= 0 {
			flags[i] |= calib.NoData
		}
		if flags[i] == 0 {
			seen += float64(on.Signal[from+i])
			predicted += float64(v)
		}
	}
	if !(seen > 0 && predicted > 0) {
		return nil
	}
	scale := float32(seen / predicted)
	for i := range light {
		light[i] *= scale
	}
	depth := calib.NewDepth(1, on.Columns, depthLevels)
	for a := 0; a < len(light); a += on.Columns {
		b := a + on.Columns
		depth.AddRow(on.Signal[from+a:from+b], on.Variance[from+a:from+b], light[a:b], flags[a:b], 1, 1)
	}
	var all []product.DepthAtSN
	for _, p := range depth.Points() {
		all = append(all, product.DepthAtSN{Side: p.Side, SN: p.SN, RMS: p.RMS, Excess: p.Excess, ExcessError: p.ExcessError})
	}
	return all
}

// flatPrediction predicts an all-on lamp frame in rows first..last-1.
type flatPrediction struct {
	geometry    calib.Geometry
	pixel       *calib.PixelResponse
	response    *calib.Response
	axis        product.SpectralAxis
	stuck       *stuckMirrors
	lamp        []float64 // lamp colour, [voxel]
	lit         []bool    // [trace row]: of all elements in full
	first, last int
}

func (r *reduction) newFlatPrediction() *flatPrediction {
	p := &flatPrediction{
		geometry: r.optics.geometry, pixel: r.optics.pixel, response: r.optics.response, stuck: r.optics.stuck,
		axis: r.schema.Axis(),
		lamp: r.lampLight(), lit: make([]bool, r.camera.Rows), last: r.camera.Rows,
	}
	for l, c := range p.response.Colour {
		p.lamp[l] *= c
	}
	n := r.seq.N()
	share, full := r.lit(), float32(calib.DefaultFlatRule().FullyLit)
	middle, count := 0, 0
	for y := range p.lit {
		p.lit[y] = true
		for j, use := range r.usage.row(y) {
			if use != 0 || share[y*n+j] < full || p.response.SlitFlags[y*n+j] != 0 {
				p.lit[y] = false
			}
		}
		if p.lit[y] {
			middle += y
			count++
		}
	}
	rows := max(1<<(depthLevels-1), int(depthLookups/float64(n*r.camera.Columns)))
	middle /= max(1, count)
	p.first, p.last = max(0, middle-rows/2), min(r.camera.Rows, middle+(rows+1)/2)
	if count == 0 {
		p.last = p.first
	}
	return p
}

// row predicts detector row y; 0 where an element's light is not known.
func (p *flatPrediction) row(dst []float32, y int) {
	sum := make([]float64, len(dst))
	for j := range p.response.Elements {
		before := p.wavelength(-0.5, j, y)
		for x := range sum {
			after := p.wavelength(float64(x)+0.5, j, y)
			sum[x] += p.element(j, float64(y)-p.geometry.TraceShift(float64(x)), (before+after)/2) * math.Abs(after-before)
			before = after
		}
	}
	factor, _, flags := p.pixel.Row(y)
	for x, v := range sum {
		dst[x] = 0
		if flags[x] == 0 && !math.IsNaN(v) {
			dst[x] = factor[x] * float32(v)
		}
	}
}

func (p *flatPrediction) wavelength(x float64, j, y int) float64 {
	return p.geometry.Wavelength(x, float64(j), float64(y)-p.geometry.TraceShift(x))
}

// element is F(j, y0, L) by straight lines between rows and voxels; NaN where it was
// not fitted.
func (p *flatPrediction) element(j int, y0, nm float64) float64 {
	v := p.axis.Index(nm)
	l, y := int(math.Floor(v)), int(math.Floor(y0))
	if !(v >= 0) || l+1 >= p.response.Voxels || y < 0 || y+1 >= len(p.lit) || !p.lit[y] || !p.lit[y+1] {
		return math.NaN()
	}
	at := j*p.response.Voxels + l
	if p.response.BandFlags[at] != 0 || p.response.BandFlags[at+1] != 0 {
		return math.NaN()
	}
	f, g := v-float64(l), y0-float64(y)
	band := (1-f)*p.lamp[l]*float64(p.response.Band[at]) + f*p.lamp[l+1]*float64(p.response.Band[at+1])
	s := y*p.response.Elements + j
	next := s + p.response.Elements
	return band * ((1-g)*float64(p.response.Slit[s])*p.stuck.gainAt(s) + g*float64(p.response.Slit[next])*p.stuck.gainAt(next))
}
