package calib

import (
	"fmt"
	"math"
	"slices"
)

// SkySum gathers the spectrum of the blank sky, a mean over the blank places: every place
// has one weight for all wavelengths, so that a place whose noise is low because its
// counts are does not pull the mean down. Planes, one a wavelength, may come in any
// order and from any goroutine, each once; within a plane sums go by row and element.
type SkySum struct {
	weight         []float64 // [row][element], 0 where not blank; their sum is 1
	rows, elements int
	planes         []skyPlane
}

// skyPlane is what a plane adds up to: the number of voxels, the sum of weights, the mean
// and the variance of it that independent voxels give; the ratio to that of the variance
// that the scatter of the elements' means tells, 0 where unknown; and the mean of
// (value - mean)^2/variance.
type skyPlane struct {
	n                    int
	w, mean, independent float64
	ratio, chi2          float64
}

// NewSkySum is for the places of a choice with weights 1/variance of the picture it was
// made of (any positive weights serve; nil makes them equal).
func NewSkySum(blank []bool, variance []float64, elements, voxels int) *SkySum {
	s := &SkySum{weight: make([]float64, len(blank)), elements: elements, rows: len(blank) / elements, planes: make([]skyPlane, voxels)}
	sum := 0.0
	for i, is := range blank {
		switch {
		case is && variance == nil:
			s.weight[i] = 1
		case is && variance[i] > 0 && !math.IsInf(variance[i], 1):
			s.weight[i] = 1 / variance[i]
		}
		sum += s.weight[i]
	}
	for i := range s.weight {
		if sum > 0 {
			s.weight[i] /= sum
		}
	}
	return s
}

// leastElements must hold blank places for the scatter between elements to count.
const leastElements = 12

// AddPlane adds the plane of voxel l, [row][element], and gives its mean, NaN where no
// blank place is good. Voxels with a bit of bad are left out.
func (s *SkySum) AddPlane(l int, signal, variance []float32, flags []Flag, bad Flag) float64 {
	type column struct{ w, wv float64 }
	columns := make([]column, s.elements)
	p := skyPlane{}
	sum, square := 0.0, 0.0
	s.visit(signal, variance, flags, bad, func(i int, w, v, q float64) {
		c := &columns[i%s.elements]
		c.w += w
		c.wv += w * v
		p.n++
		p.w += w
		sum += w * v
		square += w * w * q
	})
	p.mean = math.NaN()
	if p.w > 0 {
		p.mean, p.independent = sum/p.w, square/(p.w*p.w)
		scatter, some := 0.0, 0
		for _, c := range columns {
			if c.w > 0 {
				off := (c.wv - c.w*p.mean) / p.w
				scatter += off * off
				some++
			}
		}
		if some >= leastElements {
			p.ratio = scatter * float64(some) / float64(some-1) / p.independent
		}
		s.visit(signal, variance, flags, bad, func(_ int, _, v, q float64) {
			p.chi2 += (v - p.mean) * (v - p.mean) / q / float64(p.n)
		})
	}
	s.planes[l] = p
	return p.mean
}

// visit goes through the good voxels of the blank places.
func (s *SkySum) visit(signal, variance []float32, flags []Flag, bad Flag, use func(i int, w, v, q float64)) {
	for i, w := range s.weight {
		v, q := float64(signal[i]), float64(variance[i])
		if w > 0 && flags[i]&bad == 0 && q > 0 && !math.IsNaN(v) {
			use(i, w, v, q)
		}
	}
}

// SkySpectrum is the light of the sky by voxel.
type SkySpectrum struct {
	// Value and Variance are NaN where no blank place has a good voxel. Variance is that of
	// the mean: what independent voxels give, times Correlated.
	Value, Variance []float64
	// TotalWeight is the sum of the weights, Places their number, by voxel.
	TotalWeight []float64
	Places      []int
	// Line marks voxels that a line of the sky dominates.
	Line []bool
	// Weight of each place in the mean, [row][element]; 0 where not blank, their sum is 1.
	Weight []float64
	// Chi2 is the mean of (value - sky)^2/variance over the blank places, by voxel.
	Chi2 []float64
	// Correlated and CorrelatedLines are by how much the variance of the mean is above that
	// of independent voxels, apart from lines and in them.
	Correlated, CorrelatedLines float64
}

// SkyLineRule says which voxels a line of the sky dominates: those brighter than Factor
// times the sky's continuum, a running median over Window voxels, by more than Sigmas
// errors of the sky's spectrum; and those brighter than the continuum by so many errors
// where the blank places scatter about the sky by more than Residual times the
// chi-square of the voxels that are no lines, and not by chance.
type SkyLineRule struct {
	Factor   float64
	Window   int
	Sigmas   float64
	Residual float64
}

