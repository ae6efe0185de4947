package view

import (
	"math"
	"slices"
)

// layer is what a picture shows of a band.
type layer string

// The layers. VARIANCE takes voxels for independent, and so do noise and sn: a picture's
// pixels are looked at, sums over them are extract's.
const (
	layerSignal   layer = "signal"   // mean of the good voxels
	layerVariance layer = "variance" // mean of their VARIANCE
	layerNoise    layer = "noise"    // standard error of that mean
	layerSN       layer = "sn"       // signal over noise
	layerFlags    layer = "flags"    // the bits of all voxels
	layerScale    layer = "scale"    // mean of the measured error scale
)

var layers = []layer{layerSignal, layerVariance, layerNoise, layerSN, layerFlags, layerScale}

// unit of a layer in a cube of a unit.
func (l layer) unit(cube string) string {
	switch l {
	case layerSignal, layerNoise:
		return cube
	case layerVariance:
		return "(" + cube + ")^2"
	}
	return ""
}

// values of a layer by place, not a number where no voxel is good.
func (s *bandSums) values(l layer) []float32 {
	all := make([]float32, len(s.count))
	for i := range all {
		all[i] = float32(s.value(l, i))
	}
	return all
}

func (s *bandSums) value(l layer, i int) float64 {
	if l == layerFlags {
		return float64(s.flags[i])
	}
	n := float64(s.count[i])
	if n == 0 {
		return math.NaN()
	}
	switch l {
	case layerVariance:
		return s.variance[i] / n
	case layerNoise:
		return math.Sqrt(s.variance[i]) / n
	case layerSN:
		return s.signal[i] / math.Sqrt(s.variance[i])
	case layerScale:
		return s.scale[i] / n
	}
	return s.signal[i] / n
}

// limits of values: the smallest and largest, and those below which 2 and 98 % lie; not
// numbers where there is none.
type limits struct{ min, max, low, high float64 }

// The percentiles between which a picture is first shown.
const (
	lowPart  = 0.02
	highPart = 0.98
)

func limitsOf(values []float32) limits {
	known := make([]float32, 0, len(values))
	for _, v := range values {
		if v == v {
			known = append(known, v)
		}
	}
	if len(known) == 0 {
		nan := math.NaN()
		return limits{nan, nan, nan, nan}
	}
	slices.Sort(known)
	at := func(part float64) float64 { return float64(known[int(part*float64(len(known)-1)+0.5)]) }
	return limits{at(0), at(1), at(lowPart), at(highPart)}
}
