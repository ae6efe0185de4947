package reduce

import (
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/hadamard"
)

// A cosmic ray strikes single samples, which nothing marks but the dark columns: see
// hadamard.Pursuit. Pixels whose dark decodes are louder than noise are searched, and
// what is found is restored as if it were saturated.

const (
	// unexplainedSigmas: a pixel of whose checks more is left than noise explains, in
	// standard errors of the noise's square, is not to be trusted.
	unexplainedSigmas = 5
	// quietWidth columns tell how much noise there is beyond the model's, as in a bright
	// star's rows: by the quietRank-th lowest loudness among them, since at many hits a
	// frame most pixels of a long code are struck.
	quietWidth = 31
	quietRank  = 4
	// quietNormal is the normal deviate of that rank, (4-0.5)/31.
	quietNormal = -1.211
)

// pursuit is what the search for cosmic rays needs; nil where it is not made.
type pursuit struct {
	checks *hadamard.Checks
	search *hadamard.Pursuit
	// loud and hinted are the squares of the checks, in the variance of a sample, from
	// which a pixel is searched without and with a hint: a sample that stands out by so
	// many standard errors of its charge makes the checks at least as loud. Where noise
	// alone is louder in the mean, half of the pixels are searched, and a sample of 8
	// standard errors is passed over in less than 1 % of cases.
	loud, hinted float64
	// quiet is what noise alone gives at quietRank, tolerable what hits may leave of the
	// checks in the mean.
	quiet, tolerable float64
}

// newPursuit prepares the search on the checks that are left of lost rows and pedestal;
// nil where there are too few.
func newPursuit(checks *hadamard.Checks) *pursuit {
	g := float64(checks.G())
	rule := hadamard.DefaultPursuitRule(checks.G())
	if rule.MostHits < 1 {
		return nil
	}
	root := 1 - 2/(9*g) + quietNormal*math.Sqrt(2/(9*g)) // Wilson and Hilferty 1931, PNAS 17, 684
	return &pursuit{
		checks: checks, search: hadamard.NewPursuit(checks, rule),
		loud: max(rule.Sigmas*rule.Sigmas, g), hinted: max(rule.HintSigmas*rule.HintSigmas, g),
		quiet: g * root * root * root, tolerable: 1 + unexplainedSigmas*math.Sqrt(2/g),
	}
}

// struckRow is a sample of a block that was found to be struck.
type struckRow struct {
	pixel int
	hit   hadamard.Hit
}

// pursuitWork is one worker's memory of the search.
type pursuitWork struct {
	search           *hadamard.PursuitWork
	residual, checks []float64
	order            []float64
	// loudness is the square of each pixel's checks over noise, the variance of a sample;
	// excess is by how much the noise is beyond the model's, at least 1.
	loudness, noise, excess []float64
	// doubtful pixels have hits that cannot be told.
	doubtful []bool
	// first is what was found without hints, found all, both by pixel.
	first, found []struckRow
	near         []int // rows in which neighbours were struck
	hinted       func(row int) bool
}

func (p *pursuit) newWork(pixels int) *pursuitWork {
	if p == nil {
		return nil
	}
	k := &pursuitWork{
		search: p.search.NewWork(), residual: make([]float64, len(p.checks.Columns())), checks: make([]float64, p.checks.G()),
		loudness: make([]float64, pixels), noise: make([]float64, pixels), excess: make([]float64, pixels),
		order: make([]float64, 0, quietWidth), doubtful: make([]bool, pixels),
	}
	k.hinted = func(row int) bool { return slices.Contains(k.near, row) }
	return k
}

// pursue searches a block of n pixels, decoded and freed of the neighbour term, for
// struck samples. Those that can be told are in found afterwards; pixels with others are
// flagged, and their number is given.
func (d *decoder) pursue(w *decodeWorker, s *strip, at, n int, quiet []float64) (doubtful int) {
	p, k := d.repair.pursuit, w.pursuit
	flags := s.flags[at : at+n]
	d.listen(w, s, at, n, quiet)
	k.first, k.found = k.first[:0], k.found[:0]
	for x := range n {
		k.doubtful[x] = false
		if flags[x] == 0 && s.struck[at+x] == 0 && k.loudness[x] >= p.loud*k.excess[x] {
			k.first = d.searchPixel(w, x, n, nil, k.first)
		}
	}
	// Once more where a neighbour was struck: a track strikes both in the same frame.
	one := 0
	for x := range n {
		from := one
		for one < len(k.first) && k.first[one].pixel == x {
			one++
		}
		if flags[x] == 0 && s.struck[at+x] == 0 && k.loudness[x] >= p.hinted*k.excess[x] && k.look(x, from, one) {
			k.doubtful[x] = false
			k.found = d.searchPixel(w, x, n, k.hinted, k.found)
		} else {
			k.found = append(k.found, k.first[from:one]...)
		}
		if k.doubtful[x] {
			flags[x] |= calib.BadPixel
			doubtful++
		}
	}
	return doubtful
}

