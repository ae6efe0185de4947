package calib

import (
	"context"
	"fmt"
)

// PixelRule measures the response of the pixels from the sum A of lamp frames with
// all elements on. A whole cycle of coded lamp frames serves as well: it adds up to
// k all-on frames. With S the light itself, smooth along the traces,
//
//	P = A / S.
//
// S is taken from A: divided by what is expected of the lamp along x (LampShape: the
// ends of band and field are not smooth), straightened along the trace by RowShift,
// divided by the level of each trace row (the slit's ends are steep across the trace
// and straight along it), averaged over rows of like level, smoothed along the trace
// by Smoother, and taken back. So P has a local mean of 1 over Period columns.
type PixelRule struct {
	// Period, in columns, of Smoother: at least 30.
	Period float64
	// Rows on each side join the average along the slit, where their level is within
	// Like of the row's own.
	Rows int
	Like float64
	// Floor is the lamp's light, in its own errors, below which a pixel is LowFlat.
	Floor float64
	// Clip, in sigmas of a pixel's deviation, leaves pixels out of S.
	Clip float64
}

// DefaultPixelRule smooths over 40 columns and 17 rows whose light is within 10 %,
// leaves out 5 sigmas and demands 10 sigmas of light.
func DefaultPixelRule() PixelRule {
	return PixelRule{Period: 40, Rows: 8, Like: 0.1, Floor: 10, Clip: 5}
}

// PixelResponse is the response of each pixel, rows one after the other.
type PixelResponse struct {
	Width int
	// Factor is P, 1 on the local average. A measured P of variance v enters as its
	// best estimate given that responses scatter by Scatter around 1 (Wiener):
	// 1 + (P-1) Scatter^2/(Scatter^2 + v). Variance is that estimate's, below both.
	Factor, Variance []float32
	// Flags holds LowFlat where the lamp is too faint to tell whether the pixel
	// answers at all; P is 1 there. Rows that the lamp does not light are LowFlat
	// from end to end: they carry no voxels. BadPixel where it hardly answers; P is 1
	// there too.
	Flags   []Flag
	Scatter float64 // rms of the responses of well lit pixels, noise taken off
	Low     int     // pixels with LowFlat
}

// Row is row y of Factor, Variance and Flags.
func (p *PixelResponse) Row(y int) (factor, variance []float32, flags []Flag) {
	a, b := y*p.Width, (y+1)*p.Width
	return p.Factor[a:b], p.Variance[a:b], p.Flags[a:b]
}

// Divide takes the response out of values of the pixels that begin at pixel first
// (counted along the rows), in place: raw electrons, or a decoded column, since a
// pixel's response is the same in every frame.
//
//	values / P,   variances / P^2 + (values / P)^2 var(P) / P^2
//
// variances may be nil.
func (p *PixelResponse) Divide(values, variances []float32, first int) {
	factor := p.Factor[first:][:len(values)]
	for i, f := range factor {
		values[i] /= f
	}
	if variances == nil {
		return
	}
	own := p.Variance[first:][:len(values)]
	variances = variances[:len(values)]
	for i, f := range factor {
		variances[i] = variances[i]/(f*f) + values[i]*values[i]*own[i]/(f*f)
	}
}

// Measure works on a whole frame in memory, with eight copies of it at most: light
// and variance of A in electrons, rows one after the other, flags (pixels with any
// are left out of S and get P = 1, variance Scatter^2; nil for none), expected, in any
// unit (nil for 1 everywhere: wherever the light along a trace has corners, P will
// have bumps), and shift[x], the rows by which traces have left their own at column x
// (Geometry.TraceShift); the width is len(shift).
func (r PixelRule) Measure(ctx context.Context, light, variance []float32, flags []Flag, expected []float32, shift []float64) (*PixelResponse, error) {
	width := len(shift)
	if width == 0 || len(light)%width != 0 || len(variance) != len(light) || (flags != nil && len(flags) != len(light)) || (expected != nil && len(expected) != len(light)) {
		return nil, fmt.Errorf("pixel response: %d values and %d variances are not the same whole rows of %d", len(light), len(variance), width)
	}
	m, err := newPixelMeasure(r, light, variance, flags, shift)
	if err != nil {
		return nil, err
	}
	m.expect(expected)
	// The second round leaves out what the first found to deviate.
	for range 2 {
		if err := m.round(ctx); err != nil {
			return nil, err
		}
	}
	return m.response(), nil
}
