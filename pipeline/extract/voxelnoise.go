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
	pixels   [][]float32 // variances of the detector rows that the row reads, from firstRow on
	firstRow int
	straight []float32             // of the straightened row, where all elements have the same
	known    map[int]*elementNoise // of the row
	parts    []noisePart           // of the element
	own      elementNoise          // memory where there is no other
	gather   *calib.Gather
	// wavelengths are the edges of channels partFrom..partTo-1, edges those of all.
	wavelengths      calib.Wavelengths
	partFrom, partTo int
	edges            []float64
}

// elementNoise is an element's light on the detector: the weights of its channels on the
// columns of its straightened row.
type elementNoise struct {
	straight []float32 // variance, by column
	w        []float32
	first    []int32
	start    []int32
}

// noisePart is an element that the voxels are made of, with its weight in each channel; nil
// for 1.
type noisePart struct {
	*elementNoise
	factor []float64
}

func (p *noisePart) at(l int) float64 {
	if p.factor == nil {
		return 1
	}
	return p.factor[l]
}

// newSpectrumNoise is for channels from..to-1 of elements of a row, one at a time.
func (c *Cube) newSpectrumNoise() *spectrumNoise {
	s := &spectrumNoise{c: c, row: -1, straight: make([]float32, c.noise.Columns), edges: make([]float64, c.Grid.Count+1)}
	if c.field != nil {
		s.gather = c.field.NewGather()
	}
	return s
}

// setRow prepares for a row. For codes whose elements have variances of their own
// the pixels of a row count alike: only their ratios matter, see covariance.
func (s *spectrumNoise) setRow(y int) error {
	c := s.c
	s.row, s.known = y, map[int]*elementNoise{}
	if !c.noise.Uniform {
		for x := range s.straight {
			s.straight[x] = 1
		}
		return nil
	}
	first, last := c.span(y)
	s.pixels, s.firstRow = s.pixels[:0], first
	for at := first; at <= last; at++ {
		p, err := c.readPixels(at)
		if err != nil {
			return err
		}
		s.pixels = append(s.pixels, p.plane)
	}
	if c.field == nil {
		c.shift.Variance(s.straight, s.pixels, first, y)
	}
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
	low, high := s.c.sourcesOf(element)
	for old := range s.known {
		if old < low {
			delete(s.known, old)
		}
	}
	if from != s.partFrom || to != s.partTo {
		clear(s.known)
	}
	s.parts = s.parts[:0]
	if s.c.field == nil {
		s.parts = append(s.parts, noisePart{s.elementNoise(element, from, to), nil})
		return
	}
	for e := low; e <= high; e++ {
		if s.known[e] == nil {
			s.known[e] = s.elementNoise(e, from, to)
		}
		p := noisePart{s.known[e], make([]float64, to-from)}
		for l := range p.factor {
			p.factor[l] = s.c.across(element, e, from+l)
		}
		s.parts = append(s.parts, p)
	}
}

func (s *spectrumNoise) elementNoise(element, from, to int) *elementNoise {
	c := s.c
	n := &elementNoise{straight: s.straight}
	if c.field == nil {
		n = &s.own
		*n = elementNoise{s.straight, n.w[:0], n.first[:0], n.start[:0]}
	}
	if c.field != nil && c.noise.Uniform {
		c.geometry.Places(s.edges, float64(element), float64(s.row), c.edges)
		c.field.Set(s.gather, s.row, s.edges)
		n.straight = make([]float32, c.noise.Columns)
		s.gather.Variance(n.straight, s.pixels, s.firstRow)
	}
	edges := s.edges[:to-from+1]
	c.geometry.Places(edges, float64(element), float64(s.row), s.part(from, to))
	for l := range to - from {
		n.start = append(n.start, int32(len(n.w)))
		var first int
		first, n.w = c.resampler.Weights(n.w, edges[l], edges[l+1])
		n.first = append(n.first, int32(first))
	}
	n.start = append(n.start, int32(len(n.w)))
	return n
}

// product is sum w_a w_b variance of two channels, from setElement's first on, over
// columns and elements.
func (s *spectrumNoise) product(a, b int) float64 {
	sum := 0.0
	for _, p := range s.parts {
		if f := p.at(a) * p.at(b); f != 0 {
			sum += f * p.product(a, b)
		}
	}
	return sum
}

func (s *elementNoise) product(a, b int) float64 {
	wa, wb := s.w[s.start[a]:s.start[a+1]], s.w[s.start[b]:s.start[b+1]]
	fa, fb := int(s.first[a]), int(s.first[b])
	sum := 0.0
	for x := max(fa, fb); x < min(fa+len(wa), fb+len(wb)); x++ {
		sum += float64(wa[x-fa]) * float64(wb[x-fb]) * float64(s.straight[x])
	}
	return sum
}

// sumVariance is that of a sum over channels with the given weights.
func (s *elementNoise) sumVariance(weights []float64) float64 {
	first, last := math.MaxInt, 0
	for l := range weights {
		first, last = min(first, int(s.first[l])), max(last, int(s.first[l]+s.start[l+1]-s.start[l]))
	}
	onPixels := make([]float64, max(0, last-first))
	for l, weight := range weights {
		for k, w := range s.w[s.start[l]:s.start[l+1]] {
			onPixels[int(s.first[l])+k-first] += weight * float64(w)
		}
	}
	sum := 0.0
	for x, w := range onPixels {
		sum += w * w * float64(s.straight[first+x])
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
