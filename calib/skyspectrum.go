package calib

import (
	"fmt"
	"math"
	"slices"
)

// SkySum gathers the spectrum of the blank sky, a mean over the blank places: every place
// has one weight for all wavelengths, so that a place whose noise is low because its
// counts are does not pull the mean down. Sums are kept by detector row and added in
// their order: rows may come in any order and from any goroutine, each from one.
type SkySum struct {
	weight         []float64 // [row][element], 0 where not blank
	rows, elements int
	voxels         int
	sums           []skyMoments // [row][voxel]
}

// skyMoments: the number of voxels, sums of w, w v and w^2 var.
type skyMoments struct{ n, w, wv, wwq float64 }

func (m *skyMoments) add(o skyMoments) {
	m.n, m.w, m.wv, m.wwq = m.n+o.n, m.w+o.w, m.wv+o.wv, m.wwq+o.wwq
}

// NewSkySum is for the places of a choice with weights 1/variance of the picture it was
// made of (any positive weights serve; nil makes them equal).
func NewSkySum(blank []bool, variance []float64, elements, voxels int) *SkySum {
	s := &SkySum{weight: make([]float64, len(blank)), elements: elements, rows: len(blank) / elements, voxels: voxels}
	s.sums = make([]skyMoments, s.rows*voxels)
	for i, is := range blank {
		switch {
		case is && variance == nil:
			s.weight[i] = 1
		case is && variance[i] > 0:
			s.weight[i] = 1 / variance[i]
		}
	}
	return s
}

// AddRow adds detector row y, [voxel][element]. Voxels with a bit of bad are left out.
func (s *SkySum) AddRow(y int, signal, variance []float32, flags []Flag, bad Flag) {
	weight := s.weight[y*s.elements:][:s.elements]
	for l := range s.voxels {
		m := &s.sums[y*s.voxels+l]
		for j, w := range weight {
			i := l*s.elements + j
			v, q := float64(signal[i]), float64(variance[i])
			if w == 0 || flags[i]&bad != 0 || !(q > 0) || math.IsNaN(v) {
				continue
			}
			m.add(skyMoments{1, w, w * v, w * w * q})
		}
	}
}

// SkySpectrum is the light of the sky by voxel.
type SkySpectrum struct {
	// Value and Variance are NaN where no blank place has a good voxel. Variance is that of
	// the mean, larger by Spectrum's factor.
	Value, Variance []float64
	// TotalWeight is the sum of the weights, Places their number, by voxel.
	TotalWeight []float64
	Places      []int
	// Line marks voxels that a line of the sky dominates.
	Line []bool

	weight   []float64
	elements int
}

// SkyLineRule says which voxels a line of the sky dominates: those brighter than Factor
// times the sky's continuum, a running median over Window voxels, by more than Sigmas
// errors of the sky's spectrum.
type SkyLineRule struct {
	Factor float64
	Window int
	Sigmas float64
}

// DefaultSkyLineRule: where lines are more than half of the light, their noise rules.
func DefaultSkyLineRule() SkyLineRule { return SkyLineRule{Factor: 2, Window: 51, Sigmas: 5} }

// Spectrum ends the gathering. correlated is by how much the variance of a mean over many
// places exceeds that of independent ones: neighbouring rows share pixels (Correlation's
// alongSlit), 1 at least.
func (s *SkySum) Spectrum(correlated float64, lines SkyLineRule) (*SkySpectrum, error) {
	sky := &SkySpectrum{
		Value: make([]float64, s.voxels), Variance: make([]float64, s.voxels), TotalWeight: make([]float64, s.voxels),
		Places: make([]int, s.voxels), weight: s.weight, elements: s.elements,
	}
	some := false
	for l := range s.voxels {
		var m skyMoments
		for y := range s.rows {
			m.add(s.sums[y*s.voxels+l])
		}
		sky.TotalWeight[l], sky.Places[l] = m.w, int(m.n)
		sky.Value[l], sky.Variance[l] = math.NaN(), math.NaN()
		if m.w > 0 {
			some = true
			sky.Value[l], sky.Variance[l] = m.wv/m.w, max(1, correlated)*m.wwq/(m.w*m.w)
		}
	}
	if !some {
		return nil, fmt.Errorf("sky: none of the blank places has a good voxel; name other elements or rows")
	}
	sky.Line = lines.mark(sky.Value, sky.Variance)
	return sky, nil
}

func (r SkyLineRule) mark(value, variance []float64) []bool {
	line := make([]bool, len(value))
	var window []float64
	for l, v := range value {
		window = window[:0]
		for k := max(0, l-r.Window/2); k < min(len(value), l+r.Window/2+1); k++ {
			if !math.IsNaN(value[k]) {
				window = append(window, value[k])
			}
		}
		if len(window) == 0 || math.IsNaN(v) {
			continue
		}
		slices.Sort(window)
		continuum := window[len(window)/2]
		line[l] = v > r.Factor*continuum && v-continuum > r.Sigmas*math.Sqrt(variance[l])
	}
	return line
}

// Subtract takes the sky from detector row y, [voxel][element], in place. The variance of a
// voxel becomes
//
//	var (1 - 2 u) + Variance,  u = its share w/TotalWeight in the sky, 0 where it has none,
//
// and two voxels p, q of wavelength l then share Covariance. Sky lines are flagged
// SkyLine; voxels without a sky become NoData.
func (k *SkySpectrum) Subtract(y int, signal, variance []float32, flags []Flag, bad Flag) {
	weight := k.weight[y*k.elements:][:k.elements]
	for l, sky := range k.Value {
		for j, w := range weight {
			i := l*k.elements + j
			if k.Line[l] {
				flags[i] |= SkyLine
			}
			if math.IsNaN(sky) {
				signal[i], variance[i] = nan32, nan32
				flags[i] |= NoData
				continue
			}
			share := 0.0
			if flags[i]&bad == 0 {
				share = w / k.TotalWeight[l]
			}
			signal[i] -= float32(sky)
			variance[i] = float32(float64(variance[i])*(1-2*share) + k.Variance[l])
		}
	}
}

// Covariance is what the sky adds to two different places of a wavelength: its variance,
// less what either had in it; p and q are their variances before and shares, 0 for
// those that are not blank.
func (k *SkySpectrum) Covariance(l int, varianceP, shareP, varianceQ, shareQ float64) float64 {
	return k.Variance[l] - shareP*varianceP - shareQ*varianceQ
}
