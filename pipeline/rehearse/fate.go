package rehearse

import (
	"math"
	"math/rand/v2"

	"mirrorloom/pipeline/sequence"
)

// fate is what the faults do to one step.
type fate struct {
	// throughput is c, colour the slope of c over the grid, skyLines the factor
	// of the sky's lines.
	throughput, colour, skyLines float64
	offsetE                      float64
	// seeing is the factor of the seeing's width; guideU and guideW are in
	// elements, shiftX and shiftY in pixels.
	seeing, guideU, guideW, shiftX, shiftY float64
	shown                                  shown
	lost                                   bool
	// labels is the index of the step whose STEP and MASKID the frame bears.
	labels int
	hits   []hit
}

// newFates draws the faults of all steps. Each fault has random numbers of its
// own, so that one more does not change the others.
func newFates(seq *sequence.Sequence, seed uint64, faults []Fault) []fate {
	list := make([]fate, len(seq.Steps))
	for i := range list {
		list[i] = fate{throughput: 1, skyLines: 1, seeing: 1, labels: i, shown: shown{step: i}}
	}
	n := &night{seq: seq, seed: seed, faults: faults, fates: list, science: seq.StepsOf(sequence.Science)}
	n.throughputs()
	n.slopes()
	n.offsets()
	n.wander()
	n.masks()
	n.labels()
	n.cosmics()
	return list
}

// night draws the fates of a sequence.
type night struct {
	seq     *sequence.Sequence
	seed    uint64
	faults  []Fault
	fates   []fate
	science []int
}

// gauss is a unit normal number of a fault in a step.
func (n *night) gauss(name string, step, which int) float64 {
	return rand.New(newStream(n.seed, "fault "+name, step, which)).NormFloat64()
}

// seesSky reports whether a step is one of those whose throughput faults change.
func seesSky(k sequence.Kind) bool {
	return k == sequence.Science || k == sequence.AllOn || k == sequence.AllOff
}

// mean averages a value over the science steps; 0 without any.
func (n *night) mean(value func(f *fate) float64) float64 {
	sum := 0.0
	for _, i := range n.science {
		sum += value(&n.fates[i])
	}
	if len(n.science) == 0 {
		return 0
	}
	return sum / float64(len(n.science))
}

// leastThroughput keeps a drawn throughput or width above nothing.
const leastThroughput = 0.05

func (n *night) throughputs() {
	drift, _ := sizeOf(n.faults, Drift)
	trend, _ := sizeOf(n.faults, Trend)
	place := n.places()
	for i, st := range n.seq.Steps {
		if !seesSky(st.Kind) {
			continue
		}
		c := (1 + drift*n.gauss(Drift, i, 0)) * (1 + trend*place[i])
		n.fates[i].throughput = math.Max(c, leastThroughput)
	}
	mean := n.mean(func(f *fate) float64 { return f.throughput })
	if mean <= 0 {
		return
	}
	for i, st := range n.seq.Steps {
		if seesSky(st.Kind) {
			n.fates[i].throughput /= mean
		}
	}
}

// places gives the middle of each step in time, -1/2 in the first of the sky's
// frames and 1/2 in the last.
func (n *night) places() []float64 {
	place := make([]float64, len(n.seq.Steps))
	at, first, last := 0.0, math.Inf(1), math.Inf(-1)
	for i, st := range n.seq.Steps {
		place[i] = at + st.ExptimeSeconds/2
		at += st.ExptimeSeconds + n.seq.Profile.OverheadS()
		if seesSky(st.Kind) {
			first, last = math.Min(first, place[i]), math.Max(last, place[i])
		}
	}
	for i := range place {
		if last > first {
			place[i] = (place[i]-first)/(last-first) - 0.5
		} else {
			place[i] = 0
		}
	}
	return place
}

