package reached

import (
	"cmp"
	"context"
	"fmt"
	"math"
	"math/bits"
	"slices"

	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// Night is what a reduction knows of the frames that it used.
type Night struct {
	Sequence *sequence.Sequence
	// Axis is the cube's wavelength axis.
	Axis product.SpectralAxis
	// Steps, Frames, Asked: the science steps planned, the frames used, and the cycles asked
	// for, 0 for all.
	Steps, Frames, Asked int
	// Cycles is how many whole cycles would be as noisy.
	Cycles float64
	// ThroughputErr is the relative error of a frame's throughput; nil if not measured.
	ThroughputErr *float64
	// ReadNoise and Passed are product.Forecast's.
	ReadNoise, Passed *float64
	// Place gives for offsets from the target, arc seconds, those at which the sequence has
	// what the cube shows there; nil where they agree.
	Place func(east, north float64) (float64, float64)
	// Refracted tells that refraction was taken out of the cube, SkyTaken that the sky was.
	Refracted, SkyTaken bool
}

// Measure measures what the sequence's target wants in the cube of a reduction. The errors
// name the file, or are those of ctx.
func Measure(ctx context.Context, cube string, n Night) (*product.Forecast, error) {
	c, err := extract.Open(cube)
	if err != nil {
		return nil, err
	}
	defer c.Close() // only read from
	f := &product.Forecast{
		Steps: n.Steps, Frames: n.Frames, Cycles: n.Sequence.Target.Code.Cycles, CyclesReached: n.Cycles,
		ReadNoise: n.ReadNoise, Passed: n.Passed, Notes: []string{},
	}
	if n.ThroughputErr != nil {
		f.ThroughputErr = *n.ThroughputErr
	}
	all, err := n.expect(ctx)
	if err != nil {
		return nil, err
	}
	for i := range all {
		if err := all[i].look(ctx, c, n.SkyTaken); err != nil {
			return nil, fmt.Errorf("%s: %w", all[i].plan.Name, err)
		}
	}
	f.Sky = skyOf(all)
	field := besideAll(all)
	for i := range all {
		f.Wanted = append(f.Wanted, all[i].reached(field))
	}
	n.explain(f)
	return f, nil
}

// measurement is one that is wanted: its forecasts and the sums of the cube.
type measurement struct {
	plan, taken forecast.Measure
	// outside: the cube has none of its wavelengths.
	outside    bool
	a, r       []forecast.Voxel
	in, beside sums
	pixels     extract.Deviation
	sigma      float64 // of taken, for the voxels that are good
	scale      float64
	// throughput is what the error of the frames' throughput that was found makes of the S/N
	// that the plan's would give; 0 if not known.
	throughput   float64
	good         float64
	flags        []product.FlagPart
	skyTaken     float64 // of the light in, that which the reduction took off
	told         bool    // the light beside tells the unwanted light
	signal, off  float64 // where told: the light, and its error with that of what was taken off
	ratio, error float64 // of unwanted light, and its error
}

// sums are over the good voxels, by weight: the cube's light, the forecast's by part, the
// cube's variance as if voxels were independent, and the weights.
type sums struct {
	light, wanted, unwanted, sky, naive, weight float64
}

// leastBeside is how much more error the light may have from what was taken off, in sigmas of
// the sum, before the light beside is of no use.
const leastBeside = 2

// look sums up the cube's voxels.
func (m *measurement) look(ctx context.Context, c *extract.Cube, skyTaken bool) error {
	places, kept, in, err := gather(ctx, c, m.a, skyTaken)
	m.flags = in.flagParts()
	if err != nil || len(places) == 0 {
		return err
	}
	m.in = in.sums
	m.scale, m.skyTaken = in.scale, in.skyTaken
	m.good, m.sigma = m.goodPart(kept)
	weights := make([]float64, len(kept))
	for i, v := range kept {
		weights[i] = v.Weight
	}
	if m.pixels, err = c.Deviation(ctx, places, weights); err != nil {
		return err
	}
	_, _, beside, err := gather(ctx, c, m.r, skyTaken)
	if err != nil {
		return err
	}
	m.beside = beside.sums
	m.part()
	return nil
}

// goodPart is the part of the weight that voxels have which are good, and the forecast's sigma
// for them: neighbours are as correlated as those of all are.
func (m *measurement) goodPart(kept []forecast.Voxel) (part, sigma float64) {
	squares := func(list []forecast.Voxel) (weight, square float64) {
		for _, v := range list {
			weight += v.Weight
			square += v.Weight * v.Weight * v.Sigma * v.Sigma
		}
		return weight, square
	}
	all, allSquare := squares(m.a)
	good, goodSquare := squares(kept)
	return good / all, m.taken.Sigma * math.Sqrt(goodSquare/allSquare)
}

// gathered is sums with what else the voxels tell: the mean error scale by weight and the
// light of the sky that was taken off.
type gathered struct {
	sums
	scale, skyTaken float64
	// flagged is the weight of voxels that are not good by the bits of their flags.
	flagged [16]float64
	all     float64 // weight
}

// flagParts are what makes voxels bad, the most frequent flag first.
func (g *gathered) flagParts() []product.FlagPart {
	var parts []product.FlagPart
	for _, f := range product.Flags() {
		if w := g.flagged[bits.TrailingZeros16(uint16(f.Bit))]; w > 0 && f.Bit&product.FlagBad != 0 {
			parts = append(parts, product.FlagPart{Name: f.Name, Part: w / g.all})
		}
	}
	slices.SortStableFunc(parts, func(a, b product.FlagPart) int { return cmp.Compare(b.Part, a.Part) })
	return parts
}

// gather reads voxels and sums up those that are good.
func gather(ctx context.Context, c *extract.Cube, list []forecast.Voxel, skyTaken bool) (places []extract.Place, kept []forecast.Voxel, g gathered, err error) {
	all := make([]extract.Place, len(list))
	for i, v := range list {
		all[i] = extract.Place{Element: v.Element, Row: v.Row, Channel: v.Channel}
	}
	samples, err := c.Samples(ctx, all)
	if err != nil {
		return nil, nil, g, err
	}
	for i, v := range list {
		s := samples[i]
		g.all += v.Weight
		if !s.Good {
			for b := uint16(s.Flags); b != 0; b &= b - 1 {
				g.flagged[bits.TrailingZeros16(b)] += v.Weight
			}
			continue
		}
		places, kept = append(places, all[i]), append(kept, v)
		g.light += v.Weight * s.Light
		g.wanted += v.Weight * v.Wanted
		g.unwanted += v.Weight * (v.Light - v.Wanted)
		if skyTaken {
			g.unwanted -= v.Weight * v.Sky
		}
		g.sky += v.Weight * v.Sky
		g.naive += v.Weight * v.Weight * s.Variance
		g.weight += v.Weight
		g.scale += v.Weight * s.Scale
		g.skyTaken += v.Weight * s.Sky
	}
	if g.weight > 0 {
		g.scale /= g.weight
	}
	return places, kept, g, nil
}

// part solves the two equations of the package's documentation, where they can be.
func (m *measurement) part() {
	a, r := m.in, m.beside
	det := a.wanted*r.unwanted - r.wanted*a.unwanted
	if !(a.wanted > 0) || !(r.unwanted > 0) || !(det > 0) || !m.disturbed() {
		return
	}
	alpha, beta := a.wanted*r.unwanted/det, a.wanted*a.unwanted/det
	sigma := math.Sqrt(m.pixels.Variance())
	noise := sigma
	if a.naive > 0 { // neighbours beside are as correlated
		noise = math.Sqrt(r.naive) * sigma / math.Sqrt(a.naive)
	}
	m.signal = alpha*a.light - beta*r.light
	m.off = math.Hypot(alpha*sigma, beta*noise)
	if m.told = m.off <= leastBeside*sigma; !m.told {
		return
	}
	s := m.signal / a.wanted
	m.ratio = (r.light - s*r.wanted) / r.unwanted
	m.error = math.Hypot(noise, m.off*r.wanted/a.wanted) / r.unwanted
}

// disturbed tells whether there is unwanted light to speak of: a twentieth of the noise is not.
func (m *measurement) disturbed() bool {
	return m.in.unwanted > math.Sqrt(m.pixels.Variance())/20
}

// reached is run.json's; field is the factor of unwanted light beside the others, nil if
// none tell it.
func (m *measurement) reached(field *product.Measured) product.Reached {
	w := product.Reached{
		Name: m.plan.Name, FromNM: m.plan.FromNM, ToNM: m.plan.ToNM, Plan: expected(m.plan.Signal, m.plan.Sigma),
		Taken: expected(m.in.wanted, m.sigma), Good: m.good, Flags: m.flags, Unwanted: product.UnwantedNone, ErrorScale: m.scale,
	}
	if m.outside {
		w.Why = "its wavelengths are not all in this cube"
	}
	variance := m.pixels.Variance()
	if !(variance > 0) || !(w.Taken.Sigma > 0) {
		return w
	}
	w.Lamps, w.Throughput = m.pixels.Response/variance, m.pixels.Throughput/variance
	sigma := math.Sqrt(variance)
	signal, off := m.in.light, sigma
	switch {
	case m.told:
		signal, off, w.Unwanted = m.signal, m.off, product.UnwantedBeside
		w.Beside = &product.Measured{Value: m.ratio, Error: m.error}
	case m.disturbed() && field != nil:
		signal, w.Unwanted = signal-field.Value*m.in.unwanted, product.UnwantedField
		off = math.Hypot(sigma, field.Error*m.in.unwanted)
	case m.disturbed():
		signal, w.Unwanted = signal-m.in.unwanted, product.UnwantedForecast
	}
	snr := signal / sigma
	noise := sigma / w.Taken.Sigma
	w.Signal, w.SignalError, w.Error, w.SNR, w.NoiseRatio = &signal, &off, &sigma, &snr, &noise
	if w.Plan.SNR > 0 && w.Taken.Signal > 0 {
		ratio, time, light, lightError := snr/w.Plan.SNR, w.Taken.SNR/w.Plan.SNR, signal/w.Taken.Signal, off/w.Taken.Signal
		if m.throughput > 0 {
			w.ThroughputRatio = &m.throughput
		}
		w.Ratio, w.TimeRatio, w.LightRatio, w.LightRatioError = &ratio, &time, &light, &lightError
	}
	return w
}

func expected(signal, sigma float64) product.Expected {
	e := product.Expected{Signal: signal, Sigma: sigma}
	if sigma > 0 {
		e.SNR = signal / sigma
	}
	return e
}
