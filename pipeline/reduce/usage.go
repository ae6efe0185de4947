package reduce

import (
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// usage tells which voxels the mirrors feed.
type usage struct {
	rows, elements int
	flags          []int16 // [detector row][element]: 0, or NODATA with SENTINEL where that is why
}

// newUsage looks up, for the trace row of every detector row, the mirror row w
// that lies at its middle, w = r_c + (y - y_c)/y_r (section 3 of the design).
// A voxel of a row without mirrors, of a closed row or of a sentinel row is
// NODATA. A row within one FWHM of a sentinel row is NODATA as well: the
// sentinel's light, up to thousands of times that of the field, does not follow
// the code there.
func newUsage(seq *sequence.Sequence) *usage {
	p := seq.Profile
	u := &usage{rows: p.Detector.Rows, elements: seq.N()}
	u.flags = make([]int16, u.rows*u.elements)
	strips := make([]sequence.Element, 0, u.elements)
	for _, col := range seq.ElementColumns() {
		strips = append(strips, seq.Elements[col])
	}
	for y := range u.rows {
		row := u.row(y)
		w := mirrorRow(p, float64(y))
		for j := range row {
			row[j] = rowFlags(seq, p, w, strips[j])
		}
		if nearSentinel(seq, p, y) {
			for j := range row {
				row[j] = product.FlagNoData | product.FlagSentinel
			}
		}
	}
	return u
}

// row gives the flags of a detector row, one an element.
func (u *usage) row(y int) []int16 { return u.flags[y*u.elements : (y+1)*u.elements] }

func mirrorRow(p *instrument.Profile, y float64) int {
	return int(math.Round(p.WCenter() + (y-p.Spectrograph.YCenterPx)/p.Spectrograph.WStepPx))
}

func rowFlags(seq *sequence.Sequence, p *instrument.Profile, w int, strip sequence.Element) int16 {
	if !hasMirror(p, strip, w) {
		return product.FlagNoData
	}
	for _, r := range seq.Rows {
		if w >= r.First && w <= r.Last && r.Use == sequence.UseClosed && (r.Element < 0 || r.Element == strip.Element) {
			return product.FlagNoData
		}
	}
	return 0
}

// hasMirror tells whether a strip has a mirror in row w or, mounted diagonally,
// where each u has mirrors in every second w only, in a neighbouring one.
func hasMirror(p *instrument.Profile, strip sequence.Element, w int) bool {
	first, last := p.WRange()
	if w < first || w > last {
		return false
	}
	if p.DMD.Mounting != instrument.Diagonal {
		return true
	}
	for u := strip.First; u <= strip.Last; u++ {
		for _, near := range []int{w, w - 1, w + 1} {
			if (u+near)%2 != 0 {
				continue
			}
			row, column := (u+near)/2, (u-near)/2
			if row >= 0 && row < p.DMD.Rows && column >= 0 && column < p.DMD.Columns {
				return true
			}
		}
	}
	return false
}

func nearSentinel(seq *sequence.Sequence, p *instrument.Profile, y int) bool {
	reach := 0.5 + p.Spectrograph.LSFFWHMPx
	low, high := mirrorRow(p, float64(y)-reach), mirrorRow(p, float64(y)+reach)
	if low > high { // rows may run downwards
		low, high = high, low
	}
	for _, r := range seq.Rows {
		if r.Use == sequence.UseSentinel && r.First <= high && r.Last >= low {
			return true
		}
	}
	return false
}
