package extract

import (
	"math"
	"slices"

	"mirrorloom/pipeline/product"
)

// sampledCells of an aperture tell how a cube was scaled.
const sampledCells = 9

// knowsElectrons tells whether the cube says how its unit comes to detected electrons.
func (c *Cube) knowsElectrons() bool {
	return c.Unit == product.UnitSignal || c.onSky != nil && c.onSky.flux != nil
}

// electrons is what turns the cube's unit into detected electrons, by channel: the
// root of the variance of an aperture's voxels in electrons over VARIANCE, the
// median of some cells. nil for a cube in electrons.
func (p *propagator) electrons() ([]float64, error) {
	c := p.c
	if c.knowsElectrons() {
		return nil, nil // the light reader knows the factor
	}
	if !c.noise.Uniform {
		return nil, c.fault("a cube of a %s in %s does not tell the electrons behind it", c.noise.Family, c.Unit)
	}
	channels := c.Grid.Count
	found := make([][]float64, channels)
	step := max(1, len(p.a.cells)/sampledCells)
	for i := 0; i < len(p.a.cells); i += step {
		t, err := p.newTrace(p.a.cells[i].row, i, i+1)
		if err != nil {
			return nil, err
		}
		for l, scale := range t.scale {
			if scale > 0 {
				found[l] = append(found[l], 1/float64(scale))
			}
		}
	}
	factors := make([]float64, channels)
	for l, all := range found {
		factors[l] = math.NaN()
		if len(all) > 0 {
			slices.Sort(all)
			factors[l] = all[len(all)/2]
		}
	}
	return factors, nil
}
