package calib

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// blockSpectrum is the sum of a block of detector rows, [column]: electrons, their
// variance (0 where the block has no value) and whether a sample was saturated.
type blockSpectrum struct {
	firstRow, lastRow int
	signal, variance  []float64
	saturated         []bool
}

// A column of a block speaks only with half of its rows; what the others saw is
// scaled up. Rows of a block see a line shifted by their slit's tilt, so that with
// fewer the sum would lean.
const blockQuorum = 0.5

// strikeSigmas and strikeSlope bound what a row may differ from its block's median
// before it counts as struck: noise, and the flank of a line that the slit's tilt
// moves by up to 0.4 px from the block's middle to its last row, 17 % of its peak for
// a FWHM of 3 px.
const (
	strikeSigmas = 7
	strikeSlope  = 0.3
)

// sumBlock sums rows firstRow..lastRow of e. Pixels struck by cosmic rays are left
// out: those above the median of the block's rows in their column.
func sumBlock(e *Exposure, firstRow, lastRow int) *blockSpectrum {
	b := &blockSpectrum{firstRow: firstRow, lastRow: lastRow, signal: make([]float64, e.Columns),
		variance: make([]float64, e.Columns), saturated: make([]bool, e.Columns)}
	middle := blockMedians(e, firstRow, lastRow)
	n := float64(lastRow - firstRow + 1)
	for x := range b.signal {
		crest := middle[x]
		for _, near := range middle[max(0, x-2):min(len(middle), x+3)] {
			crest = max(crest, near)
		}
		var sum, variance, kept float64
		for y := firstRow; y <= lastRow; y++ {
			v, s2, flag := e.at(x, y)
			b.saturated[x] = b.saturated[x] || flag&Saturated != 0
			// Not <=: NaN is no value.
			if !(v-middle[x] < strikeSigmas*math.Sqrt(s2)+strikeSlope*max(0, crest)) || flag&(Saturated|BadPixel|NoData) != 0 {
				continue
			}
			sum, variance, kept = sum+v, variance+s2, kept+1
		}
		if kept >= blockQuorum*n {
			scale := n / kept
			b.signal[x], b.variance[x] = sum*scale, variance*scale*scale
		}
	}
	return b
}

// at is a pixel's value, variance and flags; NaN where the variance is none.
func (e *Exposure) at(x, y int) (value, variance float64, flag Flag) {
	i := y*e.Columns + x
	if e.Flags != nil {
		flag = e.Flags[i]
	}
	if value, variance = float64(e.Signal[i]), float64(e.Variance[i]); !(variance > 0) {
		value = math.NaN()
	}
	return value, variance, flag
}

// blockMedians is the median over a block's good rows, by column; 0 for none.
func blockMedians(e *Exposure, firstRow, lastRow int) []float64 {
	m := make([]float64, e.Columns)
	values := make([]float32, 0, lastRow-firstRow+1)
	for x := range m {
		values = values[:0]
		for y := firstRow; y <= lastRow; y++ {
			if v, _, flag := e.at(x, y); v == v && flag&(Saturated|BadPixel|NoData) == 0 {
				values = append(values, float32(v))
			}
		}
		if len(values) > 0 {
			m[x] = median(values)
		}
	}
	return m
}

// leastPedestal is the part of the columns that must be free of lines for a pedestal
// to be taken off.
const leastPedestal = 0.1

// takePedestal subtracts a parabola along x through the columns farther than reach
// from every line (least squares, repeated with the biweight): dark, stray and leaked
// light, which is smooth. A group of lines then needs a constant only; a slope of its
// own would take a weak line beside a bright one.
func (b *blockSpectrum) takePedestal(lines []float64, reach float64) {
	free := b.freeColumns(lines, reach)
	if float64(len(free)) < leastPedestal*float64(len(b.signal)) || len(free) < 10 {
		return
	}
	half := float64(len(b.signal)) / 2
	var c [3]float64
	at := func(x int) float64 {
		u := (float64(x) - half) / half
		return c[0] + u*(c[1]+u*c[2])
	}
	for pass := range 6 {
		normal, right := mat.NewSymDense(3, nil), mat.NewVecDense(3, nil)
		for _, x := range free {
			w := 1 / b.variance[x]
			if pass > 0 {
				w *= biweight((b.signal[x]-at(x))*math.Sqrt(w), 1)
			}
			u := (float64(x) - half) / half
			row := [3]float64{1, u, u * u}
			for i := range row {
				right.SetVec(i, right.AtVec(i)+w*row[i]*b.signal[x])
				for k := i; k < len(row); k++ {
					normal.SetSym(i, k, normal.At(i, k)+w*row[i]*row[k])
				}
			}
		}
		var chol mat.Cholesky
		var solved mat.VecDense
		if !chol.Factorize(normal) || chol.SolveVecTo(&solved, right) != nil {
			return
		}
		copy(c[:], solved.RawVector().Data)
	}
	for x := range b.signal {
		b.signal[x] -= at(x)
	}
}

// freeColumns are those with a value, farther than reach from every line.
func (b *blockSpectrum) freeColumns(lines []float64, reach float64) []int {
	var free []int
	next := 0
	for x := range b.signal {
		for next < len(lines) && float64(x)-lines[next] > reach {
			next++
		}
		if b.variance[x] > 0 && (next == len(lines) || lines[next]-float64(x) > reach) {
			free = append(free, x)
		}
	}
	return free
}
