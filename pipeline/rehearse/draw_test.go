package rehearse

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// bentOptics is a small instrument whose slant and trace are as strong as a
// profile may have them: smile 3 px at the edge, slit tilted by 1.9 degrees,
// trace 8 rows end to end and bent.
func bentOptics(t *testing.T, name string) *optics {
	p := smallProfile(t, name)
	seq := planned(t, p, smallTarget(p))
	g := nominalGeometry(seq)
	g.SlitTilt = 0.033
	g.SmilePerPx = 3.0 / (28 * 28)
	g.TraceTilt = 0.03
	g.TraceCurvePerPx = 1.2e-4
	return newOptics(seq, g)
}

func testProfiles() []string { return []string{"optical", "infrared"} }

// oneLine is a light of one line that only mirror (u, w) gets.
type oneMirror struct{ column, row float64 }

func (m oneMirror) fraction(column, row float64) float64 {
	if column == m.column && row == m.row {
		return 1
	}
	return 0
}

// drawnPixels draws a light's pixels on a whole detector.
func drawnPixels(o *optics, emitters []emitter, efficiency func(float64) float64, first, last int) [][]float32 {
	s, light := collected(o, emitters, efficiency, first, last)
	image := make([][]float32, o.rows)
	scratch := make([]float64, o.axis.n)
	for y := range image {
		image[y] = make([]float32, o.columns)
		o.drawRow(image[y], &s.rows[y], light, o.spread.pixel, scratch)
	}
	return image
}

func collected(o *optics, emitters []emitter, efficiency func(float64) float64, first, last int) (*strip, []density) {
	s := o.newStrip(0, o.rows)
	light := o.newDensities(len(s.mirrors))
	for k := range s.mirrors {
		o.prepareMirror(s, k)
		o.collect(&light[k], emitters, efficiency, s.mirrors[k], first, last, nil)
	}
	for k := range s.rows {
		o.prepareRow(s, k)
	}
	return s, light
}

// landing solves section 3 of the design for where a mirror's light falls, by
// substitution from scratch.
func landing(g Geometry, u, w int, nm float64) (x, y float64) {
	l := nm - g.CenterNM
	y = g.YCenterPx
	for range 60 {
		q := y - g.YCenterPx
		x = g.XCenterPx + g.UStepPx*(float64(u)-g.UMiddle) +
			g.DispersionPxPerNM[0]*l + g.DispersionPxPerNM[1]*l*l + g.DispersionPxPerNM[2]*l*l*l + g.SlitTilt*q + g.SmilePerPx*q*q
		y = g.YCenterPx + g.WStepPx*(float64(w)-g.WMiddle) + g.TraceTilt*(x-g.XCenterPx) + g.TraceCurvePerPx*(x-g.XCenterPx)*(x-g.XCenterPx)
	}
	return x, y
}

// spots are mirrors and wavelengths over the small field.
func spots(o *optics) [][3]float64 {
	g := o.geometry
	var list [][3]float64
	for _, du := range []int{-9, 0, 8} {
		for _, dw := range []int{-12, 1, 14} {
			for _, dl := range []float64{-13.3, 0.17, 12.77} {
				u, w := int(g.UMiddle)+du, int(g.WMiddle)+dw
				if o.field.diagonal && (u-w)&1 != 0 {
					w++
				}
				list = append(list, [3]float64{float64(u), float64(w), g.CenterNM + dl})
			}
		}
	}
	return list
}

