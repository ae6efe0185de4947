package reduce

import (
	"math"
	"slices"

	"mirrorloom/calib"
)

// lineTally tells which arc lines speak for an element and row: those of the
// nearest element that was exposed, in the block of rows around it.
type lineTally struct {
	elements []int // exposed, ascending
	blocks   map[tallyKey]tallySum
	rows     map[int][][2]int // blocks of an element, ascending
}

type tallyKey struct{ element, first int }

type tallySum struct {
	lines  int
	square float64
}

func newLineTally(arcs *calib.ArcSolution) *lineTally {
	t := &lineTally{blocks: map[tallyKey]tallySum{}, rows: map[int][][2]int{}}
	if arcs == nil {
		return t
	}
	for _, r := range arcs.Residuals {
		block := [2]int{r.FirstRow, r.LastRow}
		if !slices.Contains(t.rows[r.Element], block) {
			t.rows[r.Element] = append(t.rows[r.Element], block)
		}
		if r.Kept {
			k := tallyKey{r.Element, r.FirstRow}
			s := t.blocks[k]
			s.lines++
			s.square += r.ResidualPx * r.ResidualPx
			t.blocks[k] = s
		}
	}
	for element, blocks := range t.rows {
		t.elements = append(t.elements, element)
		slices.SortFunc(blocks, func(a, b [2]int) int { return a[0] - b[0] })
	}
	slices.Sort(t.elements)
	return t
}

// at gives the number of lines and their rms around the solution, px; 0 and not a
// number without any.
func (t *lineTally) at(element, row int) (lines int, rmsPx float64) {
	nearest, away := -1, math.MaxInt
	for _, e := range t.elements {
		if d := max(e-element, element-e); d < away {
			nearest, away = e, d
		}
	}
	block, away := [2]int{}, math.MaxInt
	for _, b := range t.rows[nearest] {
		if d := max(b[0]-row, row-b[1], 0); d < away {
			block, away = b, d
		}
	}
	s := t.blocks[tallyKey{nearest, block[0]}]
	if s.lines == 0 {
		return 0, math.NaN()
	}
	return s.lines, math.Sqrt(s.square / float64(s.lines))
}
