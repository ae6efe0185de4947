package hadamard

import (
	"context"
	"fmt"
	"math/bits"
	"math/rand/v2"
	"slices"
)

// DarkSet is a choice of dark columns.
type DarkSet struct {
	Columns     []int   // sorted
	Correlation float64 // DarkCorrelation of Columns
	Seed        uint64  // that the search was given
}

const (
	// darkTrials sets are drawn: the best of 4096 is within some percent of the
	// best of any number that can be tried.
	darkTrials = 4096
	// minDarkTrials are drawn for large codes without a transform, where a set
	// costs v^2/2 pairs of steps: their correlations come close to the same in
	// every set.
	minDarkTrials = 64
	// darkWork bounds trials times pairs times 64-bit words to about three
	// seconds.
	darkWork = 4_000_000_000
)

// ChooseDark draws some thousand sets of g of the v columns and keeps the one
// whose DarkCorrelation is smallest, the earliest of equals. For 2 <= g <= v-2
// a set is passed over when it is contiguous (one run, cyclically), or nearly
// falls on itself when shifted by one column or mirrored (j to v-1-j): such
// sets do not see an off-by-one or a flip; should all be passed over, as can
// happen in codes of a few columns, the best of them is taken. The result
// depends on the code, g and seed only. Codes without a transform above
// v of about 1000 get fewer draws.
//
// Errors: g outside 0..v-1; g > 0 for a slit scan (ErrNoRedundancy); the
// context's.
func ChooseDark(ctx context.Context, c *Code, g int, seed uint64) (DarkSet, error) {
	switch {
	case g < 0 || g >= c.v:
		return DarkSet{}, fmt.Errorf("%d dark columns of %d: choose 0 to %d, at least one column must be lit", g, c.v, c.v-1)
	case g == 0:
		return DarkSet{Columns: []int{}, Correlation: 1, Seed: seed}, nil
	case c.family == SlitScan:
		return DarkSet{}, fmt.Errorf("%w: ask for 0, not %d", ErrNoRedundancy, g)
	}
	scattered, fallback := best{}, best{}
	s := newScorer(c, g)
	draw := newDrawer(c.v, g)
	for trial := range trialsFor(c, g) {
		if err := ctx.Err(); err != nil {
			return DarkSet{}, fmt.Errorf("the choice of dark columns was stopped: %w", err)
		}
		columns := draw.next(seed, uint64(trial))
		to := &scattered
		if !isScattered(c.v, columns) {
			to = &fallback
		}
		to.offer(s, columns)
	}
	if scattered.columns == nil {
		scattered = fallback
	}
	return DarkSet{Columns: scattered.columns, Correlation: scattered.correlation, Seed: seed}, nil
}

// best is the best set so far.
type best struct {
	columns     []int
	correlation float64
}

func (b *best) offer(s scorer, columns []int) {
	limit := b.correlation
	if b.columns == nil {
		limit = 2 // above any
	}
	if r := correlationBelow(s, columns, limit); r < limit {
		b.columns, b.correlation = append(b.columns[:0], columns...), r
	}
}

func correlationBelow(s scorer, columns []int, limit float64) float64 {
	if len(columns) < 2 {
		return 1
	}
	return s.score(columns, limit)
}

func trialsFor(c *Code, g int) int {
	if c.family == MSequence {
		return darkTrials
	}
	perTrial := c.v * (c.v - 1) / 2 * ((g + 63) / 64)
	return max(minDarkTrials, min(darkTrials, darkWork/perTrial))
}

// drawer draws sets by the first g steps of a Fisher-Yates shuffle. It takes
// the generator's words as they are (PCG, O'Neill 2014), because the standard
// library does not promise that its shuffles stay the same.
type drawer struct {
	all []int
	set []int
}

func newDrawer(v, g int) *drawer { return &drawer{all: make([]int, v), set: make([]int, g)} }

// next is the set of a trial, sorted; the next call overwrites it.
func (d *drawer) next(seed, trial uint64) []int {
	source := rand.NewPCG(seed, trial)
	for j := range d.all {
		d.all[j] = j
	}
	for i := range d.set {
		left := uint64(len(d.all) - i)
		// The high word of the product is uniform to 1 part in 2^52 or better.
		pick, _ := bits.Mul64(source.Uint64(), left)
		j := i + int(pick)
		d.all[i], d.all[j] = d.all[j], d.all[i]
	}
	copy(d.set, d.all)
	slices.Sort(d.set)
	return d.set
}

// isScattered tells whether a sorted set is neither one run nor close to its
// own shift by one or its own mirror image. Close means that more columns fall
// on the set than halfway between what chance gives, g^2/v, and all g.
func isScattered(v int, columns []int) bool {
	g := len(columns)
	if g < 2 || g > v-2 {
		return true // every such set is a run, or all but a run of one
	}
	shifted, mirrored := overlaps(v, columns)
	if shifted >= g-1 { // one run leaves itself by one column only
		return false
	}
	chance := float64(g) * float64(g) / float64(v)
	halfway := (chance + float64(g)) / 2
	return float64(shifted) <= halfway && float64(mirrored) <= halfway
}

// overlaps counts the columns of the set that are in it again when it is
// shifted by one (cyclically), and when it is mirrored.
func overlaps(v int, columns []int) (shifted, mirrored int) {
	dark := make([]bool, v)
	for _, j := range columns {
		dark[j] = true
	}
	for _, j := range columns {
		if dark[(j+1)%v] {
			shifted++
		}
		if dark[v-1-j] {
			mirrored++
		}
	}
	return shifted, mirrored
}