// A line without width through one mirror is a circular Gaussian about the
// place of section 3: its integral over a pixel is a product of differences of
// error functions. Required: 1e-4 of the peak.
func TestPixelsAreGaussianIntegrals(t *testing.T) {
	for _, name := range testProfiles() {
		o := bentOptics(t, name)
		worst, peak, worstFlux := 0.0, 0.0, 0.0
		for _, spot := range spots(o) {
			u, w, nm := int(spot[0]), int(spot[1]), spot[2]
			column, row, ok := o.field.mirror(u, w)
			require.True(t, ok)
			e := []emitter{{image: oneMirror{float64(column), float64(row)}, lines: []emission{{nm: nm, photons: 1000}}}}
			image := drawnPixels(o, e, func(float64) float64 { return 1 }, u, u)
			x0, y0 := landing(o.geometry, u, w, nm)
			sigma := o.geometry.LSFFWHMPx / (2 * math.Sqrt(2*math.Log(2)))
			cdf := func(z float64) float64 { return 0.5 * (1 + math.Erf(z/sigma/math.Sqrt2)) }
			sum := 0.0
			for y, line := range image {
				for x, got := range line {
					dx, dy := float64(x)-x0, float64(y)-y0
					want := 1000 * (cdf(dx+0.5) - cdf(dx-0.5)) * (cdf(dy+0.5) - cdf(dy-0.5))
					worst, peak = math.Max(worst, math.Abs(float64(got)-want)), math.Max(peak, want)
					sum += float64(got)
				}
			}
			worstFlux = math.Max(worstFlux, math.Abs(sum/1000-1))
		}
		t.Logf("%s: worst error %.1e of the peak, flux %.1e", name, worst/peak, worstFlux)
		require.Less(t, worst/peak, 3e-5)
		require.Less(t, worstFlux, 3e-7)
	}
}

// A line with a width of its own is a Gaussian along the trace, as wide in px as
// the dispersion at its centre makes it: against the sum of many spots.
func TestWideLines(t *testing.T) {
	o := bentOptics(t, "optical")
	g := o.geometry
	u, w, nm := int(g.UMiddle), int(g.WMiddle), g.CenterNM+2.2
	sigma := g.LSFFWHMPx / fwhmPerSigma
	x0, y0 := landing(g, u, w, nm)
	for _, fwhm := range []float64{10, 60, 200, 320, 500, 1500} {
		e := []emitter{{image: oneMirror{float64(u), float64(w)}, lines: []emission{{nm: nm, photons: 1000, fwhmKmS: fwhm}}}}
		image := drawnPixels(o, e, func(float64) float64 { return 1 }, u, u)
		width := fwhm / 2.35482 / 299792.458 * nm * g.dispersion(nm)
		points := 60 + int(60*width)
		worst, peak := 0.0, 0.0
		for y := range image {
			for x := range image[y] {
				want := 0.0
				for k := range points {
					z := ((float64(k)+0.5)/float64(points) - 0.5) * 14 // -7..7 standard deviations
					at := x0 + z*width
					row := y0 - g.trace(x0) + g.trace(at)
					want += 1000 * bell(z, 1) * 14 / float64(points) * share(float64(x)-0.5-at, float64(x)+0.5-at, sigma) * share(float64(y)-0.5-row, float64(y)+0.5-row, sigma)
				}
				worst, peak = math.Max(worst, math.Abs(float64(image[y][x])-want)), math.Max(peak, want)
			}
		}
		t.Logf("FWHM %v km/s: %.1e of the peak", fwhm, worst/peak)
		require.Less(t, worst/peak, 1e-5, "FWHM %v", fwhm)
	}
}

// Voxels hold the light between two wavelengths and two trace rows: against
// Gauss's rule of 8 x 8 points over each voxel in (x, y), its edges found by
// bisection of the design's equations. Required: 1e-4 of the peak.
func TestVoxelsAreCellIntegrals(t *testing.T) {
	for _, name := range testProfiles() {
		o := bentOptics(t, name)
		v := o.newVoxelizer(o.rows, o.geometry.XCenterPx)
		worst, peak := 0.0, 0.0
		for _, spot := range spots(o) {
			u, w, nm := int(spot[0]), int(spot[1]), spot[2]
			column, row, _ := o.field.mirror(u, w)
			e := []emitter{{image: oneMirror{float64(column), float64(row)}, lines: []emission{{nm: nm, photons: 1000}}}}
			s, light := collected(o, e, func(float64) float64 { return 1 }, u, u)
			got := v.draw(s, light, o.geometry.across(float64(u)))
			x0, y0 := landing(o.geometry, u, w, nm)
			for y := max(int(y0)-6, 0); y <= min(int(y0)+6, o.rows-1); y++ {
				for i := range got[y] {
					if math.Abs(o.profile.Grid.WavelengthNM(float64(i))-nm) > 3.5 {
						continue
					}
					want := 1000 * cellIntegral(o, float64(u), y, i, x0, y0)
					worst, peak = math.Max(worst, math.Abs(got[y][i]-want)), math.Max(peak, want)
				}
			}
		}
		t.Logf("%s: worst error %.1e of the peak", name, worst/peak)
		require.Less(t, worst/peak, 2e-5)
	}
}

