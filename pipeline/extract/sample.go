package extract

import (
	"context"
	"fmt"

	"mirrorloom/pipeline/product"
)

// Place is a voxel, counted from 0.
type Place struct{ Element, Row, Channel int }

// Sample is a voxel's light as the frames gave it.
type Sample struct {
	// Light is SIGNAL in detected electrons of one science exposure, without the sky if it
	// was subtracted. Variance is that of the frames and lamps, in its square: the errors
	// of the sky and of the flux, which all voxels share, are left out.
	Light, Variance float64
	// Sky is the light of the sky that was subtracted, 0 where none was.
	Sky float64
	// Scale is the measured error scale.
	Scale float64
	// Good voxels may be added up; Flags are those of FLAGS.
	Good  bool
	Flags int16
}

// Deviation is the parts of the variance of a sum of voxels, electrons squared: that of the
// pixels' noise, of the frames' throughput, and of the responses of slit and band.
type Deviation struct{ Pixels, Throughput, Response float64 }

// Variance is all of it.
func (d Deviation) Variance() float64 { return d.Pixels + d.Throughput + d.Response }

// Samples reads voxels of the cube of one run, in their order. The errors name the file.
func (c *Cube) Samples(ctx context.Context, places []Place) ([]Sample, error) {
	s, err := c.sampled(ctx, places)
	if err != nil || len(places) == 0 {
		return nil, err
	}
	scale, err := c.scales(ctx, s, places)
	if err != nil {
		return nil, err
	}
	list := make([]Sample, len(places))
	for n, p := range places {
		i := s.cellOf(p)
		factor, _ := c.onSky.factor(p.Channel)
		_, variance := c.onSky.before(s.aperture, i, p.Channel)
		sky, _ := c.onSky.skyAt(p.Channel)
		list[n] = Sample{
			Sky:   s.skyPart[i] * sky,
			Light: float64(s.signal[i][p.Channel]) / factor, Variance: variance / (factor * factor),
			Scale: scale[n], Good: s.good(i, p.Channel), Flags: s.flags[i][p.Channel],
		}
	}
	return list, nil
}

// Deviation is the variance of a sum of voxels, which are to be good, with the given
// weights, in units of Sample's light: what decoding and resampling put between voxels is
// in it (see the package's documentation).
func (c *Cube) Deviation(ctx context.Context, places []Place, weights []float64) (Deviation, error) {
	s, err := c.sampled(ctx, places)
	if err != nil || len(places) == 0 {
		return Deviation{}, err
	}
	sum := make([]float64, c.Grid.Count)
	for n, p := range places {
		factor, _ := c.onSky.factor(p.Channel)
		s.weight[s.cellOf(p)][p.Channel] += weights[n] / factor
		sum[p.Channel] = 1
	}
	p := c.newPropagator(s.aperture)
	p.sums, p.sumsOnly = [][]float64{sum}, true
	if err := p.walk(ctx); err != nil {
		return Deviation{}, err
	}
	out := newCovariances(c.Grid.Count, 1)
	for _, w := range p.parts {
		out.add(&covariances{w.channels, w.sums})
	}
	var d Deviation
	d.Pixels = out.sums[0]
	p.addThroughput(out)
	d.Throughput = out.sums[0] - d.Pixels
	p.addResponse(out)
	d.Response = out.sums[0] - d.Pixels - d.Throughput
	return d, nil
}

// sampled is an aperture of the cells of places, the channels that they reach read.
type sampled struct {
	*aperture
	at map[[2]int]int // by element and row
}

func (s *sampled) cellOf(p Place) int { return s.at[[2]int{p.Element, p.Row}] }

func (c *Cube) sampled(ctx context.Context, places []Place) (*sampled, error) {
	if c.members != nil {
		return nil, fmt.Errorf("%s is made of %d runs; read voxels of theirs", c.Path(), len(c.members))
	}
	s := &sampled{at: map[[2]int]int{}}
	var cells []cell
	from, to := c.Grid.Count, 0
	for _, p := range places {
		if p.Element < 0 || p.Element >= c.Elements || p.Row < 0 || p.Row >= c.Rows || p.Channel < 0 || p.Channel >= c.Grid.Count {
			return nil, fmt.Errorf("%s has no voxel of element %d, row %d, channel %d", c.Path(), p.Element, p.Row, p.Channel)
		}
		from, to = min(from, p.Channel), max(to, p.Channel+1)
		at := [2]int{p.Element, p.Row}
		if _, known := s.at[at]; !known {
			s.at[at] = len(cells)
			cells = append(cells, cell{element: p.Element, row: p.Row, area: 1})
		}
	}
	if len(cells) == 0 {
		return s, nil
	}
	sortCells(cells)
	for i, k := range cells {
		s.at[[2]int{k.element, k.row}] = i
	}
	var err error
	s.aperture, err = c.loadChannels(ctx, cells, from, to)
	return s, err
}

// scales are those of places, by planes and rows, so that each is read once.
func (c *Cube) scales(ctx context.Context, s *sampled, places []Place) ([]float64, error) {
	im, err := c.file.ImageNamed(product.Scale)
	if err != nil {
		return nil, err
	}
	planes := map[int][]int{} // places by channel
	for n, p := range places {
		planes[p.Channel] = append(planes[p.Channel], n)
	}
	list := make([]float64, len(places))
	plane := make([]float32, (s.endRow-s.firstRow)*c.Elements)
	for l, of := range planes {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := im.ReadPlaneRows(plane, l, s.firstRow, s.endRow); err != nil {
			return nil, err
		}
		for _, n := range of {
			list[n] = float64(plane[(places[n].Row-s.firstRow)*c.Elements+places[n].Element])
		}
	}
	return list, nil
}
