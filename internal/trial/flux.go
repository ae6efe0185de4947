package trial

import (
	"fmt"
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/rehearse"
)

// Enclose changes the field so that all of its light ends up in the cube: no sky,
// a star and a round nebula near the middle, and a filter that ends the band
// within the grid. Only then are "the flux of the cube" and "the flux of the
// scene" the same thing: a cube of another scene ends where light goes on, at
// the ends of the band and of the mirrors' rows, and what interpolation puts on
// either side of an end is not lost but not in the cube either.
func (f *Field) Enclose() {
	g := f.Profile.Grid
	at := func(part float64) float64 { return g.WavelengthNM(part * float64(g.Count)) }
	f.Profile.Spectrograph.Throughput = instrument.Curve{
		{WavelengthNM: at(0.12), Fraction: 0}, {WavelengthNM: at(0.2), Fraction: 0.3},
		{WavelengthNM: at(0.8), Fraction: 0.3}, {WavelengthNM: at(0.88), Fraction: 0},
	}
	halfU, halfW := f.HalfArcsec()
	mag := 13.0
	place := func(u, w float64) (east, north float64) { return f.SkyOf(u*halfU, w*halfW) }
	star := rehearse.Source{Kind: rehearse.KindStar, ABMag: &mag, AtNM: at(0.5), TemperatureK: 6000}
	star.EastArcsec, star.NorthArcsec = place(0.05, -0.03)
	nebula := rehearse.Source{
		Kind: rehearse.KindGaussian, WidthArcsec: 0.25 * halfW,
		Lines: []rehearse.Line{{WavelengthNM: at(0.3), FluxWM2: 5e-16}, {WavelengthNM: at(0.66), FluxWM2: 5e-16, FWHMKmS: 100}},
	}
	nebula.EastArcsec, nebula.NorthArcsec = place(-0.04, 0.05)
	f.Scene = &rehearse.Scene{SeeingFWHMArcsec: 0.25 * halfW, Sources: []rehearse.Source{star, nebula}}
}

// FluxFindings compares the light in the cube of an enclosed field with that in
// its truth: of all voxels that hold data, and of each element that has a
// twentieth of the brightest one's. The cube holds as well what float32 frames
// round: some 1e-5 e a pixel.
func FluxFindings(name string, c *Cube, truth []float32) []Finding {
	const limit = 1e-6
	cube, scene := make([]float64, c.N), make([]float64, c.N)
	for i, t := range truth {
		if v := c.Signal[i]; v == v {
			cube[i%c.N] += float64(v)
		}
		if t == t {
			scene[i%c.N] += float64(t)
		}
	}
	brightest, sumCube, sumScene := 0.0, 0.0, 0.0
	for j := range scene {
		brightest = max(brightest, scene[j])
		sumCube, sumScene = sumCube+cube[j], sumScene+scene[j]
	}
	worst, n := 0.0, 0
	for j := range scene {
		if scene[j] > brightest/20 {
			n++
			worst = max(worst, math.Abs(cube[j]/scene[j]-1))
		}
	}
	return []Finding{
		Below(name+": flux of the cube over the scene's, less 1", math.Abs(sumCube/sumScene-1), limit, len(truth)),
		Below(fmt.Sprintf("%s: the same of any of %d elements", name, n), worst, limit, n),
	}
}
