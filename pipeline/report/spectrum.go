package report

import (
	"fmt"
	"html/template"
	"math"

	"mirrorloom/pipeline/drawing"
	"mirrorloom/pipeline/instrument"
)

// spectrum is the voxels of a place.
type spectrum struct {
	signal, sigma []float64 // NaN where a voxel is not good
	good          int
}

// drawSpectrum draws a spectrum over wavelength with a band of one standard error on both
// sides, and marks lines of the sky; voxels that are not good leave a gap. A spectrum
// without two good voxels gives "".
func drawSpectrum(s *spectrum, label string, grid instrument.Grid, unit string, skyLines []int) template.HTML {
	if s.good < 2 {
		return ""
	}
	nm := make([]float64, len(s.signal))
	upper, lower := make([]float64, len(nm)), make([]float64, len(nm))
	for l := range nm {
		nm[l] = grid.WavelengthNM(float64(l))
		upper[l], lower[l] = s.signal[l]+s.sigma[l], s.signal[l]-s.sigma[l]
	}
	low, high := span([]float64{0}, upper, lower)
	c := newChart("Spectrum "+label+" with errors", "vacuum wavelength, nm", unit, nm[0], nm[len(nm)-1], low, high)
	c.axes()
	for _, l := range skyLines {
		c.Line("sky", c.x(nm[l]), chartTop, c.x(nm[l]), chartTop+9)
	}
	step := math.Abs(grid.StepNM)
	for first := 0; first < len(nm); first++ {
		if math.IsNaN(s.signal[first]) {
			continue
		}
		last := first
		for last+1 < len(nm) && !math.IsNaN(s.signal[last+1]) {
			last++
		}
		c.band(nm[first:last+1], lower[first:last+1], upper[first:last+1], step)
		first = last
	}
	c.level(0)
	c.path("line", nm, s.signal, step)
	return c.done()
}

// band fills what lies between two lines; a single point is as wide as a voxel.
func (c *chart) band(x, lower, upper []float64, step float64) {
	if len(x) == 1 {
		x, lower, upper = []float64{x[0] - step/2, x[0] + step/2}, []float64{lower[0], lower[0]}, []float64{upper[0], upper[0]}
	}
	c.WriteString(`<path class="band" d="`)
	command := "M"
	for i := range x {
		fmt.Fprintf(c, "%s%s,%s", command, drawing.Coord(c.x(x[i])), drawing.Coord(c.y(upper[i])))
		command = "L"
	}
	for i := len(x) - 1; i >= 0; i-- {
		fmt.Fprintf(c, "L%s,%s", drawing.Coord(c.x(x[i])), drawing.Coord(c.y(lower[i])))
	}
	c.WriteString(`Z"/>`)
}
