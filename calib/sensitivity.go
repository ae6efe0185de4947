package calib

import (
	"fmt"
	"math"
)

// SensitivityFit finds how many counts an instrument makes of a flux, from a star whose
// flux is known:
//
//	counts = S flux transmission slit seconds width,
//
// S in counts per (aW m-2 nm-1) s nm, the transmission that of the air at the star's air
// mass, slit the share of the star's light that the mirrors let through. S over a prior shape (the profile's throughput times area and L/hc, say; or 1) is
// smooth: Smoother takes it through the good voxels, leaving out those that Exclude names
// (bands of the air, lines of the star) and, one round after the other, those off by more
// than Sigmas times the scatter.
type SensitivityFit struct {
	Period  float64      // of Smoother, voxels
	Sigmas  float64      // 4 costs 0.1 %
	Exclude [][2]float64 // vacuum nm, from and to
}

// DefaultSensitivityFit has the strong bands of the air (O2 and H2O; common practice, no
// source) and the first lines of the Balmer series as exclusions.
func DefaultSensitivityFit() SensitivityFit {
	return SensitivityFit{Period: 60, Sigmas: 4, Exclude: [][2]float64{
		{686, 696}, {716, 735}, {758, 772}, {813, 835}, {895, 990}, {1105, 1165}, {1330, 1490}, {1750, 2000},
		{391, 401}, {407.5, 413}, {430.5, 437.5}, {481, 491}, {649, 664},
	}}
}

// StarCounts is a star as seen: [voxel] for all. Edges has one more than the rest,
// vacuum nm ascending. Transmission is that of the air; Prior may be nil.
type StarCounts struct {
	Edges               []float64
	Counts, Variance    []float64 // of one exposure
	Transmission, Prior []float64
	Seconds             float64
	// SlitFraction is the share of the star's light that was measured, by voxel
	// (physics.StripFraction), 1 where nil; SlitRelError its relative error, the same in all
	// voxels.
	SlitFraction []float64
	SlitRelError float64
}

// Sensitivity is S by voxel, NaN where the star's table or the air's curve ends.
type Sensitivity struct {
	Value, Variance []float64
	Used, Rejected  int
	// RMS is the relative scatter of the voxels used about the curve; Chi2 that in units
	// of the errors, squared, per degree of freedom.
	RMS, Chi2 float64
}

// maxSensitivityRounds ends the rejection.
const maxSensitivityRounds = 10

// Fit finds S. An error says which input is short or wrong.
func (f SensitivityFit) Fit(star StarCounts, table FluxTable) (*Sensitivity, error) {
	n := len(star.Counts)
	if len(star.Edges) != n+1 || len(star.Variance) != n || len(star.Transmission) != n || star.Prior != nil && len(star.Prior) != n || star.SlitFraction != nil && len(star.SlitFraction) != n {
		return nil, fmt.Errorf("sensitivity: %d counts, %d variances, %d edges and %d transmissions do not fit together", n, len(star.Variance), len(star.Edges), len(star.Transmission))
	}
	if !(star.Seconds > 0) {
		return nil, fmt.Errorf("sensitivity: an exposure of %v s; give the time of the star's exposure", star.Seconds)
	}
	ratio, variance, scale, covered := f.ratios(star, table)
	if covered < n/2 {
		return nil, fmt.Errorf("sensitivity: the star's flux table (%.5g to %.5g nm) and the extinction curve cover %d of %d voxels (%.5g to %.5g nm); give longer ones",
			table.VacuumNm[0], table.VacuumNm[len(table.VacuumNm)-1], covered, n, star.Edges[0], star.Edges[n])
	}
	s := &Sensitivity{Value: make([]float64, n), Variance: make([]float64, n)}
	fit, err := f.smooth(s, ratio, variance)
	if err != nil {
		return nil, fmt.Errorf("sensitivity: %w", err)
	}
	s.judge(ratio, variance, fit)
	slit := star.SlitRelError * star.SlitRelError
	for i, c := range scale {
		s.Variance[i] += slit * s.Value[i] * s.Value[i]
		s.Value[i] *= c
		s.Variance[i] *= c * c
		if !(s.Value[i] > 0) || math.IsInf(s.Value[i], 0) {
			s.Value[i], s.Variance[i] = math.NaN(), math.NaN()
		}
	}
	return s, nil
}

