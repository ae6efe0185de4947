package audit

import (
	"fmt"
	"math"
	"slices"
)

// whole is a way in which all frames may be paired with other rows.
type whole struct {
	what string
	// family is alike for pairings that differ by a step or a place.
	family int
	from   []int
	rough  float64 // excess with the trend of brightness taken off, no factors fitted
}

// wholes lists the pairings of the frames as a whole: in the order of the labels, and
// of time where it differs.
func (e *engine) wholes() []whole {
	labelled := make([]int, len(e.Order))
	for t, row := range e.Order {
		labelled[t] = e.Pairing[row]
	}
	labelled = append(labelled, e.Spare...)
	list := e.arranged(labelled, "")
	if len(e.Time) > 0 && !slices.Equal(e.Time, labelled) {
		list = append(list, whole{what: "in the order of time", family: -1, from: e.dealt(e.Time, func(t int) int { return t })})
		list = append(list, e.arranged(e.Time, "in the order of time, ")...)
	}
	return list
}

// dealt gives frame t of a list to the row of step to(t); none where that is outside.
func (e *engine) dealt(frames []int, to func(t int) int) []int {
	from := make([]int, e.v)
	for k := range from {
		from[k] = none
	}
	for t, m := range frames {
		if at := to(t); m != none && at >= 0 && at < len(e.Order) {
			from[e.Order[at]] = m
		}
	}
	return from
}

// arranged lists the arrangements of frames in an order.
func (e *engine) arranged(frames []int, prefix string) []whole {
	n := len(e.Order)
	var list []whole
	family := 10 * len(prefix)
	add := func(what string, to func(t int) int) {
		list = append(list, whole{what: prefix + what, family: family, from: e.dealt(frames, to)})
	}
	for s := 1; s < n; s++ {
		add(rotation(s, n), func(t int) int { return (t + s) % n })
	}
	family++
	for s := range n {
		what := "reversed"
		if s > 0 {
			what += ", and " + rotation(s, n)
		}
		add(what, func(t int) int { return (n - 1 - t + s) % n })
	}
	family++
	half := (n + 1) / 2
	riffle := func(t int) int {
		if t < half {
			return 2 * t
		}
		return 2*(t-half) + 1
	}
	back := func(t int) int { return t/2 + half*(t%2) }
	other := n / 2
	add("interleaved: the first half shows every second mask, the second half the others", riffle)
	add("interleaved: every second frame shows the first half's masks", back)
	add("interleaved: the first half shows every second mask from the second on", func(t int) int {
		if t < other {
			return 2*t + 1
		}
		return 2 * (t - other)
	})
	add("interleaved: every second frame from the second on shows the first half's masks", func(t int) int { return t/2 + other*(1-t%2) })
	family++
	for i := 0; i < n-1; i++ {
		add(fmt.Sprintf("one step on from frame %d of %d, as if a mask had been passed over", i+1, n), func(t int) int {
			if t < i {
				return t
			}
			return t + 1
		})
	}
	family++
	for i := 1; i < len(frames); i++ {
		add(fmt.Sprintf("one step back from frame %d of %d, as if a mask had been shown twice", i+1, n), func(t int) int {
			switch {
			case t < i:
				return t
			case t == i:
				return none
			}
			return t - 1
		})
	}
	return list
}

// rotation names a shift by s of n steps.
func rotation(s, n int) string {
	way := "later"
	if s > n/2 {
		s, way = n-s, "earlier"
	}
	steps := "1 step"
	if s > 1 {
		steps = fmt.Sprintf("%d steps", s)
	}
	return fmt.Sprintf("off by %d: each shows the mask of %s %s", s, steps, way)
}

// level gives every frame the factor that takes the trend of their brightness in time
// off: codes are balanced, so that the trend is the throughput's whatever the pairing.
func (e *engine) level() []float64 {
	var sw, sx, sy, sxx, sxy float64
	bright := make([]float64, e.frames)
	for m := range bright {
		bright[m] = math.Sqrt(max(0, e.sum.At(m, m)-e.noise[m]))
		x := e.Place[m]
		sw, sx, sy, sxx, sxy = sw+1, sx+x, sy+bright[m], sxx+x*x, sxy+x*bright[m]
	}
	factor := make([]float64, e.frames)
	det := sw*sxx - sx*sx
	for m := range factor {
		factor[m] = 1
		if mean := sy / sw; det > 0 && mean > 0 {
			slope := (sw*sxy - sx*sy) / det / mean
			if line := 1 + slope*(e.Place[m]-sx/sw); line > 0.5 && line < 2 {
				factor[m] = 1 / line
			}
		}
	}
	return factor
}

// wholeShortlist is how many pairings of a family get throughputs of their own.
const wholeShortlist = 3

// searchWhole finds the best pairing of the frames as a whole other than the labels',
// and the number that were tried; nil without one.
func (e *engine) searchWhole() (name string, s *state, tried int) {
	list := e.wholes()
	r := e.newRougher()
	for i := range list {
		list[i].rough = r.excess(list[i].from)
	}
	tried = len(list)
	slices.SortStableFunc(list, func(a, b whole) int { return compare(a.rough, b.rough) })
	looked := map[int]int{}
	for _, w := range list {
		if looked[w.family]++; looked[w.family] > wholeShortlist || math.IsInf(w.rough, 1) {
			continue
		}
		if got := e.newState(w.from, nil); got != nil && (s == nil || got.handicapped() < s.handicapped()) {
			name, s = w.what, got
		}
	}
	return name, s, tried
}

// handicapped is the excess with what leaving out frames may gain by chance: four
// standard deviations of the noise in a check each.
func (s *state) handicapped() float64 {
	out := 0.0
	for _, off := range s.erased {
		if off {
			out++
		}
	}
	return s.excess + 4*out*math.Sqrt(2*float64(s.pixels))
}
