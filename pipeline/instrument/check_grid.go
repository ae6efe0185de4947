package instrument

import (
	"math"

	"mirrorloom/pipeline/config"
)

const (
	// Voxels are about a pixel: narrower ones only repeat each other's noise,
	// wider ones lose resolution at the least line spread.
	leastVoxelPx, mostVoxelPx = 0.8, 1.25
	// maxGrid is far more than a detector of maxSide columns can fill.
	maxGrid = 65536
	// leastAirNM is where the index of air is still well inside its formula.
	leastAirNM = 200
)

func (p *Profile) checkGrid(c *config.Checks) {
	g := p.Grid
	c.Positive("grid.first_nm", g.FirstNM)
	c.Positive("grid.step_nm", g.StepNM)
	c.Count("grid.count", g.Count, 1, maxGrid)
	c.Finite("grid.step_nm", g.LastNM())
	g.CheckScale(c)
	if c.Err() != nil {
		return
	}
	p.checkDispersion(c)
	p.checkBand(c)
}

// CheckScale refuses a grid under the key grid whose scale has no wavelengths there.
func (g Grid) CheckScale(c *config.Checks) {
	c.That(g.Axis == Vacuum || !(g.FirstNM-g.StepNM < leastAirNM), "grid.first_nm", "wavelengths in air are not defined below %v nm; use axis: wave", leastAirNM)
	c.That(g.Spacing == Linear || g.StepNM < g.FirstNM, "grid.step_nm", "a logarithmic step of %v nm at %v nm is no wavelength grid; give a smaller one", g.StepNM, g.FirstNM)
}

// checkDispersion demands that wavelengths run one way along x over the whole
// grid, edges of voxels included, and that voxels are about a pixel.
func (p *Profile) checkDispersion(c *config.Checks) {
	d, g := p.Spectrograph.DispersionPxPerNM, p.Grid
	first := g.WavelengthNM(-0.5) - p.Spectrograph.CenterNM
	last := g.WavelengthNM(float64(g.Count)-0.5) - p.Spectrograph.CenterNM
	least, most := quadraticRange(d[0], 2*d[1], 3*d[2], first, last)
	c.That(least*most > 0, "spectrograph.dispersion_px_per_nm", "the dispersion runs from %.4g to %.4g px/nm over the grid and must not change its sign; correct the coefficients or the grid", least, most)
	narrow, wide := p.voxelWidthsPx()
	c.That(narrow >= leastVoxelPx && wide <= mostVoxelPx, "grid.step_nm", "voxels are %.3g to %.3g px wide where %v to %v are wanted; give a step of about %.4g nm", narrow, wide, leastVoxelPx, mostVoxelPx, 2*g.StepNM/(narrow+wide))
}

// voxelWidthsPx are the widths of the narrowest and of the widest voxel on the detector.
func (p *Profile) voxelWidthsPx() (narrow, wide float64) {
	narrow = math.Inf(1)
	last := p.columnOf(p.Grid.WavelengthNM(-0.5))
	for i := range p.Grid.Count {
		next := p.columnOf(p.Grid.WavelengthNM(float64(i) + 0.5))
		width := math.Abs(next - last)
		narrow, wide, last = min(narrow, width), max(wide, width), next
	}
	return narrow, wide
}

// columnOf is the detector column of a vacuum wavelength in the middle of the field.
func (p *Profile) columnOf(vacuumNM float64) float64 {
	s := p.Spectrograph
	l, d := vacuumNM-s.CenterNM, s.DispersionPxPerNM
	return s.XCenterPx + l*(d[0]+l*(d[1]+l*d[2]))
}

// checkBand demands that some wavelength of the grid falls on the detector for
// the middle of the field, and that some of the grid's light gets there.
func (p *Profile) checkBand(c *config.Checks) {
	g := p.Grid
	// x is monotonic over the grid, so that its ends bound it.
	x0, x1 := p.columnOf(g.WavelengthNM(0)), p.columnOf(g.LastNM())
	c.That(min(x0, x1) <= float64(p.Detector.Columns)-0.5 && max(x0, x1) >= -0.5, "grid", "its wavelengths fall on columns %.5g to %.5g of a detector of %d for the middle of the field; correct the grid or the spectrograph", x0, x1, p.Detector.Columns)
	for i := range g.Count {
		if p.Throughput(g.WavelengthNM(float64(i))) > 0 {
			return
		}
	}
	c.That(false, "grid", "no light of %v to %v nm passes the throughput tables; correct the grid or the tables", g.WavelengthNM(0), g.LastNM())
}
