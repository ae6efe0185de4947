package calib

import (
	"math"
	"slices"
)

// transferSample is a pixel of a pair: the light m around it, in ADU, half the squared
// difference, whose expectation is the variance.
type transferSample struct{ m, half float64 }

// transferReach is the number of pixels of a row on each side that are averaged for a
// pixel's light, so that its own read noise does not decide what variance is expected
// of it: a straight line through points with errors in both directions is too flat.
// Its photon noise would do no harm: half the squared difference of two Poisson numbers
// is expected to be their mean, whatever that came out as.
const transferReach = 15

// transferLine is v(m) = level + slope m in ADU^2. floor keeps it positive.
type transferLine struct{ level, slope float64 }

// leastVariance of a value in whole ADU: that of rounding.
const leastVariance = 1.0 / 12

func (l transferLine) at(m float64) float64 { return max(l.level+l.slope*m, leastVariance) }

// struckSigmas: a difference beyond so many sigmas is a struck pixel. Those left below
// it are for the clip of the fit.
const struckSigmas = 6

// samples appends the pair's good pixels. Differences are freed of what the two frames'
// levels (biases) or lamps (flats) differ by; rows keep what is left of their own
// levels, since a row's mean would bring the noise of its bright pixels to the dim.
func (p *Pair) samples(dst []transferSample) []transferSample {
	scaled := make([]float32, len(p.A)) // differences in about equal units
	for i := range scaled {
		a, b := float64(p.A[i]), float64(p.B[i])
		scaled[i] = float32(math.NaN())
		if p.Flags == nil || p.Flags[i] == 0 {
			scaled[i] = float32((a - b) / p.unit(a+b))
		}
	}
	level, scatter := RobustLevel(scaled, make([]float32, len(scaled)))
	kept := make([]bool, len(scaled))
	var differences, weights float64
	for i, v := range scaled {
		kept[i] = math.Abs(float64(v)-level) <= struckSigmas*max(scatter, 0.5)
		if kept[i] {
			differences += float64(p.A[i] - p.B[i])
			weights += p.part(i)
		}
	}
	if !(weights > 0) {
		return dst
	}
	drift := differences / weights
	for start := 0; start < len(p.A); start += p.Width {
		dst = p.row(dst, kept[start:start+p.Width], start, drift)
	}
	return dst
}

// unit is what the noise of a difference grows with.
func (p *Pair) unit(sum float64) float64 {
	if p.Dark {
		return 1
	}
	return math.Sqrt(max(sum/2, 1))
}

// part is what a pixel's difference is in proportion to.
func (p *Pair) part(i int) float64 {
	if p.Dark {
		return 1
	}
	return float64(p.A[i]+p.B[i]) / 2
}

// row appends the kept pixels of the row that begins at pixel start.
func (p *Pair) row(dst []transferSample, kept []bool, start int, drift float64) []transferSample {
	var places []int
	sum := []float64{0}
	for i, ok := range kept {
		if ok {
			places = append(places, start+i)
			sum = append(sum, sum[len(sum)-1]+float64(p.A[start+i]+p.B[start+i])/2)
		}
	}
	for k, i := range places {
		d := float64(p.A[i]-p.B[i]) - drift*p.part(i)
		m := 0.0
		if !p.Dark {
			reach := min(transferReach, k, len(places)-1-k) // symmetric: a slope does no harm
			m = (sum[k+reach+1] - sum[k-reach]) / float64(2*reach+1)
		}
		dst = append(dst, transferSample{m, d * d / 2})
	}
	return dst
}

// transferGroups is the number of groups of like light.
const transferGroups = 32

// grouped sorts samples by their light and cuts them into groups of one size.
func grouped(samples []transferSample) [][]transferSample {
	slices.SortStableFunc(samples, func(a, b transferSample) int {
		switch {
		case a.m < b.m:
			return -1
		case a.m > b.m:
			return 1
		}
		return 0
	})
	var groups [][]transferSample
	size := (len(samples) + transferGroups - 1) / transferGroups
	for chunk := range slices.Chunk(samples, size) {
		groups = append(groups, chunk)
	}
	return groups
}

// startLine goes through the robust variances of the groups: the median of chi-square
// with one degree of freedom is 0.4549364.
func startLine(samples []transferSample) transferLine {
	const medianChi2 = 0.4549364231195724
	var sums transferSums
	for _, g := range grouped(samples) {
		halves := make([]float64, len(g))
		m := 0.0
		for i, s := range g {
			halves[i] = s.half
			m += s.m / float64(len(g))
		}
		slices.Sort(halves)
		v := halves[len(halves)/2] / medianChi2
		w := float64(len(g)) / math.Pow(max(v, leastVariance), 2)
		sums.add(m, v, w)
	}
	line, ok := sums.solve()
	if !ok {
		return transferLine{level: leastVariance}
	}
	return line
}

// transferSums are those of a weighted straight line.
type transferSums struct {
	w, m, mm, v, mv float64
	kept            int
}

func (s *transferSums) add(m, v, w float64) {
	s.w += w
	s.m += w * m
	s.mm += w * m * m
	s.v += w * v
	s.mv += w * m * v
}

func (s *transferSums) determinant() float64 { return s.w*s.mm - s.m*s.m }

func (s *transferSums) solve() (transferLine, bool) {
	d := s.determinant()
	if !(d > 1e-9*s.w*s.mm) {
		return transferLine{}, false
	}
	return transferLine{level: (s.mm*s.v - s.m*s.mv) / d, slope: (s.w*s.mv - s.m*s.v) / d}, true
}

// sums weighs every sample within the clip by 1/(2 v^2), and makes up for what
// clipping takes from the variance.
func (r TransferRule) sums(samples []transferSample, line transferLine) transferSums {
	var s transferSums
	kept := clippedVariance(r.Clip)
	for _, x := range samples {
		v := line.at(x.m)
		if 2*x.half > r.Clip*r.Clip*2*v {
			continue
		}
		s.add(x.m, x.half/kept, 1/(2*v*v))
		s.kept++
	}
	return s
}

// transfer turns the line into electrons, with errors from the information matrix.
func (l transferLine) transfer(s transferSums, samples []transferSample) Transfer {
	d := s.determinant()
	varLevel, varSlope, covariance := s.mm/d, s.w/d, -s.m/d
	t := Transfer{Pixels: s.kept, Clipped: len(samples) - s.kept}
	t.Gain = 1 / l.slope
	t.GainError = math.Sqrt(varSlope) / (l.slope * l.slope)
	read2 := (l.level - leastVariance) / (l.slope * l.slope)
	byLevel, bySlope := 1/(l.slope*l.slope), -2*read2/l.slope
	error2 := math.Sqrt(max(0, byLevel*byLevel*varLevel+bySlope*bySlope*varSlope+2*byLevel*bySlope*covariance))
	t.ReadNoise = math.Sqrt(max(0, read2))
	// Near 0 the root is not straight: its error is that of the square's root.
	t.ReadNoiseError = error2 / (2 * max(t.ReadNoise, math.Sqrt(error2)/2))
	n := 0
	for _, g := range grouped(samples) {
		var sum, expected float64
		for _, x := range g {
			sum += min(x.half/l.at(x.m), 16)
			expected++
		}
		miss := sum - expected
		t.Chi2 += miss * miss / (2 * expected)
		n++
	}
	t.Chi2 /= float64(max(1, n-2))
	return t
}