func (n *night) slopes() {
	colour, _ := sizeOf(n.faults, Colour)
	lines, _ := sizeOf(n.faults, SkyLines)
	for i, st := range n.seq.Steps {
		if seesSky(st.Kind) {
			n.fates[i].colour = colour * n.gauss(Colour, i, 0)
			n.fates[i].skyLines = math.Max(1+lines*n.gauss(SkyLines, i, 0), 0)
		}
	}
	slope := n.mean(func(f *fate) float64 { return f.colour })
	level := n.mean(func(f *fate) float64 { return f.skyLines })
	for i, st := range n.seq.Steps {
		if seesSky(st.Kind) && len(n.science) > 0 {
			n.fates[i].colour -= slope
			n.fates[i].skyLines /= math.Max(level, leastThroughput)
		}
	}
}

func (n *night) offsets() {
	size, _ := sizeOf(n.faults, Offset)
	for i := range n.fates {
		n.fates[i].offsetE = size * n.gauss(Offset, i, 0)
	}
}

// wander moves seeing, field and image.
func (n *night) wander() {
	seeing, _ := sizeOf(n.faults, Seeing)
	guide, _ := sizeOf(n.faults, Guide)
	shift, _ := sizeOf(n.faults, Shift)
	for i, st := range n.seq.Steps {
		f := &n.fates[i]
		if seesSky(st.Kind) {
			f.seeing = math.Max(1+seeing*n.gauss(Seeing, i, 0), leastThroughput)
			f.guideU, f.guideW = guide*n.gauss(Guide, i, 0), guide*n.gauss(Guide, i, 1)
		}
		if st.Kind != sequence.Bias && st.Kind != sequence.Dark {
			f.shiftX, f.shiftY = shift*n.gauss(Shift, i, 0), shift*n.gauss(Shift, i, 1)
		}
	}
	x := n.mean(func(f *fate) float64 { return f.shiftX })
	y := n.mean(func(f *fate) float64 { return f.shiftY })
	for i, st := range n.seq.Steps {
		if st.Kind != sequence.Bias && st.Kind != sequence.Dark {
			n.fates[i].shiftX -= x
			n.fates[i].shiftY -= y
		}
	}
}

// chosen draws count of a list of steps without order.
func (n *night) chosen(name string, from []int, count int) []int {
	list := append([]int(nil), from...)
	r := rand.New(newStream(n.seed, "fault "+name, 0, 0))
	r.Shuffle(len(list), func(i, k int) { list[i], list[k] = list[k], list[i] })
	return list[:min(count, len(list))]
}

func (n *night) masks() {
	if stale, on := sizeOf(n.faults, Stale); on && len(n.science) > 1 {
		before := map[int]int{}
		for k, step := range n.science[1:] {
			before[step] = n.science[k]
		}
		for _, i := range n.chosen(Stale, n.science[1:], int(stale)) {
			n.fates[i].shown.step = before[i]
		}
	}
	each := func(name string, set func(s *shown)) {
		size, on := sizeOf(n.faults, name)
		if !on {
			return
		}
		steps := n.chosen(name, n.science, int(size))
		if size == 0 {
			steps = steps[:0]
			for i := range n.fates {
				steps = append(steps, i)
			}
		}
		for _, i := range steps {
			set(&n.fates[i].shown)
		}
	}
	each(Flip, func(s *shown) { s.flipped = true })
	each(Invert, func(s *shown) { s.inverted = true })
}

func (n *night) labels() {
	lost, _ := sizeOf(n.faults, Lost)
	for _, i := range n.chosen(Lost, n.science, int(lost)) {
		n.fates[i].lost = true
	}
	var there []int
	for _, i := range n.science {
		if !n.fates[i].lost {
			there = append(there, i)
		}
	}
	exchanged, _ := sizeOf(n.faults, Mislabel)
	pairs := n.chosen(Mislabel, there, int(exchanged))
	for k := 0; k+1 < len(pairs); k += 2 {
		a, b := pairs[k], pairs[k+1]
		n.fates[a].labels, n.fates[b].labels = b, a
	}
}
