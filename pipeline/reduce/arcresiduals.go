package reduce

import (
	"cmp"
	"maps"
	"math"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// The residuals of the arcs in run.json are summed up in so many elements and stretches of
// rows at most.
const (
	arcPlaceElements = 32
	arcPlaceRows     = 16
)

// residualSum adds up residuals, in pixels.
type residualSum struct {
	sum, square float64
	n           int
}

func (s *residualSum) add(px float64) {
	s.sum += px
	s.square += px * px
	s.n++
}

func (s *residualSum) residual() product.Residual {
	n := float64(s.n)
	return product.Residual{MeanPx: s.sum / n, RMSPx: math.Sqrt(s.square / n), Number: s.n}
}

// arcPlaces sums up the residuals of the centroids kept by element and row, neighbouring
// ones together where there are many.
func arcPlaces(all []calib.ArcResidual) []product.ArcPlace {
	blocks := map[[2]int]bool{}
	var elements, rows []int
	for _, d := range all {
		if d.Kept {
			blocks[[2]int{d.FirstRow, d.LastRow}] = true
			elements, rows = append(elements, d.Element), append(rows, d.FirstRow)
		}
	}
	inElement, inRow := grouped(elements, arcPlaceElements), grouped(rows, arcPlaceRows)
	last := map[int]int{} // row of each group of first rows
	for b := range blocks {
		last[inRow[b[0]]] = max(last[inRow[b[0]]], b[1])
	}
	sums := map[[2]int]*residualSum{}
	for _, d := range all {
		if !d.Kept {
			continue
		}
		key := [2]int{inElement[d.Element], inRow[d.FirstRow]}
		if sums[key] == nil {
			sums[key] = &residualSum{}
		}
		sums[key].add(d.ResidualPx)
	}
	var places []product.ArcPlace
	for _, key := range slices.SortedFunc(maps.Keys(sums), func(a, b [2]int) int { return cmp.Or(a[0]-b[0], a[1]-b[1]) }) {
		places = append(places, product.ArcPlace{Element: key[0], FirstRow: key[1], LastRow: last[key[1]], Residual: sums[key].residual()})
	}
	return places
}

// grouped gives each number the least one of its group; groups are neighbours in order, no
// more than most of them.
func grouped(numbers []int, most int) map[int]int {
	distinct := slices.Compact(slices.Sorted(slices.Values(numbers)))
	size := (len(distinct) + most - 1) / most
	group := map[int]int{}
	for i, x := range distinct {
		group[x] = distinct[i/size*size]
	}
	return group
}

// arcLineResiduals sums up the residuals of the centroids kept by line, in order of
// wavelength.
func arcLineResiduals(all []calib.ArcResidual) []product.ArcLine {
	sums := map[float64]*residualSum{}
	for _, d := range all {
		if !d.Kept {
			continue
		}
		if sums[d.VacuumNM] == nil {
			sums[d.VacuumNM] = &residualSum{}
		}
		sums[d.VacuumNM].add(d.ResidualPx)
	}
	var lines []product.ArcLine
	for _, nm := range slices.Sorted(maps.Keys(sums)) {
		lines = append(lines, product.ArcLine{WavelengthNM: nm, Residual: sums[nm].residual()})
	}
	return lines
}
