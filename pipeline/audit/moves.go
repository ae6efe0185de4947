package audit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// move is a change of a few frames of a state.
type move struct {
	kind Kind
	// row is the code row whose frame is at fault; other is the row that it shows, or
	// with which it is exchanged.
	row, other int
	mirrors    int // by which the mask slipped
	gain       float64
}

// shortlist is how many exchanges are looked at with throughputs of their own each time;
// the scan uses those of the state, which its faults have pulled at. closest is how many
// masks of other rows are tried for a frame that looks wrong, and wrongest how many
// such frames.
const (
	shortlist = 6
	closest   = 2
	wrongest  = 4
	// doubtful is how many standard deviations of the noise a frame must be off to be
	// among them: what the odds would call sure is off by more than four.
	doubtful = 2
)

// scan lists the moves that promise most: among all exchanges of two frames; and for
// the frames that look worst, each taken out so that it pulls at nothing, what their
// misfit with the masks of other rows, and with their own inverted, flipped and slipped,
// makes likely. A frame that shows row r may have been exchanged with r's.
func (s *state) scan() []move {
	list := s.exchanges(s.lit())
	ratio := s.frameTests()
	var worst []int
	for k, r := range ratio {
		if r > 1+doubtful*math.Sqrt(2/float64(s.pixels)) {
			worst = append(worst, k)
		}
	}
	slices.SortStableFunc(worst, func(a, b int) int { return compare(ratio[b], ratio[a]) })
	for _, k := range worst[:min(wrongest, len(worst))] {
		without := s.apply(move{kind: Unknown, row: k, other: none})
		if without == nil {
			continue
		}
		for _, m := range best(without.names(k, k), closest) {
			list = append(list, m)
			if m.kind == Stale && !s.erased[m.other] {
				list = append(list, move{kind: Exchanged, row: k, other: m.other})
			}
		}
	}
	return list
}

// names lists what the frame of the erased row k may show, in place of row label. The
// gain is less the misfit over its noise.
func (s *state) names(k, label int) []move {
	var list []move
	try := func(m move) {
		var d, noise float64
		if m.kind == Stale && !s.erased[m.other] {
			d, noise = s.repeated(k, m.other)
		} else {
			d, noise = s.misfit(k, s.weightsOf(m))
		}
		m.gain = -d / noise
		list = append(list, m)
	}
	for r := range s.v {
		if r != label {
			try(move{kind: Stale, row: label, other: r})
		}
	}
	try(move{kind: Inverted, row: label, other: none})
	try(move{kind: Flipped, row: label, other: none})
	for _, n := range s.slips() {
		try(move{kind: Slipped, row: label, other: none, mirrors: n})
	}
	return list
}

