package extract

import (
	"context"
	"math"
)

// Image is the light in a band of every element and row, [row][element].
type Image struct {
	Elements, Rows int
	Band           Band
	// Signal is not a number where less than leastCoverage of the band, or of its side
	// bands, is good; else it is scaled to the whole band. Error is the standard error,
	// Naive the root of the sum of VARIANCE.
	Signal, Error, Naive []float32
	// Coverage is the good part of the band.
	Coverage []float32
	Flags    []int16
	Unit     string
}

// pieceRows of an image are worked on together.
const pieceRows = 32

// Image makes a narrow-band image.
func (c *Cube) Image(ctx context.Context, b Band, progress func(done int)) (*Image, error) {
	weights, err := b.weights(c.Grid)
	if err != nil {
		return nil, err
	}
	n := c.Elements * c.Rows
	im := &Image{
		Elements: c.Elements, Rows: c.Rows, Band: b, Unit: bandUnit(c.Unit),
		Signal: make([]float32, n), Error: make([]float32, n), Naive: make([]float32, n), Coverage: make([]float32, n), Flags: make([]int16, n),
	}
	inside := overlap(c.Grid, b.FromNM, b.ToNM)
	from, to := span(weights)
	widths := c.widths(from, to)
	noise := c.newFieldNoise(from, to)
	for y0 := 0; y0 < c.Rows; y0 += pieceRows {
		y1 := min(y0+pieceRows, c.Rows)
		v, err := c.readVoxels(ctx, from, to, y0, y1)
		if err != nil {
			return nil, err
		}
		runs, err := c.readRuns(ctx, v, from, to, y0, y1)
		if err != nil {
			return nil, err
		}
		for y := y0; y < y1; y++ {
			if err := noise.setRow(y); err != nil {
				return nil, err
			}
			for j := range c.Elements {
				s := v.spectrum((y-y0)*c.Elements + j)
				noise.setElement(j, s, runs)
				im.set(y*c.Elements+j, s, weights[from:to], inside[from:to], widths, noise)
			}
		}
		progress(y1)
	}
	return im, nil
}

// widths are by what channels from..to-1 are multiplied in a sum: their widths where the
// cube's values are densities, else 1.
func (c *Cube) widths(from, to int) []float64 {
	w := make([]float64, to-from)
	for i := range w {
		w[i] = 1
		if perNM(c.Unit) {
			w[i] = math.Abs(c.Grid.WidthNM(from + i))
		}
	}
	return w
}

// span is the range of channels with a weight.
func span(weights []float64) (from, to int) {
	from = len(weights)
	for l, w := range weights {
		if w != 0 {
			from, to = min(from, l), l+1
		}
	}
	return from, to
}

// set computes pixel i from the voxels of its spectrum.
func (im *Image) set(i int, s spectrumVoxels, weights, inside, widths []float64, noise *fieldNoise) {
	var goodBand, allBand, goodSide, allSide float64
	for l, w := range weights {
		side := inside[l] - w // what the continuum takes
		allBand, allSide = allBand+inside[l], allSide+side
		if s.good(l) {
			goodBand, goodSide = goodBand+inside[l], goodSide+side
		}
		if w != 0 {
			im.Flags[i] |= s.flags[l]
		}
	}
	im.Coverage[i] = float32(goodBand / allBand)
	if goodBand < leastCoverage*allBand || goodSide < leastCoverage*allSide {
		nan := float32(math.NaN())
		im.Signal[i], im.Error[i], im.Naive[i] = nan, nan, nan
		return
	}
	own := make([]float64, len(weights))
	var signal, naive float64
	for l, w := range weights {
		if !s.good(l) {
			continue
		}
		own[l] = widths[l] * inside[l] * allBand / goodBand
		if allSide > 0 {
			own[l] -= widths[l] * (inside[l] - w) * allSide / goodSide
		}
		signal += own[l] * float64(s.signal[l])
		naive += own[l] * own[l] * float64(s.variance[l])
	}
	im.Signal[i], im.Naive[i] = float32(signal), float32(math.Sqrt(naive))
	im.Error[i] = float32(math.Sqrt(noise.variance(own)))
}

