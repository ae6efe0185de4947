package calib

import (
	"cmp"
	"math"
	"slices"
)

// transferSample is a pixel of a pair: the light m around it, in ADU, half the squared
// difference, whose expectation is the variance.
type transferSample struct{ m, half float64 }

// transferSmooth are the weights of a pixel and its neighbours along the row, on one
// side, in its light m: a parabola through five pixels (Savitzky and Golay 1964,
// Analytical Chemistry 36, 1627). A straight line through points with errors in both
// directions is too flat, and these halve the variance of the read noise in m, while an
// edge as wide as the lines keeps its shape: with a mean over many pixels the dim ones
// at the foot of an edge, which weigh most, would be taken for brighter than they are.
// The photons' noise in m does no harm: half the squared difference of two Poisson
// numbers is expected to be their mean, whatever that came out as.
var transferSmooth = [...]float64{17.0 / 35, 12.0 / 35, -3.0 / 35}

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
	kept := p.unstruck()
	var differences, weights float64
	for i, ok := range kept {
		if ok {
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

// unstruck marks the good pixels whose difference is within struckSigmas of those of
// pixels of like light. A common scale would not do: in a flat the dim pixels, with
// read noise alone, scatter otherwise than the bright ones.
func (p *Pair) unstruck() []bool {
	var places []int
	for i := range p.A {
		if (p.Flags == nil || p.Flags[i] == 0) && p.A[i] == p.A[i] && p.B[i] == p.B[i] {
			places = append(places, i)
		}
	}
	groups := 1
	if !p.Dark {
		groups = transferGroups
		slices.SortStableFunc(places, func(i, k int) int { return cmp.Compare(p.A[i]+p.B[i], p.A[k]+p.B[k]) })
	}
	kept := make([]bool, len(p.A))
	for group := range slices.Chunk(places, max(1, (len(places)+groups-1)/groups)) {
		differences := make([]float32, len(group))
		for k, i := range group {
			differences[k] = p.A[i] - p.B[i]
		}
		level, scatter := RobustLevel(differences, make([]float32, len(group)))
		for k, i := range group {
			kept[i] = math.Abs(float64(differences[k])-level) <= struckSigmas*max(scatter, 0.5)
		}
	}
	return kept
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
	for i, ok := range kept {
		if ok {
			d := float64(p.A[start+i]-p.B[start+i]) - drift*p.part(start+i)
			dst = append(dst, transferSample{p.lightAt(kept, start, i), d * d / 2})
		}
	}
	return dst
}

// lightAt is m of pixel i of the row that begins at pixel start: from the pixel alone
// where a neighbour is not kept.
func (p *Pair) lightAt(kept []bool, start, i int) float64 {
	if p.Dark {
		return 0
	}
	const reach = len(transferSmooth) - 1
	m := 0.0
	for k := -reach; k <= reach; k++ {
		if i+k < 0 || i+k >= len(kept) || !kept[i+k] {
			return p.part(start + i)
		}
		m += transferSmooth[max(k, -k)] * p.part(start+i+k)
	}
	return m
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
