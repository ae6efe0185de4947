package calib

import (
	"context"
	"math"
)

// pixelMeasure is the work of PixelRule.Measure.
type pixelMeasure struct {
	rule            PixelRule
	width, height   int
	light, variance []float32
	expected        []float32 // shape along x, 0 where too little to divide by
	bad             []bool    // left out of S
	flags           []Flag
	straight, back  *RowShift
	smooth          []float32 // S, on the detector
	// averaged is, by trace row and column, the part of one pixel's variance that is
	// left in S.
	averaged []float32
	scatter  float64
}

func newPixelMeasure(r PixelRule, light, variance []float32, flags []Flag, shift []float64) (*pixelMeasure, error) {
	m := &pixelMeasure{rule: r, width: len(shift), height: len(light) / len(shift), light: light, variance: variance}
	m.flags = make([]Flag, len(light))
	copy(m.flags, flags)
	m.bad = make([]bool, len(light))
	for i, v := range light {
		m.bad[i] = m.flags[i] != 0 || v != v || !(variance[i] > 0)
	}
	opposite := make([]float64, len(shift))
	for x, t := range shift {
		opposite[x] = -t
	}
	m.smooth, m.averaged = make([]float32, len(light)), make([]float32, len(light))
	var err error
	if m.straight, err = NewRowShift(shift, m.height); err != nil {
		return nil, err
	}
	if m.back, err = NewRowShift(opposite, m.height); err != nil {
		return nil, err
	}
	return m, nil
}

// leastExpected is the part of the brightest that can be divided by: below it, what a
// small error of the geometry does is no longer small.
const leastExpected = 1e-3

// expect keeps the shape, with 1 for its brightest.
func (m *pixelMeasure) expect(expected []float32) {
	m.expected = make([]float32, len(m.light))
	brightest := float32(0)
	for _, v := range expected {
		brightest = max(brightest, v)
	}
	for i := range m.expected {
		switch {
		case expected == nil:
			m.expected[i] = 1
		case expected[i] > leastExpected*brightest:
			m.expected[i] = expected[i] / brightest
		}
	}
}

// round computes S from the pixels that are not bad, and adds those that deviate.
func (m *pixelMeasure) round(ctx context.Context) error {
	ratio := make([]float32, len(m.light))
	for i, e := range m.expected {
		if e > 0 && !m.bad[i] {
			ratio[i] = m.light[i] / e
		}
	}
	m.fill(ratio)
	trace := make([]float32, len(ratio))
	m.shift(trace, ratio, m.straight)
	level, columns := m.levels(trace)
	shape := ratio // reused
	rows := m.average(shape, trace, level)
	for y := range m.height {
		if err := ctx.Err(); err != nil {
			return err
		}
		m.smoothRow(shape[y*m.width:(y+1)*m.width], y, level[y], rows[y], columns[y])
	}
	m.shift(m.smooth, shape, m.back)
	for i, e := range m.expected {
		m.smooth[i] *= e
	}
	m.judge()
	return nil
}

// fill interpolates along their row the pixels that are bad or have nothing to be
// divided by.
func (m *pixelMeasure) fill(values []float32) {
	var fill Fill
	marks := make([]Flag, m.width)
	for y := range m.height {
		for x := range marks {
			marks[x] = 0
			if i := y*m.width + x; m.bad[i] || m.expected[i] == 0 {
				marks[x] = BadPixel
			}
		}
		row := values[y*m.width : (y+1)*m.width]
		fill.Plan(marks, BadPixel)
		fill.Signal(row)
	}
}

// shift straightens a frame, or bends it back.
func (m *pixelMeasure) shift(dst, src []float32, shift *RowShift) {
	rows := make([][]float32, m.height)
	for y := range rows {
		rows[y] = src[y*m.width : (y+1)*m.width]
	}
	for y := range rows {
		first, last := shift.Span(y)
		shift.Signal(dst[y*m.width:(y+1)*m.width], rows[first:last+1], first, y)
	}
}

// levels is the mean of each straightened row, weighted by the light expected, and how
// many columns of equal weight it is worth.
func (m *pixelMeasure) levels(trace []float32) (level, columns []float64) {
	level, columns = make([]float64, m.height), make([]float64, m.height)
	for y := range level {
		var weight, square float64
		for x, v := range trace[y*m.width : (y+1)*m.width] {
			w := float64(m.expected[y*m.width+x])
			level[y] += w * float64(v)
			weight += w
			square += w * w
		}
		if weight > 0 {
			level[y] /= weight
			columns[y] = weight * weight / square
		}
	}
	return level, columns
}

// average divides each row by its level and averages over the rows around that have
// about the same; dst is in units of the level. It returns how many rows of equal
// weight each average is worth.
func (m *pixelMeasure) average(dst, trace []float32, level []float64) (rows []float64) {
	sum := make([]float64, m.width)
	rows = make([]float64, len(level))
	for y := range level {
		clear(sum)
		total, square := 0.0, 0.0
		for near := max(0, y-m.rule.Rows); near <= min(m.height-1, y+m.rule.Rows); near++ {
			if near != y && !(math.Abs(level[near]-level[y]) <= m.rule.Like*math.Abs(level[y])) {
				continue
			}
			total += level[near]
			square += level[near] * level[near]
			for x, v := range trace[near*m.width : (near+1)*m.width] {
				sum[x] += float64(v)
			}
		}
		for x, v := range sum {
			dst[y*m.width+x] = 0
			if total != 0 {
				dst[y*m.width+x] = float32(v / total)
			}
		}
		if square > 0 {
			rows[y] = total * total / square
		}
	}
	return rows
}

// smoothRow smooths the shape of a row along the trace and gives it its level back.
// The curve follows the noise of the shape, which is the pixels' own responses more
// than photons: alike for all pixels, in units of the light, but where the field
// ends and light is faint, whose pixels must not rule the others.
func (m *pixelMeasure) smoothRow(shape []float32, y int, level, rows, columns float64) {
	if !(level > 0) {
		clear(shape)
		return
	}
	value, variance := make([]float64, m.width), make([]float64, m.width)
	const floor = 0.3 // of the row's mean
	for x, v := range shape {
		value[x] = float64(v)
		if m.expected[y*m.width+x] > 0 {
			variance[x] = math.Pow(max(float64(v), floor), 2)
		}
	}
	if _, err := (Smoother{m.rule.Period}).Smooth(value, variance, value, variance); err != nil {
		clear(shape) // no columns: there is no light here
		return
	}
	for x := range shape {
		shape[x] = float32(value[x] * level)
		m.averaged[y*m.width+x] = float32(variance[x]/(value[x]*value[x]*rows) + 1/columns)
	}
}
