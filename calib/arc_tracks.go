package calib

import (
	"cmp"
	"math"
	"slices"
)

// track is one line of a frame followed over its blocks of rows: a cosmic ray has no
// track.
type track struct {
	frame, element int
	peaks          []Peak // one a block, by row
	// x is where the line crosses q = 0, once the slant common to all is known.
	x    float64
	flux float64 // median of the blocks'
}

// middleRow of a peak's block.
func (p *Peak) middleRow() float64 { return float64(p.FirstRow+p.LastRow) / 2 }

// linkSlope bounds, in px per row, how far the slit's image may lean against the
// nominal one: 1 degree of tilt (0.0175) and 3 px of smile at the end of a slit of at
// least 90 rows (0.067), and a fifth more.
const linkSlope = 0.1

// linkReach bounds, in px, what a track may leave its own continuation by, however
// many blocks it misses: half of the least distance of two lines.
const linkReach = 1.5

// trackQuorum is the part of its frame's blocks that a track must have: a line that
// is too weak for most of them is not worth its risk.
const trackQuorum = 0.4

// followTracks links the peaks of a frame along the rows, each to the nearest end of
// a track. slant is the nominal slit tilt and smile.
func followTracks(frame int, f *ArcFrame, slant func(y float64) float64) []track {
	peaks := slices.Clone(f.Peaks)
	slices.SortStableFunc(peaks, func(a, b Peak) int {
		return cmp.Or(cmp.Compare(a.FirstRow, b.FirstRow), cmp.Compare(a.X, b.X))
	})
	straight := func(p *Peak) float64 { return p.X - slant(p.middleRow()) }
	var tracks []track
	blocks := 0
	for len(peaks) > 0 {
		n := 1
		for n < len(peaks) && peaks[n].FirstRow == peaks[0].FirstRow {
			n++
		}
		linkBlock(&tracks, frame, f.Element, peaks[:n], straight)
		peaks, blocks = peaks[n:], blocks+1
	}
	least := max(2, int(math.Ceil(trackQuorum*float64(blocks))))
	if blocks == 1 {
		least = 1
	}
	return slices.DeleteFunc(tracks, func(t track) bool { return len(t.peaks) < least })
}

// linkBlock appends a block's peaks to the tracks that end nearest, the closest pairs
// first, but those of single peaks last: they may be cosmic rays. Peaks without a track
// begin one.
func linkBlock(tracks *[]track, frame, element int, block []Peak, straight func(*Peak) float64) {
	type pair struct {
		track, peak int
		single      int // 1 for a track of one peak
		distance    float64
	}
	var pairs []pair
	for i := range *tracks {
		t := &(*tracks)[i]
		end := &t.peaks[len(t.peaks)-1]
		for k := range block {
			rows := block[k].middleRow() - end.middleRow()
			d := math.Abs(straight(&block[k]) - straight(end) - t.lean(straight)*rows)
			if d <= min(linkSlope*rows+0.3, linkReach) {
				pairs = append(pairs, pair{i, k, 1 / len(t.peaks), d})
			}
		}
	}
	slices.SortStableFunc(pairs, func(a, b pair) int {
		return cmp.Or(cmp.Compare(a.single, b.single), cmp.Compare(a.distance, b.distance))
	})
	used := make([]bool, len(block))
	grown := make([]bool, len(*tracks))
	for _, p := range pairs {
		if !used[p.peak] && !grown[p.track] {
			used[p.peak], grown[p.track] = true, true
			(*tracks)[p.track].peaks = append((*tracks)[p.track].peaks, block[p.peak])
		}
	}
	for k, p := range block {
		if !used[k] {
			*tracks = append(*tracks, track{frame: frame, element: element, peaks: []Peak{p}})
		}
	}
}

// lean is the slope of a track's last two peaks, px per row, within linkSlope.
func (t *track) lean(straight func(*Peak) float64) float64 {
	n := len(t.peaks)
	if n < 2 {
		return 0
	}
	a, b := &t.peaks[n-2], &t.peaks[n-1]
	slope := (straight(b) - straight(a)) / (b.middleRow() - a.middleRow())
	return min(max(slope, -linkSlope), linkSlope)
}

