package extract

import (
	"mirrorloom/calib"
	"mirrorloom/pipeline/product"
)

// Where refraction was taken out, or the cube made onto the voxels of another one, a voxel
// is made of the light of several elements at other rows: see calib.ShiftField. These
// methods answer for plain cubes as well.

// readShift reads the table SHIFT, if there is one.
func (c *Cube) readShift(trace []float64) error {
	s, err := product.ReadFieldShift(c.file, c.Grid.Count)
	if err != nil || s == nil {
		return err
	}
	c.field, err = calib.NewShiftField(trace, s.Elements, s.Rows, c.Elements, c.Rows)
	return err
}

// span is the range of detector rows that trace row y0 reads.
func (c *Cube) span(y0 int) (first, last int) {
	if c.field != nil {
		return c.field.Span(y0)
	}
	return c.shift.Span(y0)
}

// sourcesOf is the range of elements, inclusive, that voxels of element j are made of.
func (c *Cube) sourcesOf(j int) (first, last int) {
	if c.field != nil {
		return c.field.Sources(j)
	}
	return j, j
}

// across is the weight of element s in voxel l of element j.
func (c *Cube) across(j, s, l int) float64 {
	if c.field == nil {
		return 1
	}
	first, w := c.field.Across(j, l)
	if s < first || s >= first+len(w) {
		return 0
	}
	return float64(w[s-first])
}

// shares are the sums of the squared weights of elements and rows in voxel l of a cell:
// by them the relative variance of a response that is each element's, or row's, own shrinks.
func (c *Cube) shares(k cell, l int) (elements, rows float64) {
	if c.field == nil {
		return 1, 1
	}
	square := func(_ int, w []float32) (sum float64) {
		for _, v := range w {
			sum += float64(v) * float64(v)
		}
		return sum
	}
	return square(c.field.Across(k.element, l)), square(c.field.Along(k.row, l))
}

// slitRows reads the rows of SLITRESP that reach trace row y0; nil without a response.
func (c *Cube) slitRows(y0 int) (*slitRows, error) {
	if c.slitResponse == nil {
		return nil, nil
	}
	s := &slitRows{y0: y0, first: y0}
	last := y0
	if c.field != nil {
		for l := range c.Grid.Count {
			first, w := c.field.Along(y0, l)
			if l == 0 {
				s.first, last = first, first
			}
			s.first, last = min(s.first, first), max(last, first+len(w)-1)
		}
	}
	s.values = make([]float32, (last-s.first+1)*c.Elements)
	return s, c.slitResponse.ReadPlaneRows(s.values, 0, s.first, last+1)
}

// slitRows are rows of SLITRESP from first on, for trace row y0.
type slitRows struct {
	y0, first int
	values    []float32 // [row][element]
}

// responseOf is the response of element s in voxels l of the row of slit.
func (c *Cube) responseOf(slit *slitRows, s, l int) float64 {
	if slit == nil {
		return 1
	}
	factor := float64(slit.values[s])
	if c.field != nil {
		factor = 0
		first, w := c.field.Along(slit.y0, l)
		for i, v := range w {
			factor += float64(v) * float64(slit.values[(first+i-slit.first)*c.Elements+s])
		}
	}
	return factor * float64(c.bandFactor[l*c.Elements+s])
}
