package rehearse

import (
	"math"
	"math/rand/v2"
	"slices"

	"mirrorloom/pipeline/sequence"
)

// hit is a struck sample: an active pixel and the charge that it got.
type hit struct {
	x, y   int
	charge float64 // electrons
}

// A cosmic ray strikes 1 to cosmicLongest pixels in a row; each draws its own
// charge from a log-normal distribution.
const (
	cosmicLongest = 10
	cosmicMedianE = 1500
	cosmicSigma   = 0.8
)

// cosmics draws the tracks of every exposed frame. Tracks start uniformly over
// the detector and a margin as wide as the longest track, so that edges are
// struck as often as the middle.
func (n *night) cosmics() {
	perThousand, on := sizeOf(n.faults, Cosmic)
	if !on {
		return
	}
	d := n.seq.Profile.Detector
	area := float64(d.Columns+2*cosmicLongest) * float64(d.Rows+2*cosmicLongest)
	const meanLength = (1 + cosmicLongest) / 2.0
	for i, st := range n.seq.Steps {
		if st.Kind == sequence.Bias {
			continue
		}
		pcg := newStream(n.seed, "fault cosmic", i, 0)
		r := rand.New(pcg)
		struck := map[[2]int]float64{}
		for range int(poisson(pcg, area*perThousand/1000/meanLength)) {
			strike(r, d.Columns, d.Rows, struck)
		}
		n.fates[i].hits = sortedHits(struck)
	}
}

// strike adds a track to the struck pixels.
func strike(r *rand.Rand, columns, rows int, struck map[[2]int]float64) {
	x := r.Float64()*float64(columns+2*cosmicLongest) - cosmicLongest
	y := r.Float64()*float64(rows+2*cosmicLongest) - cosmicLongest
	sin, cos := math.Sincos(2 * math.Pi * r.Float64())
	// Steps of 1 along the longer component: no pixel twice.
	scale := 1 / math.Max(math.Abs(sin), math.Abs(cos))
	for k := range 1 + r.IntN(cosmicLongest) {
		charge := cosmicMedianE * math.Exp(cosmicSigma*r.NormFloat64())
		at := [2]int{int(math.Floor(x + float64(k)*cos*scale)), int(math.Floor(y + float64(k)*sin*scale))}
		if at[0] >= 0 && at[0] < columns && at[1] >= 0 && at[1] < rows {
			struck[at] += charge
		}
	}
}

// sortedHits lists struck pixels by row, then column.
func sortedHits(struck map[[2]int]float64) []hit {
	hits := make([]hit, 0, len(struck))
	for at, charge := range struck {
		hits = append(hits, hit{at[0], at[1], charge})
	}
	slices.SortFunc(hits, func(a, b hit) int {
		if a.y != b.y {
			return a.y - b.y
		}
		return a.x - b.x
	})
	return hits
}

// hitsOn is the part of sorted hits that lies on row y.
func hitsOn(hits []hit, y int) []hit {
	first, _ := slices.BinarySearchFunc(hits, y, func(h hit, y int) int { return h.y - y })
	last, _ := slices.BinarySearchFunc(hits, y+1, func(h hit, y int) int { return h.y - y })
	return hits[first:last]
}