// look gathers in near the rows in which the neighbours of pixel x were struck, whose own
// hits are first[from:to]; false for none.
func (k *pursuitWork) look(x, from, to int) bool {
	k.near = k.near[:0]
	for i := from - 1; i >= 0 && k.first[i].pixel == x-1; i-- {
		k.near = append(k.near, k.first[i].hit.Row)
	}
	for i := to; i < len(k.first) && k.first[i].pixel == x+1; i++ {
		k.near = append(k.near, k.first[i].hit.Row)
	}
	return len(k.near) > 0
}

// listen fills in the loudness and noise of a block.
func (d *decoder) listen(w *decodeWorker, s *strip, at, n int, quiet []float64) {
	p, k := d.repair.pursuit, w.pursuit
	there := float64(d.slots - len(d.scale.lost))
	for x := range n {
		light := (1 + d.photonExcess) * (w.sum[x] + d.scale.lightSum*float64(s.level[at+x]))
		dark := d.scale.quietSum * quiet[x]
		k.noise[x] = (max(dark+light, dark*varianceFloor) + w.drift[x]) / there
		for i, column := range p.checks.Columns() {
			k.residual[i] = float64(w.decoded[column*n+x])
		}
		k.loudness[x] = p.checks.Square(k.residual) / k.noise[x]
	}
	const reach = quietWidth / 2
	for x := range n {
		k.order = k.order[:0]
		for near := max(0, x-reach); near <= min(n-1, x+reach); near++ {
			if s.flags[at+near] == 0 && s.struck[at+near] == 0 {
				k.order = append(k.order, k.loudness[near])
			}
		}
		k.excess[x] = 1
		if len(k.order) >= quietWidth/2 {
			slices.Sort(k.order)
			rank := (quietRank*len(k.order) + quietWidth/2) / quietWidth
			k.excess[x] = max(1, k.order[max(0, rank-1)]/p.quiet)
		}
	}
}

// searchPixel adds what is found in pixel x to found; nothing in one that is doubtful.
func (d *decoder) searchPixel(w *decodeWorker, x, n int, hinted func(int) bool, found []struckRow) []struckRow {
	p, k := d.repair.pursuit, w.pursuit
	for i, column := range p.checks.Columns() {
		k.residual[i] = float64(w.decoded[column*n+x])
	}
	p.checks.Whiten(k.checks, k.residual)
	there := float64(d.slots - len(d.scale.lost))
	p.search.Find(k.search, k.checks, k.noise[x]*k.excess[x], (1+d.photonExcess)*d.scale.lightSum/(there*there), hinted)
	before := len(found)
	for _, h := range k.search.Hits {
		if d.outstanding(w, x, n, h) {
			found = append(found, struckRow{x, h})
		}
	}
	if len(found) > before && (k.search.Ambiguous || k.search.Left > p.tolerable) {
		k.doubtful[x] = true
		found = found[:before]
	}
	return found
}

// outstanding tells whether a hit that the search found in pixel x stands out of its own
// sample's noise as well. The search takes all samples of a pixel for equally noisy. Those of
// an S-matrix are, but for a factor of 2; those of a sparse code that show a bright star may
// be far noisier than the rest, and many of them would be called struck. The charge of a
// sample whose part in the checks is P_kk has the variance s_k^2 + (1/P_kk - 1) s^2.
func (d *decoder) outstanding(w *decodeWorker, x, n int, h hadamard.Hit) bool {
	if !d.repair.additive {
		return true
	}
	k, rule := w.pursuit, hadamard.DefaultPursuitRule(d.repair.left.G())
	mean := k.noise[x] * k.excess[x]
	light := d.scale.light[h.Row] * (float64(w.samples[h.Row*n+x]) - h.Charge)
	usual := w.sum[x] / float64(d.slots-len(d.scale.lost))
	own := max(mean+(1+d.photonExcess)*(light-usual), mean/2)
	limit := rule.Sigmas
	if h.Hinted {
		limit = rule.HintSigmas
	}
	return h.Charge > limit*math.Sqrt(own+mean*(1/d.repair.share[h.Row]-1))
}