// ratios are S over the prior with variances, +Inf for voxels that are not to be fitted;
// scale is the prior, NaN where nothing is known.
func (f SensitivityFit) ratios(star StarCounts, table FluxTable) (ratio, variance, scale []float64, covered int) {
	n := len(star.Counts)
	ratio, variance, scale = make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range n {
		from, to := star.Edges[i], star.Edges[i+1]
		scale[i] = 1
		if star.Prior != nil {
			scale[i] = star.Prior[i]
		}
		slit := 1.0
		if star.SlitFraction != nil {
			slit = star.SlitFraction[i]
		}
		expected := slit * scale[i] * table.Mean(from, to) * star.Transmission[i] * star.Seconds * (to - from)
		variance[i] = math.Inf(1)
		if !(expected > 0) {
			scale[i] = math.NaN()
			continue
		}
		covered++
		ratio[i] = star.Counts[i] / expected
		if v := star.Variance[i] / (expected * expected); v > 0 && !math.IsNaN(ratio[i]) && !f.excluded(from, to) {
			variance[i] = v
		}
	}
	return ratio, variance, scale, covered
}

func (f SensitivityFit) excluded(fromNm, toNm float64) bool {
	for _, band := range f.Exclude {
		if toNm > band[0] && fromNm < band[1] {
			return true
		}
	}
	return false
}

// smooth fits and rejects until no voxel is off; variance of what is rejected turns +Inf.
func (f SensitivityFit) smooth(s *Sensitivity, ratio, variance []float64) (SmoothFit, error) {
	for range maxSensitivityRounds {
		fit, err := Smoother{Period: f.Period}.Smooth(s.Value, s.Variance, ratio, variance)
		if err != nil {
			return fit, err
		}
		// In units of the errors, made larger where they are all too small.
		scatter := math.Sqrt(max(1, fit.Chi2/max(1, float64(fit.Points)-fit.Freedom)))
		worst, off := f.Sigmas*scatter, 0
		for i, v := range variance {
			if !math.IsInf(v, 1) && math.Abs(ratio[i]-s.Value[i]) > worst*math.Sqrt(v) {
				variance[i] = math.Inf(1)
				off++
			}
		}
		s.Rejected += off
		if off == 0 {
			return fit, nil
		}
	}
	return Smoother{Period: f.Period}.Smooth(s.Value, s.Variance, ratio, variance)
}

func (s *Sensitivity) judge(ratio, variance []float64, fit SmoothFit) {
	s.Used = fit.Points
	s.Chi2 = fit.Chi2 / max(1, float64(fit.Points)-fit.Freedom)
	sum := 0.0
	for i, v := range variance {
		if !math.IsInf(v, 1) {
			off := ratio[i]/s.Value[i] - 1
			sum += off * off / float64(fit.Points)
		}
	}
	s.RMS = math.Sqrt(sum)
	// Scatter beyond the errors, of the star's own lines, is in the curve's error too.
	for i := range s.Variance {
		s.Variance[i] *= max(1, s.Chi2)
	}
}

// FluxScale turns counts into flux: flux[l] = counts[l] Factor[l], in aW m-2 nm-1.
type FluxScale struct {
	Factor []float64
	// RelVariance is the relative variance of Factor, common to all elements and rows:
	// two voxels of wavelength l share a covariance of flux flux' RelVariance[l].
	RelVariance []float64
}

// Scale is for exposures of seconds through air of a transmission by voxel.
func (s *Sensitivity) Scale(edges, transmission []float64, seconds float64) FluxScale {
	n := len(s.Value)
	f := FluxScale{Factor: make([]float64, n), RelVariance: make([]float64, n)}
	for i, v := range s.Value {
		f.Factor[i] = 1 / (v * transmission[i] * seconds * (edges[i+1] - edges[i]))
		f.RelVariance[i] = s.Variance[i] / (v * v)
	}
	return f
}

// Apply turns the voxels of wavelength l from counts to flux, variances with them: the
// voxel's own, and that of the factor. Where there is no factor they become NoData.
func (f FluxScale) Apply(l int, signal, variance []float32, flags []Flag) {
	c, relative := f.Factor[l], f.RelVariance[l]
	for i := range signal {
		if math.IsNaN(c) || math.IsInf(c, 0) {
			signal[i], variance[i] = nan32, nan32
			flags[i] |= NoData
			continue
		}
		flux := float64(signal[i]) * c
		signal[i] = float32(flux)
		variance[i] = float32(float64(variance[i])*c*c + flux*flux*relative)
	}
}
