package calib

import (
	"math"
	"slices"
)

// transferSample is a pixel of a pair: its mean m, in ADU, and half the squared
// difference, whose expectation is the variance.
type transferSample struct{ m, half float64 }

// transferLine is v(m) = level + slope m in ADU^2. floor keeps it positive.
type transferLine struct{ level, slope float64 }

// leastVariance of a value in whole ADU: that of rounding.
const leastVariance = 1.0 / 12

func (l transferLine) at(m float64) float64 { return max(l.level+l.slope*m, leastVariance) }

// samples appends the pair's good pixels.
func (p *Pair) samples(dst []transferSample) []transferSample {
	type pixel struct{ m, d, correction float64 }
	var pixels []pixel
	row := make([]float32, 0, p.Width)
	scratch := make([]float32, p.Width)
	for y := 0; y < len(p.A); y += p.Width {
		row = row[:0]
		start := len(pixels)
		for i := y; i < y+p.Width; i++ {
			a, b := float64(p.A[i]), float64(p.B[i])
			if (p.Flags == nil || p.Flags[i] == 0) && a-b == a-b {
				pixels = append(pixels, pixel{m: (a + b) / 2, d: a - b})
				row = append(row, float32(a-b))
			}
		}
		n := float64(len(row))
		if n < 5 {
			pixels = pixels[:start]
			continue
		}
		mean := Clip{Sigmas: 4}.Mean(row, scratch).Mean
		for i := range pixels[start:] {
			pixels[start+i].d -= mean
			pixels[start+i].correction = n / (n - 1)
		}
	}
	// What the lamp's drift leaves within rows.
	var top, bottom, mean float64
	for _, q := range pixels {
		mean += q.m / float64(len(pixels))
	}
	for _, q := range pixels {
		top += q.d * (q.m - mean)
		bottom += (q.m - mean) * (q.m - mean)
	}
	drift := 0.0
	if bottom > 0 {
		drift = top / bottom
	}
	for _, q := range pixels {
		d := q.d - drift*(q.m-mean)
		dst = append(dst, transferSample{q.m, d * d / 2 * q.correction})
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
		s.add(x.m, x.half/kept*1, 1/(2*v*v))
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
