package extract

import (
	"context"
	"fmt"
	"math"

	"mirrorloom/pipeline/product"
)

// SpectrumOptions say what Spectrum adds up.
type SpectrumOptions struct {
	Aperture *Shape
	// Background is taken off, as its mean over its own area; nil for nothing.
	Background *Shape
	// Optimal weighs voxels by the profile of the light (Horne 1986).
	Optimal bool
	// Bands are added up with the errors of their channels' covariance.
	Bands []Band
	// Lines are fitted, if there are any.
	Lines *LineOptions
}

// Spectrum is an aperture's light by wavelength, in the cube's unit.
type Spectrum struct {
	WavelengthNM []float64
	// Signal is the sum over the aperture; not a number where less than half of the
	// aperture is good. Error is its standard error, Naive the root of the sum of
	// VARIANCE.
	Signal, Error, Naive []float64
	// Coverage is the good part of the aperture; the sum is scaled to the whole.
	Coverage []float64
	// Flags are those of any voxel in the aperture.
	Flags []int16
	// Covariance is [channel][lag]: that of channel l with l + lag.
	Covariance [][]float64
	Bands      []BandLight
	Lines      []Line
	LineStatus Status
	// Area is the aperture's in voxels, BackgroundArea that of the background.
	Area, BackgroundArea float64
	Cells                int
	// Element and Row are the aperture's middle, by area; Position is where it is.
	Element, Row float64
	Position     Position
}

// Spectrum adds up the voxels of an aperture. The errors name what is wrong with
// the shape, or are those of the cube's file.
func (c *Cube) Spectrum(ctx context.Context, o SpectrumOptions) (*Spectrum, error) {
	a, err := c.aperture(ctx, o)
	if err != nil {
		return nil, err
	}
	s := &Spectrum{Coverage: a.plain(), Cells: len(a.cells)}
	if o.Optimal {
		if err := a.optimal(); err != nil {
			return nil, fmt.Errorf("%s: %w", o.Aperture.Text, err)
		}
	}
	s.place(a)
	s.Position = c.Position(s.Element, s.Row)
	channels := c.Grid.Count
	s.Signal, s.Naive, s.Error = make([]float64, channels), make([]float64, channels), make([]float64, channels)
	s.WavelengthNM, s.Flags = make([]float64, channels), make([]int16, channels)
	for l := range channels {
		s.WavelengthNM[l] = c.Grid.WavelengthNM(float64(l))
		s.Signal[l], s.Naive[l] = a.sum(l)
		s.Naive[l] = math.Sqrt(s.Naive[l])
		for i := range a.cells {
			s.Flags[l] |= a.flags[i][l]
		}
	}
	var sums [][]float64
	for _, b := range o.Bands {
		light, weights, err := b.add(s, c.Grid, c.Unit)
		if err != nil {
			return nil, err
		}
		s.Bands, sums = append(s.Bands, light), append(sums, weights)
	}
	v, err := c.propagate(ctx, a, sums)
	if err != nil {
		return nil, err
	}
	s.Covariance = v.channels
	for l := range s.Error {
		s.Error[l] = math.NaN()
		if !math.IsNaN(s.Signal[l]) {
			s.Error[l] = math.Sqrt(v.channels[l][0])
		}
	}
	for i := range s.Bands {
		s.Bands[i].Error = math.Sqrt(v.sums[i])
	}
	if o.Lines != nil {
		s.Lines, s.LineStatus, err = c.fitSpectrum(s, *o.Lines)
	}
	return s, err
}

// Extent counts the elements and the cells, an element and row each, that o's shapes touch.
// Errors are those of the shapes.
func (c *Cube) Extent(o SpectrumOptions) (elements, cells int, err error) {
	all, err := c.cellsOf(o)
	if err != nil {
		return 0, 0, err
	}
	seen := map[int]bool{}
	for _, k := range all {
		seen[k.element] = true
	}
	return len(seen), len(all), nil
}

// aperture loads the cells of both shapes.
func (c *Cube) aperture(ctx context.Context, o SpectrumOptions) (*aperture, error) {
	cells, err := c.cellsOf(o)
	if err != nil {
		return nil, err
	}
	return c.load(ctx, cells)
}

func (c *Cube) cellsOf(o SpectrumOptions) ([]cell, error) {
	if o.Aperture == nil {
		return nil, fmt.Errorf("no aperture; give a circle, an ellipse, a polygon or elements and rows")
	}
	cells, err := o.Aperture.cells(c.sky, c.Elements, c.Rows)
	if err != nil {
		return nil, err
	}
	if o.Background != nil {
		around, err := o.Background.cells(c.sky, c.Elements, c.Rows)
		if err != nil {
			return nil, fmt.Errorf("background: %w", err)
		}
		cells = withBackground(cells, around)
	}
	return cells, nil
}

// withBackground joins the cells of aperture and background.
func withBackground(cells, around []cell) []cell {
	type place struct{ element, row int }
	at := map[place]int{}
	for i, k := range cells {
		at[place{k.element, k.row}] = i
	}
	for _, k := range around {
		if i, both := at[place{k.element, k.row}]; both {
			cells[i].background = k.area
			continue
		}
		cells = append(cells, cell{element: k.element, row: k.row, background: k.area})
	}
	sortCells(cells)
	return cells
}

// place sets areas and middle.
func (s *Spectrum) place(a *aperture) {
	for _, k := range a.cells {
		s.Area += k.area
		s.BackgroundArea += k.background
		s.Element += k.area * float64(k.element)
		s.Row += k.area * float64(k.row)
	}
	s.Element /= s.Area
	s.Row /= s.Area
}

// FlagNames lists the flags of a channel.
func FlagNames(bits int16) []string {
	var names []string
	for _, f := range product.Flags() {
		if bits&f.Bit != 0 {
			names = append(names, f.Name)
		}
	}
	return names
}
