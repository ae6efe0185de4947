package reduce

import (
	"math"
	"math/bits"

	"mirrorloom/pipeline/product"
)

// flagBits are those of FLAGS.
const flagBits = 16

// rowQuality is what a detector row adds to the figures of run.json. Rows are
// kept apart and added in order, so that the figures do not depend on how rows
// were grouped.
type rowQuality struct {
	dark                  darkChi2
	good, covered, wanted int // voxels: good; good and wanted; in coded rows and on the detector
	flags                 int16
	flagged               [flagBits]int // wanted voxels by the bits of their flags
	pulls                 darkPulls
	saturated             int // pixels
	restored              int // samples
	hits, doubtful        int // samples that cosmic rays struck; pixels where they cannot be told
	scale                 rowScale
}

// count looks at a row of a strip of the cube.
func (q *rowQuality) count(out *outStrip, row, elements, voxels int, use []int16) {
	for l := range voxels {
		at := (l*out.h + row) * elements
		for j, f := range out.flags[at : at+elements] {
			good := f&product.FlagBad == 0
			if good {
				q.good++
			}
			// Coverage alone says whether the wavelength falls on the detector:
			// a voxel half of which does not is NODATA or PARTIAL.
			if use[j] == 0 && f&(product.FlagNoData|product.FlagPartial) == 0 {
				q.wanted++
				if good {
					q.covered++
				}
				for b := uint16(f); b != 0; b &= b - 1 {
					q.flagged[bits.TrailingZeros16(b)]++
				}
			}
			if use[j] == 0 {
				q.flags |= f
			}
		}
	}
}

// sum adds the rows in order; searched: cosmic rays were looked for.
func sum(rows []rowQuality, total int, searched bool) (product.Quality, int16) {
	var all rowQuality
	var chi2 float64 // of each row, as often as it has terms
	for _, r := range rows {
		if r.dark.variance > 0 {
			chi2 += float64(r.dark.terms) * r.dark.square / r.dark.variance
			all.dark.terms += r.dark.terms
		}
		all.good += r.good
		all.covered += r.covered
		all.wanted += r.wanted
		all.flags |= r.flags
		for i, n := range r.flagged {
			all.flagged[i] += n
		}
		all.pulls.add(r.pulls)
		all.saturated += r.saturated
		all.restored += r.restored
		all.hits += r.hits
		all.doubtful += r.doubtful
	}
	q := product.Quality{Saturated: all.saturated, Restored: all.restored, DoubtfulPixels: all.doubtful}
	if searched {
		q.Hits = &all.hits
	}
	if total > 0 {
		q.GoodFraction = float64(all.good) / float64(total)
	}
	q.DarkPulls = all.pulls.summary()
	if all.wanted > 0 {
		for _, f := range product.Flags() {
			n := all.flagged[bits.TrailingZeros16(uint16(f.Bit))]
			q.Flags = append(q.Flags, product.FlagCount{Name: f.Name, Bit: f.Bit, Voxels: n, Share: float64(n) / float64(all.wanted)})
		}
		q.CoveredGoodFraction = float64(all.covered) / float64(all.wanted)
	}
	if all.dark.terms > 0 {
		chi2 /= float64(all.dark.terms)
		if !math.IsNaN(chi2) && !math.IsInf(chi2, 0) {
			q.DarkChi2Heldout = &chi2
		}
	}
	return q, all.flags
}

var nan32 = float32(math.NaN())
