package trial

import (
	"context"
	"fmt"
	"math"
	"path/filepath"

	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// ForecastPlan is a plan whose forecast is held against nights.
type ForecastPlan struct {
	// Make is Square or Diagonal.
	Make func() (*Field, error)
	// Name says what is done.
	Name    string
	Family  string
	V, Dark int
	Cycles  int
	// Dimmer is how many magnitudes fainter than the field's own all light is.
	Dimmer float64
	// Extinct has the air of the site between the sources and the telescope.
	Extinct bool
	// Leak is what closed mirrors leak, as a part.
	Leak float64
}

// ForecastPlans are twelve: three families, dense and sparse, and the slit scan on both
// instruments, from faint, where read noise rules, to bright.
func ForecastPlans() []ForecastPlan {
	var plans []ForecastPlan
	for _, on := range []struct {
		name    string
		make    func() (*Field, error)
		leak    float64
		family  string // the third
		v, dark int
	}{{"optical", Square, 1. / 4500, "twin-prime", 35, 8}, {"infrared", Diagonal, 1. / 1150, "singer", 57, 10}} {
		add := func(words, family string, v, dark, cycles int, dimmer float64, extinct bool, leak float64) {
			name := fmt.Sprintf("%s, %s v = %d, %d dark, cycles %d, %s", on.name, family, v, dark, cycles, words)
			plans = append(plans, ForecastPlan{on.make, name, family, v, dark, cycles, dimmer, extinct, leak})
		}
		add("faint", "m-sequence", 63, 16, 1, 3, false, 0)
		add("bright", "m-sequence", 63, 16, 1, -3, false, 0)
		add("extinction", "legendre", 59, 12, 2, 0, true, 0)
		add("bright", on.family, on.v, on.dark, 1, -1.5, false, 0)
		add("leak", "slit-scan", 47, 0, 1, 0, false, on.leak)
		add("bright", "slit-scan", 47, 0, 2, -3, false, 0)
	}
	return plans
}

// Field is the field of a plan, with a forecast of the sky that it rehearses: lines of the
// nebula at 12 places of its rim, bands at four of the stars.
func (p *ForecastPlan) Field() (*Field, error) {
	f, err := p.Make()
	if err != nil {
		return nil, err
	}
	f.SetCode(p.Family, p.V, p.Dark)
	f.Target.Code.Cycles = p.Cycles
	f.scenery()
	f.Dim(p.Dimmer)
	if p.Extinct {
		air := scene.Atmosphere{Extinction: f.Profile.Site.Extinction}
		f.Scene.Atmosphere = &air
	}
	f.Target.Forecast = &sequence.Forecast{
		SeeingFWHMArcsec: f.Scene.SeeingFWHMArcsec, Sources: f.Scene.Sources, Sky: f.Scene.Sky,
		Atmosphere: f.Scene.Atmosphere, Aim: sequence.AimFaintest, Wanted: f.wanted(),
	}
	return f, nil
}

// wanted are the lines, then the bands, of a small field.
func (f *Field) wanted() []sequence.Wanted {
	ring := &f.Scene.Sources[len(f.Scene.Sources)-1]
	radius := 0.6 // arc seconds: neighbours do not overlap
	var list []sequence.Wanted
	const places = 12
	for i := range places {
		sin, cos := math.Sincos(2 * math.Pi * float64(i) / places)
		east, north := ring.EastArcsec+ring.RadiusArcsec*sin, ring.NorthArcsec+ring.RadiusArcsec*cos
		for _, k := range []int{0, 2} {
			nm := ring.Lines[k].WavelengthNM * (1 + ring.Velocity.SystemicKmS/299792.458)
			list = append(list, sequence.Wanted{Name: fmt.Sprintf("line %d %d", i, k), EastArcsec: &east, NorthArcsec: &north, RadiusArcsec: &radius, LineNM: &nm})
		}
	}
	for i := range 4 {
		for _, k := range []float64{0.12, 0.22, 0.32, 0.42, 0.52, 0.67, 0.77} {
			at := func(part float64) float64 { return f.Profile.Grid.WavelengthNM(part * float64(f.Profile.Grid.Count)) }
			star := i
			list = append(list, sequence.Wanted{Name: fmt.Sprintf("band %d %g", i, k), Source: &star, BandNM: []float64{at(k), at(k + 0.09)}})
		}
	}
	return list
}

// Forecasted is what nights say of forecasts, by lines and bands.
type Forecasted struct {
	// VoxelSNR and SumSNR are the least and the largest forecast.
	VoxelSNR, SumSNR [2]float64
	// Voxels are (cube - truth)/forecast sigma of voxels, Sums those of sums.
	Voxels, Sums Moments
	// light and truth are the forecast's and the rehearsal's light, added up.
	light, truth float64
}

// Merge takes those of another plan.
func (j *Forecasted) Merge(o *Forecasted) {
	j.Voxels.Merge(o.Voxels)
	j.Sums.Merge(o.Sums)
	j.light += o.light
	j.truth += o.truth
	j.take(o)
}

func (j *Forecasted) take(o *Forecasted) {
	if j.VoxelSNR[1] == 0 {
		j.VoxelSNR, j.SumSNR = o.VoxelSNR, o.SumSNR
		return
	}
	j.VoxelSNR = [2]float64{min(j.VoxelSNR[0], o.VoxelSNR[0]), max(j.VoxelSNR[1], o.VoxelSNR[1])}
	j.SumSNR = [2]float64{min(j.SumSNR[0], o.SumSNR[0]), max(j.SumSNR[1], o.SumSNR[1])}
}

// Light is the forecast's light over the rehearsal's.
func (j *Forecasted) Light() float64 { return j.light / j.truth }

// VoxelRatio is the S/N measured over that forecast, of voxels, SumRatio that of sums.
func (j *Forecasted) VoxelRatio() float64 { return 1 / (j.Light() * rms(&j.Voxels)) }

// SumRatio is VoxelRatio of sums.
func (j *Forecasted) SumRatio() float64 { return 1 / (j.Light() * rms(&j.Sums)) }

func rms(m *Moments) float64 { return math.Sqrt(m.square / float64(m.N)) }

// measured is a measurement's voxels and its sum.
type measured struct {
	voxels []forecast.Voxel
	sum    forecast.Measure
	band   bool
}

// MeasureForecast rehearses and reduces nights of a plan that differ in their seed, and
// holds their voxels and sums against the forecast. The cube's light is known to be the
// truth's but for noise, which the noise is measured about.
func (p *ForecastPlan) MeasureForecast(ctx context.Context, dir string, nights int, first uint64) (lines, bands *Forecasted, err error) {
	f, err := p.Field()
	if err != nil {
		return nil, nil, err
	}
	n, err := f.Plan(ctx, filepath.Join(dir, "plan"))
	if err != nil {
		return nil, nil, err
	}
	asked, err := f.forecasts(ctx, n.Seq)
	if err != nil {
		return nil, nil, err
	}
	lines, bands = new(Forecasted), new(Forecasted)
	var truth []float32
	for i := range nights {
		name := fmt.Sprint(i)
		opts := rehearse.Options{Seed: first + uint64(i), NoTruth: i > 0}
		if p.Leak > 0 {
			opts.Faults = []rehearse.Fault{{Name: rehearse.Leak, Size: p.Leak}}
		}
		if _, err := n.Make(ctx, name, opts); err != nil {
			return nil, nil, err
		}
		cube, err := ReadCube(n.CubePath(name))
		if err != nil {
			return nil, nil, err
		}
		if truth == nil {
			if truth, err = cube.ReadTruth(n.TruthPath(name)); err != nil {
				return nil, nil, err
			}
		}
		for _, m := range asked {
			if m.band {
				bands.judge(&m, cube, truth)
			} else {
				lines.judge(&m, cube, truth)
			}
		}
		if err := n.Discard(name); err != nil {
			return nil, nil, err
		}
	}
	return lines, bands, nil
}

// forecasts are those of all that the field's target wants.
func (f *Field) forecasts(ctx context.Context, seq *sequence.Sequence) ([]measured, error) {
	light, err := forecast.New(f.Target, f.Profile)
	if err != nil {
		return nil, err
	}
	c := forecast.CandidateOf(seq)
	r, err := light.Of(ctx, c)
	if err != nil {
		return nil, err
	}
	var list []measured
	for i, m := range r.Wanted {
		voxels, err := light.Voxels(c, i)
		if err != nil {
			return nil, err
		}
		list = append(list, measured{voxels, m, f.Target.Forecast.Wanted[i].LineNM == nil})
	}
	return list, nil
}

// judge holds a night's measurement against its forecast.
func (j *Forecasted) judge(m *measured, c *Cube, truth []float32) {
	sum := 0.0
	for _, v := range m.voxels {
		at := (v.Channel*c.Rows+v.Row)*c.N + v.Element
		if !c.Good(at) {
			return // a sum of good voxels only is another one
		}
		off := float64(c.Signal[at] - truth[at])
		j.Voxels.Add(off / v.Sigma)
		j.light += v.Light
		j.truth += float64(truth[at])
		sum += v.Weight * off
	}
	j.Sums.Add(sum / m.sum.Sigma)
	j.take(&Forecasted{VoxelSNR: [2]float64{m.sum.VoxelSNR, m.sum.VoxelSNR}, SumSNR: [2]float64{m.sum.SNR, m.sum.SNR}})
}

// forecastFigure is how far the S/N measured may be from that forecast.
const forecastFigure = 0.05

// Findings judge voxels, whose neighbours share pixels and count half, and state sums.
func (j *Forecasted) Findings(name string) []Finding {
	n := j.Voxels.N / 2
	return []Finding{
		Near(fmt.Sprintf("%s: S/N of voxels (forecast %.2g to %.2g), measured over forecast", name, j.VoxelSNR[0], j.VoxelSNR[1]), j.VoxelRatio(), 1, forecastFigure, 1/math.Sqrt(2*float64(n)), n),
		Stated(fmt.Sprintf("%s: S/N of sums (forecast %.2g to %.2g), measured over forecast", name, j.SumSNR[0], j.SumSNR[1]), j.SumRatio(), j.Sums.N),
	}
}

// Scaled is what the nights would say of forecasts whose sigma is scaled: a test of the test.
func (j *Forecasted) Scaled(scale float64) *Forecasted {
	k := *j
	k.Voxels.square /= scale * scale
	k.Sums.square /= scale * scale
	return &k
}

// SumFindings judge the sums of all plans.
func (j *Forecasted) SumFindings(name string) Finding {
	n := j.Sums.N
	return Near(fmt.Sprintf("%s: S/N of sums (forecast %.2g to %.2g), measured over forecast", name, j.SumSNR[0], j.SumSNR[1]), j.SumRatio(), 1, forecastFigure, 1/math.Sqrt(2*float64(n)), n)
}