// straighten finds the slant common to all tracks, tilt q + smile q^2 with q from
// Y_c, and sets each track's x. It is linear least squares with a constant for each
// track, repeated with the biweight of Beaton and Tukey (1974, Technometrics 16,
// 147). ok is false where the tracks do not fix it; x is then nominal.
func straighten(tracks []track, nominal *Geometry) (tilt, smile float64, ok bool) {
	var f slantFit
	tilt, smile = nominal.SlitTilt, nominal.Smile
	scale := math.Inf(1)
	for range 6 {
		f = slantFit{}
		for i := range tracks {
			f.add(&tracks[i], nominal.Y_c, tilt, smile, scale)
		}
		var next [2]float64
		if next, ok = f.solve(); !ok {
			tilt, smile = nominal.SlitTilt, nominal.Smile
			break
		}
		tilt, smile = next[0], next[1]
		scale = slantScatter(tracks, nominal.Y_c, tilt, smile)
	}
	for i := range tracks {
		t := &tracks[i]
		t.x = t.crossing(nominal.Y_c, tilt, smile)
		flux := make([]float32, len(t.peaks))
		for k := range t.peaks {
			flux[k] = float32(t.peaks[k].Flux)
		}
		t.flux = median(flux)
	}
	return tilt, smile, ok
}

// crossing is the median over blocks of x - slant.
func (t *track) crossing(y_c, tilt, smile float64) float64 {
	at := make([]float64, len(t.peaks))
	for i := range t.peaks {
		at[i] = t.peaks[i].straight(y_c, tilt, smile)
	}
	slices.Sort(at)
	return (at[(len(at)-1)/2] + at[len(at)/2]) / 2
}

// straight is x without slant.
func (p *Peak) straight(y_c, tilt, smile float64) float64 {
	q := p.middleRow() - y_c
	return p.X - q*(tilt+smile*q)
}

// slantFit are the normal equations of tilt and smile with the tracks' constants
// eliminated.
type slantFit struct{ a11, a12, a22, b1, b2 float64 }

func (f *slantFit) add(t *track, y_c, tilt, smile, scale float64) {
	at := t.crossing(y_c, tilt, smile)
	var n, sq, sqq, sx float64
	weights := make([]float64, len(t.peaks))
	for i := range t.peaks {
		p := &t.peaks[i]
		q := p.middleRow() - y_c
		// The floor keeps one bright line from deciding alone.
		weights[i] = biweight(p.straight(y_c, tilt, smile)-at, scale) / (p.XErr*p.XErr + 1e-4)
		n, sq, sqq, sx = n+weights[i], sq+weights[i]*q, sqq+weights[i]*q*q, sx+weights[i]*p.X
	}
	if n == 0 {
		return
	}
	for i := range t.peaks {
		p := &t.peaks[i]
		q := p.middleRow() - y_c
		d1, d2, x := q-sq/n, q*q-sqq/n, p.X-sx/n
		f.a11 += weights[i] * d1 * d1
		f.a12 += weights[i] * d1 * d2
		f.a22 += weights[i] * d2 * d2
		f.b1 += weights[i] * d1 * x
		f.b2 += weights[i] * d2 * x
	}
}

func (f *slantFit) solve() ([2]float64, bool) {
	det := f.a11*f.a22 - f.a12*f.a12
	if !(det > 1e-9*f.a11*f.a22) {
		return [2]float64{}, false
	}
	return [2]float64{(f.b1*f.a22 - f.b2*f.a12) / det, (f.b2*f.a11 - f.b1*f.a12) / det}, true
}

// slantScatter is the robust scatter of peaks around their tracks, at least 0.01 px.
func slantScatter(tracks []track, y_c, tilt, smile float64) float64 {
	var d []float32
	for i := range tracks {
		t := &tracks[i]
		at := t.crossing(y_c, tilt, smile)
		for k := range t.peaks {
			d = append(d, float32(math.Abs(t.peaks[k].straight(y_c, tilt, smile)-at)))
		}
	}
	if len(d) == 0 {
		return math.Inf(1)
	}
	return max(0.01, madPerSigma*median(d))
}

// biweight is Tukey's weight of a residual r with scatter s, cut at 6 s.
func biweight(r, s float64) float64 {
	u := r / (6 * s)
	if math.Abs(u) >= 1 {
		return 0
	}
	u = 1 - u*u
	return u * u
}