// responseNoise is the relative variances of the responses in one spectrum.
type responseNoise struct {
	pixel, slit float64
	band        func(l int) float64
	shares      func(l int) (elements, rows float64) // see Cube.shares
	flux        func(l int) float64                  // of the factor from counts to flux
}

// sharedBy gives those of element j, whose channels begin at from; slit is the row's
// of SLITRESP.
func (c *Cube) sharedBy(slit []float32, j, y, from int) responseNoise {
	r := responseNoise{pixel: c.noise.ResponseVariance, band: func(l int) float64 { return c.bandVarianceAt(j, from+l) },
		shares: func(l int) (float64, float64) { return c.shares(cell{element: j, row: y}, from+l) },
		flux: func(l int) float64 {
			_, relative := c.onSky.factor(from + l)
			return relative
		}}
	if slit != nil {
		r.slit = float64(slit[j])
	}
	return r
}

// variance of a sum over channels by the responses: that of the slit is common to
// all channels, those of the efficiency and of the flux are taken for it.
func (r responseNoise) variance(weights []float64, s spectrumVoxels) float64 {
	var all, band, pixels, flux float64
	for l, w := range weights {
		if w == 0 {
			continue
		}
		v := w * float64(s.signal[l])
		elements, rows := r.shares(l)
		all += v * math.Sqrt(elements*rows)
		band += v * math.Sqrt(elements*r.band(l))
		pixels += v * v * elements
		flux += v * math.Sqrt(max(0, r.flux(l)))
	}
	return r.slit*all*all + band*band + r.pixel*pixels + flux*flux
}

// onPixels turns weights of channels into such that give each channel the part of
// its VARIANCE that is not the responses'.
func (r responseNoise) onPixels(weights []float64, s spectrumVoxels, noise *spectrumNoise) []float64 {
	out := make([]float64, len(weights))
	for l, w := range weights {
		own := noise.product(l, l)
		if w == 0 || !(own > 0) {
			continue
		}
		out[l] = w * math.Sqrt(max(0, r.rest(s, l))/own)
	}
	return out
}

// rest is VARIANCE without what the responses add.
func (r responseNoise) rest(s spectrumVoxels, l int) float64 {
	v := float64(s.signal[l])
	elements, rows := r.shares(l)
	return float64(s.variance[l]) - v*v*(r.flux(l)+elements*(r.pixel+rows*r.slit+r.band(l)))
}

// variance of a sum over channels with the given weights.
func (s *spectrumNoise) variance(weights []float64) float64 {
	sum := 0.0
	own := make([]float64, len(weights))
	for _, p := range s.parts {
		for l, w := range weights {
			own[l] = w * p.at(l)
		}
		sum += p.sumVariance(own)
	}
	return sum
}

// voxelBlock is channels from.. of rows of the cube, [row*elements+element][channel].
type voxelBlock struct {
	signal, variance [][]float32
	flags            [][]int16
}

// spectrumVoxels are those of one element and row.
type spectrumVoxels struct {
	signal, variance []float32
	flags            []int16
}

func (b *voxelBlock) spectrum(i int) spectrumVoxels {
	return spectrumVoxels{b.signal[i], b.variance[i], b.flags[i]}
}

func (s spectrumVoxels) good(l int) bool {
	return isGood(s.flags[l], s.signal[l], s.variance[l])
}

// readVoxels reads channels from..to-1 of rows y0..y1-1.
func (c *Cube) readVoxels(ctx context.Context, from, to, y0, y1 int) (*voxelBlock, error) {
	n := (y1 - y0) * c.Elements
	b := &voxelBlock{signal: table[float32](n, to-from), variance: table[float32](n, to-from), flags: table[int16](n, to-from)}
	plane := make([]float32, n)
	for l := from; l < to; l++ {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := c.signal.ReadPlaneRows(plane, l, y0, y1); err != nil {
			return nil, err
		}
		for i, v := range plane {
			b.signal[i][l-from] = v
		}
		if err := c.variance.ReadPlaneRows(plane, l, y0, y1); err != nil {
			return nil, err
		}
		for i, v := range plane {
			b.variance[i][l-from] = v
		}
		if err := c.flags.ReadPlaneRows(plane, l, y0, y1); err != nil {
			return nil, err
		}
		for i, v := range plane {
			b.flags[i][l-from] = int16(v)
		}
	}
	return b, nil
}
