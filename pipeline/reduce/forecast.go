package reduce

import (
	"context"
	"fmt"
	"path/filepath"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reached"
	"mirrorloom/pipeline/sequence"
)

// hasForecast tells whether there is something to compare the cube with.
func (r *reduction) hasForecast() bool {
	return r.opts.Cube && r.seq.Target.Forecast != nil && len(r.seq.Target.Forecast.Wanted) > 0
}

// holdForecast measures in the cube what the plan wanted of it. What keeps it from that is
// said; the cube is none the worse for it.
func (r *reduction) holdForecast(ctx context.Context) (int64, error) {
	if need := r.forecastBytes() + runtimeBytes; need > r.opts.MemoryBytes {
		r.warn("the forecast is not held against the cube: it takes --memory of %d MiB", need>>20+1)
		return 0, nil
	}
	cube := filepath.Join(r.opts.Out, product.CubeFile)
	night, err := r.asTaken()
	if err == nil {
		r.reached, err = reached.Measure(ctx, cube, night)
	}
	if ctx.Err() != nil {
		return 0, ctx.Err()
	}
	if err != nil {
		r.warn("the forecast is not held against the cube: %v", err)
	}
	return 0, nil
}

// forecastBytes is the memory of comparing: extract rebuilds the light of all elements on the
// rows that a trace crosses, and reads rows of the cube at a time; the forecast keeps rows of
// the detector.
func (r *reduction) forecastBytes() int64 {
	const chunk, spare = 2 * (24 << 20), 4
	pixels := int64(r.camera.Columns) * bytesFloat
	return chunk + int64(r.shape.margin+spare)*int64(r.shape.elements)*pixels + int64(r.camera.Rows)*16*pixels
}

// asTaken is what this reduction knows of its frames.
func (r *reduction) asTaken() (reached.Night, error) {
	n := reached.Night{
		Sequence: r.seq, Axis: r.schema.Axis(), Steps: len(r.seq.StepsOf(sequence.Science)), Frames: r.roles.science, Asked: len(r.opts.Cycles),
		Cycles: r.cyclesReached(), ReadNoise: r.readNoiseRatio(), Passed: r.passed(),
		Place: r.placeInField(), Refracted: r.shift != nil && r.shift.Atmosphere != nil, SkyTaken: r.onSky.sky != nil,
	}
	if n.Cycles == 0 {
		return n, fmt.Errorf("%d of %d code rows have no frame and cannot be restored", len(r.roles.lost), r.seq.V)
	}
	var q product.Quality
	r.through.quality(&q)
	n.ThroughputErr = q.ThroughputErr
	return n, nil
}

// placeInField gives, for a place on the sky, offsets from the target in arc seconds, those at
// which the sequence has what the cube shows there; nil where the two agree, as without stars
// and without another cube's pixels.
func (r *reduction) placeInField() func(east, north float64) (float64, float64) {
	if r.stars.report == nil && (r.shift == nil || r.shift.Onto == nil) {
		return nil
	}
	night, cube := product.NewSchema(r.seq), r.schema
	return func(east, north float64) (float64, float64) {
		return night.Offset(cube.PlaceOf(physics.FromGnomonic(east, north, night.RADeg, night.DecDeg)))
	}
}

// cyclesReached is how many cycles whose frames are all there would be as noisy as the frames
// used: the harmonic mean over code rows of their number, restored rows by what restoring
// multiplies the noise; 0 where rows are lost for good.
func (r *reduction) cyclesReached() float64 {
	inverse, rows := 0.0, 0
	for _, frames := range r.roles.slots {
		if len(frames) > 0 {
			inverse += 1 / float64(len(frames))
			rows++
		}
	}
	if rows == 0 {
		return 0
	}
	cycles := float64(rows) / inverse
	if rows < len(r.roles.slots) {
		if r.quality.RestoredGrowth == nil {
			return 0
		}
		cycles /= *r.quality.RestoredGrowth * *r.quality.RestoredGrowth
	}
	return cycles
}

// readNoiseRatio is the amplifiers' mean read noise over the profile's; nil if not measured.
func (r *reduction) readNoiseRatio() *float64 {
	measured, nominal := 0.0, 0.0
	amplifiers := r.seq.Profile.Detector.Active()
	for i, a := range r.report.Amplifiers {
		if i < len(amplifiers) && a.ReadNoiseE > 0 {
			measured += a.ReadNoiseE
			nominal += r.seq.Profile.Detector.Amplifiers[i].ReadNoiseE
		}
	}
	if nominal == 0 {
		return nil
	}
	ratio := measured / nominal
	return &ratio
}

// passed is what the reference star says telescope and instrument let pass over what the
// profile says; nil without one.
func (r *reduction) passed() *float64 {
	f := r.fluxSection()
	if f == nil || !(f.Efficiency > 0) {
		return nil
	}
	most := 0.0
	for l := range r.schema.Grid.Count {
		most = max(most, r.seq.Profile.Throughput(r.schema.Axis().ObservedNM(float64(l))))
	}
	if most == 0 {
		return nil
	}
	ratio := f.Efficiency / most
	return &ratio
}
