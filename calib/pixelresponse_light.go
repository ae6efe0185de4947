package calib

import (
	"context"
	"math"
	"slices"
)

// pixelMeasure is the work of PixelRule.Measure.
type pixelMeasure struct {
	rule            PixelRule
	width, height   int
	light, variance []float32
	bad             []bool // left out of S
	flags           []Flag
	straight, back  *RowShift
	smooth          []float32 // S, on the detector
	scatter         float64
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
	m.smooth = make([]float32, len(light))
	var err error
	if m.straight, err = NewRowShift(shift, m.height); err != nil {
		return nil, err
	}
	if m.back, err = NewRowShift(opposite, m.height); err != nil {
		return nil, err
	}
	return m, nil
}

// round computes S from the pixels that are not bad, and adds those that deviate.
func (m *pixelMeasure) round(ctx context.Context) error {
	filled := slices.Clone(m.light)
	m.fill(filled)
	trace := make([]float32, len(filled))
	m.shift(trace, filled, m.straight)
	level := m.levels(trace)
	shape := filled // reused
	m.average(shape, trace, level)
	for y := range m.height {
		if err := ctx.Err(); err != nil {
			return err
		}
		m.smoothRow(shape[y*m.width:(y+1)*m.width], y, level)
	}
	m.shift(m.smooth, shape, m.back)
	m.judge()
	return nil
}

// fill interpolates bad pixels along their row, and from the rows around where a
// whole row is bad.
func (m *pixelMeasure) fill(values []float32) {
	var fill Fill
	marks := make([]Flag, m.width)
	for y := range m.height {
		for x := range marks {
			marks[x] = 0
			if m.bad[y*m.width+x] {
				marks[x] = BadPixel
			}
		}
		row := values[y*m.width : (y+1)*m.width]
		for x, v := range row {
			if v != v {
				row[x] = 0
			}
		}
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

// levels is the mean of each straightened row.
func (m *pixelMeasure) levels(trace []float32) []float64 {
	level := make([]float64, m.height)
	for y := range level {
		for _, v := range trace[y*m.width : (y+1)*m.width] {
			level[y] += float64(v) / float64(m.width)
		}
	}
	return level
}

// average divides each row by its level and averages over the rows around that have
// about the same; dst is in units of the level.
func (m *pixelMeasure) average(dst, trace []float32, level []float64) {
	sum := make([]float64, m.width)
	for y := range level {
		clear(sum)
		total := 0.0
		for near := max(0, y-m.rule.Rows); near <= min(m.height-1, y+m.rule.Rows); near++ {
			if near != y && !(math.Abs(level[near]-level[y]) <= m.rule.Like*math.Abs(level[y])) {
				continue
			}
			total += level[near]
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
	}
}

// smoothRow smooths the shape of a row along the trace and gives it its level back.
// The curve follows the noise of the shape, which is the pixels' own responses more
// than photons: alike for all pixels, in units of the light.
func (m *pixelMeasure) smoothRow(shape []float32, y int, level []float64) {
	if !(level[y] > 0) {
		clear(shape)
		return
	}
	value, variance := make([]float64, m.width), make([]float64, m.width)
	const floor = 0.3 // of the row's mean
	for x, v := range shape {
		value[x] = float64(v)
		variance[x] = math.Pow(max(float64(v), floor), 2)
	}
	if _, err := (Smoother{m.rule.Period}).Smooth(value, variance, value, variance); err != nil {
		return // fewer columns than a curve needs: the row stands for itself
	}
	for x := range shape {
		shape[x] = float32(value[x] * level[y])
	}
}