func compare(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// best keeps the n moves of the largest gain, in order.
func best(list []move, n int) []move {
	slices.SortStableFunc(list, func(a, b move) int { return compare(b.gain, a.gain) })
	return list[:min(n, len(list))]
}

// exchanges puts the reading of frame i, times f, in row k and that of frame k, times
// h, in row i. Chi-square is then a parabola in f and h whose terms are in P, G and PG;
// it is taken at its least, light alone, under the prior of each frame's factor.
func (s *state) exchanges(pg *mat.Dense) []move {
	trend := s.trend()
	var list []move
	for k := range s.v {
		if s.erased[k] {
			continue
		}
		p, g, q := s.projector.RawRowView(k), s.sum.RawRowView(k), pg.RawRowView(k)
		for i := k + 1; i < s.v; i++ {
			if s.erased[i] {
				continue
			}
			pii, gii := s.projector.At(i, i), s.sum.At(i, i)
			// What rows k and i now add to chi-square, and to its expectation.
			now := 2*q[k] + 2*pg.At(i, i) - p[k]*g[k] - pii*gii - 2*p[i]*g[i]
			nowNoise := p[k]*s.noise[k] + pii*s.noise[i]
			two := pair2{
				a: p[k] * gii, b: pii * g[k], c: p[i] * g[i],
				na: p[k] * s.noise[i], nb: pii * s.noise[k],
				f: q[i] - p[k]*g[i] - p[i]*gii,
				h: pg.At(i, k) - pii*g[i] - p[i]*g[k],
			}
			two.prior(s.factor[i], trend[i], s.factor[k], trend[k])
			then, thenNoise := two.least()
			if gain := now - nowNoise - then + thenNoise; gain > 0 {
				list = append(list, move{kind: Exchanged, row: k, other: i, gain: gain})
			}
		}
	}
	return best(list, shortlist)
}

// pair2 is a parabola a f^2 + b h^2 + 2c f h + 2F f + 2H h in two factors; na and nb are
// the parts of a and b that are noise.
type pair2 struct {
	a, b, c, na, nb, f, h float64
	// The priors: wf (f-f0)^2 + wh (h-h0)^2.
	wf, f0, wh, h0 float64
}

// prior expects frame by frame that the factor, now x, is that of the trend.
func (t *pair2) prior(x, trendX, z, trendZ float64) {
	const weight = 1 / (priorScatter * priorScatter)
	t.wf, t.f0 = weight*x*x, trendX/x
	t.wh, t.h0 = weight*z*z, trendZ/z
}

// least is the parabola's value, with the price of the prior, where light and prior
// have their least, and the noise in it.
func (t *pair2) least() (value, noise float64) {
	a, b := t.a-t.na+t.wf, t.b-t.nb+t.wh
	f, h := t.wf*t.f0-t.f, t.wh*t.h0-t.h
	det := a*b - t.c*t.c
	if !(det > 0) {
		return math.Inf(1), 0
	}
	x, z := (f*b-h*t.c)/det, (h*a-f*t.c)/det
	value = t.a*x*x + t.b*z*z + 2*t.c*x*z + 2*t.f*x + 2*t.h*z + t.wf*(x-t.f0)*(x-t.f0) + t.wh*(z-t.h0)*(z-t.h0)
	return value, t.na*x*x + t.nb*z*z
}

// trend is the straight line in time through the factors, by row.
func (s *state) trend() []float64 {
	var n, sx, sy, sxx, sxy float64
	for k, m := range s.from {
		if !s.erased[k] {
			x, y := s.Place[m], s.factor[k]
			n, sx, sy, sxx, sxy = n+1, sx+x, sy+y, sxx+x*x, sxy+x*y
		}
	}
	slope := 0.0
	if det := n*sxx - sx*sx; det > 0 {
		slope = (n*sxy - sx*sy) / det
	}
	line := make([]float64, s.v)
	for k, m := range s.from {
		if m != none && n > 0 {
			line[k] = sy/n + slope*(s.Place[m]-sx/n)
		}
	}
	return line
}

// ownScatter is how far the factor of a wrong frame may be from what its wrong
// pairing made of it.
const ownScatter = 0.1

// cheapest is f^2 a - 2 f b + c + (f-1)^2/ownScatter^2 at the f where it is least
// without the noise in a, and how much of that noise is in it.
func cheapest(a, b, c, noise float64) (value, left float64) {
	const weight = 1 / (ownScatter * ownScatter)
	f := 1.0
	if light := a - noise + weight; light > 0 {
		f = max(leastFactor, (b+weight)/light)
	}
	return f*f*a - 2*f*b + c + (f-1)*(f-1)*weight, f * f * noise
}

// apply gives the state after a move, nil if the dark columns cannot spare the row.
func (s *state) apply(m move) *state {
	from, erased := slices.Clone(s.from), slices.Clone(s.erased)
	if m.kind == Exchanged {
		from[m.row], from[m.other] = from[m.other], from[m.row]
	} else {
		erased[m.row] = true
	}
	return s.newState(from, erased)
}

// merit is the excess after a move, the frame's own misfit under its new meaning
// included, so that states before and after have the same number of checks. +Inf if it
// cannot be made.
func (s *state) merit(m move) (*state, float64) {
	after := s.apply(m)
	if after == nil {
		return nil, math.Inf(1)
	}
	switch m.kind {
	case Exchanged:
		return after, after.excess
	case Unknown:
		return after, after.excess
	}
	d, noise := after.misfit(m.row, s.weightsOf(m))
	return after, after.excess + d - noise
}