// DefaultSkyLineRule: where lines are more than half of the light, their noise rules;
// where the chi-square is larger by a tenth, errors are too small by a twentieth.
func DefaultSkyLineRule() SkyLineRule {
	return SkyLineRule{Factor: 2, Window: 51, Sigmas: 5, Residual: 1.1}
}

// Spectrum ends the gathering. The variance of the mean is that of independent voxels
// times a factor, which is what the scatter of the elements' means says, or correlated
// where that is larger: neighbouring rows share pixels (Correlation's alongSlit), and all
// rows of an element share the errors of its response.
func (s *SkySum) Spectrum(correlated float64, lines SkyLineRule) (*SkySpectrum, error) {
	n := len(s.planes)
	sky := &SkySpectrum{
		Value: make([]float64, n), Variance: make([]float64, n), TotalWeight: make([]float64, n), Chi2: make([]float64, n),
		Places: make([]int, n), Weight: s.weight,
	}
	some := false
	for l, p := range s.planes {
		sky.TotalWeight[l], sky.Places[l], sky.Value[l], sky.Variance[l], sky.Chi2[l] = p.w, p.n, math.NaN(), math.NaN(), math.NaN()
		if p.w > 0 {
			some = true
			sky.Value[l], sky.Variance[l], sky.Chi2[l] = p.mean, p.independent, p.chi2
		}
	}
	if !some {
		return nil, fmt.Errorf("sky: none of the blank places has a good voxel; name other elements or rows")
	}
	sky.Line = lines.mark(sky)
	sky.Correlated = max(1, correlated, s.ratio(sky.Line, false))
	sky.CorrelatedLines = max(sky.Correlated, s.ratio(sky.Line, true))
	for l, line := range sky.Line {
		if line {
			sky.Variance[l] *= sky.CorrelatedLines
		} else {
			sky.Variance[l] *= sky.Correlated
		}
	}
	return sky, nil
}

// ratio is the mean of the planes' ratios, of lines or of the others; 0 without any.
func (s *SkySum) ratio(line []bool, lines bool) float64 {
	sum, n := 0.0, 0
	for l, p := range s.planes {
		if line[l] == lines && p.ratio > 0 {
			sum += p.ratio
			n++
		}
	}
	return sum / float64(max(1, n))
}

func (r SkyLineRule) mark(sky *SkySpectrum) []bool {
	line, risen := make([]bool, len(sky.Value)), make([]bool, len(sky.Value))
	var window, quiet []float64
	for l, v := range sky.Value {
		window = window[:0]
		for k := max(0, l-r.Window/2); k < min(len(line), l+r.Window/2+1); k++ {
			if !math.IsNaN(sky.Value[k]) {
				window = append(window, sky.Value[k])
			}
		}
		if len(window) == 0 || math.IsNaN(v) {
			continue
		}
		slices.Sort(window)
		continuum := window[len(window)/2]
		risen[l] = v-continuum > r.Sigmas*math.Sqrt(sky.Variance[l])
		line[l] = risen[l] && v > r.Factor*continuum
		if !risen[l] {
			quiet = append(quiet, sky.Chi2[l])
		}
	}
	if len(quiet) == 0 || !(r.Residual > 0) {
		return line
	}
	slices.Sort(quiet)
	usual := quiet[len(quiet)/2]
	for l, is := range risen {
		chance := r.Sigmas * math.Sqrt(2/float64(max(1, sky.Places[l])))
		line[l] = line[l] || is && sky.Chi2[l] > usual*(r.Residual+chance)
	}
	return line
}

// Subtract takes the sky from the plane of voxel l, [row][element], in place: of each
// place the part of the sky that it sees (nil for 1), less at the slit's ends. The variance
// of a voxel becomes
//
//	var (1 - 2 u part) + Variance part^2,  u = its share Weight/TotalWeight in the sky, 0 where it has none,
//
// and two voxels p, q of wavelength l then share Covariance. Sky lines are flagged
// SkyLine; voxels without a sky become NoData.
func (k *SkySpectrum) Subtract(l int, signal, variance []float32, flags []Flag, bad Flag, part []float32) {
	sky, sees := k.Value[l], 1.0
	for i, w := range k.Weight {
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
		if part != nil {
			sees = float64(part[i])
		}
		signal[i] = float32(float64(signal[i]) - sees*sky)
		variance[i] = float32(float64(variance[i])*(1-2*share*sees) + sees*sees*k.Variance[l])
	}
}

// Covariance is what the sky adds to two different places of a wavelength that see all
// of it: its variance,
// less what either had in it; p and q are their variances before and shares, 0 for
// those that are not blank.
func (k *SkySpectrum) Covariance(l int, varianceP, shareP, varianceQ, shareQ float64) float64 {
	return k.Variance[l] - shareP*varianceP - shareQ*varianceQ
}
