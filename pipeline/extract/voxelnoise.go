package extract

import (
	"math"

	"mirrorloom/calib"
)

// spectrumNoise gives the covariance of the voxels of one element and row, whose
// wavelengths share pixels. Elements that share pixels as well lie at other
// wavelengths and have no part in it.
type spectrumNoise struct {
	c        *Cube
	row      int
	straight []float32 // variance of the straightened row, by column
	edges    []float64
	w        []float32
	first    []int32
	start    []int32
	// wavelengths are the edges of channels partFrom..partTo-1.
	wavelengths      calib.Wavelengths
	partFrom, partTo int
}

// newSpectrumNoise is for channels from..to-1 of elements of a row, one at a time.
func (c *Cube) newSpectrumNoise() *spectrumNoise {
	return &spectrumNoise{c: c, row: -1, straight: make([]float32, c.noise.Columns), edges: make([]float64, c.Grid.Count+1)}
}

// setRow prepares for a row. For codes whose elements have variances of their own
// the pixels of a row count alike: only their ratios matter, see covariance.
func (s *spectrumNoise) setRow(y int) error {
	c := s.c
	s.row = y
	if !c.noise.Uniform {
		for x := range s.straight {
			s.straight[x] = 1
		}
		return nil
	}
	first, last := c.shift.Span(y)
	rows := make([][]float32, 0, last-first+1)
	for at := first; at <= last; at++ {
		p, err := c.readPixels(at)
		if err != nil {
			return err
		}
		rows = append(rows, p.plane)
	}
	c.shift.Variance(s.straight, rows, first, y)
	return nil
}

// part are the edges of channels from..to-1, listed once for all elements.
func (s *spectrumNoise) part(from, to int) calib.Wavelengths {
	if s.wavelengths.Count() == 0 || from != s.partFrom || to != s.partTo {
		s.wavelengths, s.partFrom, s.partTo = s.c.edgesOf(from, to), from, to
	}
	return s.wavelengths
}

// setElement computes the weights of channels from..to-1.
func (s *spectrumNoise) setElement(element, from, to int) {
	edges := s.edges[:to-from+1]
	s.c.geometry.Places(edges, float64(element), float64(s.row), s.part(from, to))
	s.w, s.first, s.start = s.w[:0], s.first[:0], s.start[:0]
	for l := range to - from {
		s.start = append(s.start, int32(len(s.w)))
		var first int
		first, s.w = s.c.resampler.Weights(s.w, edges[l], edges[l+1])
		s.first = append(s.first, int32(first))
	}
	s.start = append(s.start, int32(len(s.w)))
}

// product is sum_x w_a w_b variance of two channels, from setElement's first on.
func (s *spectrumNoise) product(a, b int) float64 {
	wa, wb := s.w[s.start[a]:s.start[a+1]], s.w[s.start[b]:s.start[b+1]]
	fa, fb := int(s.first[a]), int(s.first[b])
	sum := 0.0
	for x := max(fa, fb); x < min(fa+len(wa), fb+len(wb)); x++ {
		sum += float64(wa[x-fa]) * float64(wb[x-fb]) * float64(s.straight[x])
	}
	return sum
}

// covariance fills dst, [channel][lag], for channels whose variances are given, those
// of VARIANCE: their correlations are those of the pixels that they share.
func (s *spectrumNoise) covariance(dst [][]float64, variance []float64) {
	n := len(variance)
	root := make([]float64, n)
	for l := range root {
		if own := s.product(l, l); own > 0 {
			root[l] = math.Sqrt(variance[l] / own)
		}
	}
	for l := range n {
		for lag := range min(len(dst[l]), n-l) {
			dst[l][lag] = root[l] * root[l+lag] * s.product(l, l+lag)
		}
	}
}