// cellIntegral integrates the spot at (x0, y0) over voxel (y, i) of an element
// whose middle is u.
func cellIntegral(o *optics, u float64, y, i int, x0, y0 float64) float64 {
	g := o.geometry
	// Gauss-Legendre, 8 points (Abramowitz & Stegun, table 25.4).
	nodes := []float64{-0.960289856497536, -0.796666477413627, -0.525532409916329, -0.183434642495650, 0.183434642495650, 0.525532409916329, 0.796666477413627, 0.960289856497536}
	parts := []float64{0.101228536290376, 0.222381034453374, 0.313706645877887, 0.362683783378362, 0.362683783378362, 0.313706645877887, 0.222381034453374, 0.101228536290376}
	trace := func(x float64) float64 {
		return g.TraceTilt*(x-g.XCenterPx) + g.TraceCurvePerPx*(x-g.XCenterPx)*(x-g.XCenterPx)
	}
	sigma, sum := g.LSFFWHMPx/2.3548200450309493, 0.0
	for k, node := range nodes {
		eta := float64(y) + node/2
		edge := func(side float64) float64 {
			l := o.profile.Grid.FirstNM + (float64(i)+side)*o.profile.Grid.StepNM - g.CenterNM
			px := g.XCenterPx + g.UStepPx*(u-g.UMiddle) + g.DispersionPxPerNM[0]*l + g.DispersionPxPerNM[1]*l*l + g.DispersionPxPerNM[2]*l*l*l
			low, high := -200.0, 400.0
			for range 70 {
				x := (low + high) / 2
				q := eta + trace(x) - g.YCenterPx
				if x-g.SlitTilt*q-g.SmilePerPx*q*q < px {
					low = x
				} else {
					high = x
				}
			}
			return low
		}
		from, to := edge(-0.5), edge(0.5)
		for m, inner := range nodes {
			x := (from+to)/2 + inner*(to-from)/2
			row := eta + trace(x)
			sum += parts[k] / 2 * parts[m] * math.Abs(to-from) / 2 * bell(x-x0, sigma) * bell(row-y0, sigma)
		}
	}
	return sum
}

// The light that pixels and voxels hold of the same element is the same: an
// isolated line, and a continuum within the grid. Required: 1e-6.
func TestFluxOfPixelsAndVoxels(t *testing.T) {
	for _, name := range testProfiles() {
		o := bentOptics(t, name)
		g := o.geometry
		v := o.newVoxelizer(o.rows, g.XCenterPx)
		e := o.seq.Elements[o.seq.ElementColumns()[4]]
		lines := emitter{image: uniformImage(1), lines: []emission{{nm: g.CenterNM - 3.1, photons: 100}, {nm: g.CenterNM + 4.4, photons: 50, fwhmKmS: 90}}}
		hump := emitter{image: uniformImage(1), band: o.newBand(func(nm float64) float64 {
			z := (nm - g.CenterNM) / 2.5
			return math.Exp(-0.5 * z * z)
		}, func(float64) float64 { return 1 })}
		for _, source := range []emitter{lines, hump} {
			s, light := collected(o, []emitter{source}, func(float64) float64 { return 1 }, e.First, e.Last)
			pixels, voxels, scratch := 0.0, 0.0, make([]float64, o.axis.n)
			row := make([]float32, o.columns)
			for k := range s.rows {
				o.drawRow(row, &s.rows[k], light, o.spread.pixel, scratch)
				for _, x := range row {
					pixels += float64(x)
				}
			}
			for _, row := range v.draw(s, light, g.across(float64(e.First+e.Last)/2)) {
				for _, x := range row {
					voxels += x
				}
			}
			t.Logf("%s: pixels %.8g voxels %.8g, ratio - 1 = %.1e", name, pixels, voxels, pixels/voxels-1)
			require.Greater(t, voxels, 100.0)
			require.InDelta(t, 1, pixels/voxels, 1e-6)
		}
	}
}
