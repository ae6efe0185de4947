package skyflux

import (
	"errors"
	"fmt"
	"math"
	"sort"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// Exposures are those of the star or of the science frames: how long one took, and the
// air masses of all.
type Exposures struct {
	Seconds   float64
	Airmasses []float64
}

// Airmass is their mean.
func (e Exposures) Airmass() float64 { return mean(e.Airmasses) }

// Transmission is that of the air in the mean of the exposures, by voxel; 1 without a
// curve, NaN beyond its ends.
func (e Exposures) Transmission(curve physics.ExtinctionCurve, edges []float64) []float64 {
	out := make([]float64, len(edges)-1)
	for l := range out {
		out[l] = 1
		if len(curve) == 0 {
			continue
		}
		k := curve.At((edges[l] + edges[l+1]) / 2)
		out[l] = 0
		for _, x := range e.Airmasses {
			out[l] += physics.AirTransmission(k, x) / float64(len(e.Airmasses))
		}
	}
	return out
}

// priorSamples of a voxel are averaged.
const priorSamples = 4

// Prior is the shape that the sensitivity is taken to have but for a smooth factor:
// electrons per second and nm for a flux of 1 aW m-2 nm-1 by the profile's throughput.
func Prior(p *instrument.Profile, edges []float64) []float64 {
	return electrons(p.CollectingAreaM2(), edges, p.Throughput)
}

// electrons are those of each photon's chance.
func electrons(areaM2 float64, edges []float64, chance func(nm float64) float64) []float64 {
	out := make([]float64, len(edges)-1)
	for l := range out {
		for i := range priorSamples {
			nm := edges[l] + (edges[l+1]-edges[l])*(float64(i)+0.5)/priorSamples
			out[l] += chance(nm) * areaM2 * physics.PhotonsFromFlux(1, nm) / priorSamples
		}
	}
	return out
}

// Flux is how counts become flux.
type Flux struct {
	Scale  calib.FluxScale
	Record product.FluxRecord
	Report product.FluxReport
	// Unknown counts the voxels without a flux where the instrument has light.
	Unknown int
}

// Factors are what Write applies; nil without a flux.
func (f *Flux) Factors() *calib.FluxScale {
	if f == nil {
		return nil
	}
	return &f.Scale
}

// Calibrate finds the flux of exposures on voxels with the given edges, nm at the
// telescope, from a star seen by the same instrument.
func Calibrate(star *Star, table calib.FluxTable, seen, science Exposures, p *instrument.Profile, edges []float64) (*Flux, error) {
	curve := p.Site.Extinction.Curve()
	prior := Prior(p, star.Edges)
	n := len(star.Counts)
	lost := make([]float64, n)
	for l, f := range star.Fraction {
		lost[l] = 1 - f
	}
	fit, err := calib.DefaultSensitivityFit().Fit(calib.StarCounts{
		Edges: star.Edges, Counts: star.Counts, Variance: star.Variance,
		Transmission: seen.Transmission(curve, star.Edges), Prior: prior, Seconds: seen.Seconds,
		SlitFraction: positive(star.Fraction), SlitRelError: star.LossError * lost[n/2],
	}, table)
	if err != nil {
		return nil, err
	}
	for l, v := range fit.Value {
		fit.Variance[l] += v * v * star.shared(l)
	}
	own, err := onGrid(fit, star.Edges, prior, edges, Prior(p, edges))
	if err != nil {
		return nil, err
	}
	transmission := science.Transmission(curve, edges)
	f := &Flux{Scale: own.Scale(edges, transmission, science.Seconds)}
	f.Record = product.FluxRecord{Factor: f.Scale.Factor, RelVariance: f.Scale.RelVariance, Transmission: transmission}
	f.Report = product.FluxReport{
		Element: star.Element, Row: star.Row, FWHMArcsec: star.FWHMArcsec, SlitFraction: star.Fraction[n/2], SlitRelError: star.LossError * lost[n/2],
		StarAirmass: seen.Airmass(), Airmass: science.Airmass(), Extinction: len(curve) > 0, Used: fit.Used, Rejected: fit.Rejected, RMS: fit.RMS,
		ElementError: star.PlaceError, ElementAssumed: star.Misplaced != nil && !star.PlaceMeasured, FrameError: star.FrameError,
	}
	f.judge(own, edges, p)
	return f, nil
}

// positive makes fractions of nothing 1: such voxels have no weight anyway.
func positive(fraction []float64) []float64 {
	out := make([]float64, len(fraction))
	for i, f := range fraction {
		if out[i] = f; !(f > 0) {
			out[i] = 1
		}
	}
	return out
}

// judge fills in what the report says of the sensitivity.
func (f *Flux) judge(own *calib.Sensitivity, edges []float64, p *instrument.Profile) {
	photons := electrons(p.CollectingAreaM2(), edges, func(float64) float64 { return 1 })
	prior := Prior(p, edges)
	var errors []float64
	for l, v := range own.Value {
		if c := f.Scale.Factor[l]; !(c > 0) || math.IsInf(c, 0) {
			f.Scale.Factor[l], f.Scale.RelVariance[l] = math.NaN(), math.NaN()
			if prior[l] > 0 {
				f.Unknown++
			}
			continue
		}
		errors = append(errors, math.Sqrt(f.Scale.RelVariance[l]))
		f.Report.Efficiency = max(f.Report.Efficiency, v/photons[l])
	}
	f.Report.RelError = median(errors)
}

// onGrid takes a sensitivity from the star's voxels to others, through its smooth ratio to
// the prior. Beyond the star's voxels it is NaN.
func onGrid(s *calib.Sensitivity, from, prior, to, newPrior []float64) (*calib.Sensitivity, error) {
	middle := func(edges []float64, l int) float64 { return (edges[l] + edges[l+1]) / 2 }
	var nm, ratio, relative []float64
	for l, v := range s.Value {
		if v > 0 && prior[l] > 0 {
			nm, ratio, relative = append(nm, middle(from, l)), append(ratio, v/prior[l]), append(relative, s.Variance[l]/(v*v))
		}
	}
	if len(nm) < 2 {
		return nil, errors.New("the sensitivity is known at fewer than two wavelengths; use another star or a longer exposure")
	}
	half := math.Abs(from[1]-from[0]) / 2
	out := &calib.Sensitivity{Value: make([]float64, len(newPrior)), Variance: make([]float64, len(newPrior)), Used: s.Used, Rejected: s.Rejected, RMS: s.RMS, Chi2: s.Chi2}
	some := 0
	for l := range out.Value {
		x := middle(to, l)
		out.Value[l], out.Variance[l] = math.NaN(), math.NaN()
		if x < nm[0]-half || x > nm[len(nm)-1]+half || !(newPrior[l] > 0) {
			continue
		}
		k := min(max(sort.SearchFloat64s(nm, x), 1), len(nm)-1)
		t := min(max((x-nm[k-1])/(nm[k]-nm[k-1]), 0), 1)
		v := (ratio[k-1] + t*(ratio[k]-ratio[k-1])) * newPrior[l]
		out.Value[l], out.Variance[l] = v, v*v*(relative[k-1]+t*(relative[k]-relative[k-1]))
		some++
	}
	if some < len(out.Value)/2 {
		return nil, fmt.Errorf("the star was seen from %.5g to %.5g nm, which covers %d of the cube's %d voxels; use a star of a run with a wider grid", nm[0], nm[len(nm)-1], some, len(out.Value))
	}
	return out, nil
}
