package instrument

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// place maps a point of an element and a wavelength to the detector by the
// equations of the package's documentation, in this test only; y is solved by
// iteration, which contracts by the slit's tilt times the trace's, about 1e-4.
func place(p *Profile, uOffset, wOffset, wavelengthNM float64) (x, y float64) {
	s := p.Spectrograph
	l := wavelengthNM - s.CenterNM
	d := s.DispersionPxPerNM
	y = s.YCenterPx + s.WStepPx*wOffset
	for range 20 {
		q := y - s.YCenterPx
		x = s.XCenterPx + s.UStepPx*uOffset + d[0]*l + d[1]*l*l + d[2]*l*l*l + s.SlitTilt*q + s.SmilePerPx*q*q
		y = s.YCenterPx + s.WStepPx*wOffset + s.TraceTilt*(x-s.XCenterPx) + s.TraceCurvePerPx*(x-s.XCenterPx)*(x-s.XCenterPx)
	}
	return x, y
}

// litRows is the range of w, from the middle, of the mirrors at a distance from
// the middle of u, found by counting mirrors.
func litRows(p *Profile, uOffset float64) (first, last float64) {
	first, last = math.Inf(1), math.Inf(-1)
	for column := range p.DMD.Columns {
		for row := range p.DMD.Rows {
			u, w := float64(column), float64(row)
			if p.DMD.Mounting == Diagonal {
				u, w = float64(column+row), float64(row-column)
			}
			if math.Abs(u-p.UCenter()-uOffset) < 1 {
				first, last = min(first, w-p.WCenter()), max(last, w-p.WCenter())
			}
		}
	}
	return first, last
}

// TestEmbeddedGeometry: every element of the plans that the demo and the tests
// use sees the whole band, with 4 px to spare for the interpolation and 3 widths
// of the line spread, and rows at both ends of the slit stay dark.
func TestEmbeddedGeometry(t *testing.T) {
	for _, c := range []struct {
		name              string
		n, elementMirrors int
	}{
		{"optical", 111, 2}, // the demo: v = 127, g = 16
		{"infrared", 111, 2},
		{"infrared", 47, 4}, // v = 63, g = 16
	} {
		p, err := Load(c.name)
		require.NoError(t, err)
		first, last := p.URange()
		require.LessOrEqual(t, c.n*c.elementMirrors, last-first+1, "the strips fit the device")
		sigma := p.Spectrograph.LSFFWHMPx / (2 * math.Sqrt(2*math.Ln2))
		left, right, bottom, top := math.Inf(1), math.Inf(-1), math.Inf(1), math.Inf(-1)
		widest, narrowest := 0.0, math.Inf(1)
		for _, j := range []int{0, c.n / 4, c.n / 2, 3 * c.n / 4, c.n - 1} {
			uOffset := (float64(j) - float64(c.n-1)/2) * float64(c.elementMirrors)
			w0, w1 := litRows(p, uOffset)
			require.Less(t, w0, w1, "element %d has mirrors", j)
			for _, wOffset := range []float64{w0, 0, w1} {
				previous := math.NaN()
				for i := range p.Grid.Count + 1 { // the edges of the voxels
					x, y := place(p, uOffset, wOffset, p.Grid.WavelengthNM(float64(i)-0.5))
					left, right, bottom, top = min(left, x), max(right, x), min(bottom, y), max(top, y)
					if i > 0 {
						widest, narrowest = max(widest, x-previous), min(narrowest, x-previous)
					}
					previous = x
				}
			}
		}
		columns, rows := float64(p.Detector.Columns), float64(p.Detector.Rows)
		t.Logf("%s n=%d em=%d: x %.1f to %.1f of %v, y %.1f to %.1f of %v, voxels %.3f to %.3f px, FWHM %.1f px", c.name, c.n, c.elementMirrors,
			left, right, columns, bottom, top, rows, narrowest, widest, p.Spectrograph.LSFFWHMPx)
		require.Greater(t, left, -0.5+3*sigma, c.name)
		require.Less(t, right, columns-0.5-3*sigma, c.name)
		require.Greater(t, left, 4.0, c.name)
		require.Less(t, right, columns-5, c.name)
		require.Greater(t, bottom, 1.0, "%s: no dark row below the slit", c.name)
		require.Less(t, top, rows-2, "%s: no dark row above the slit", c.name)
		require.GreaterOrEqual(t, p.Spectrograph.LSFFWHMPx, 3.0)
		require.InDelta(t, 1, narrowest, 0.05, "voxels are about 1 px")
		require.InDelta(t, 1, widest, 0.05, "voxels are about 1 px")
	}
}

// TestEmbeddedTrace: a spectrum leaves its row by no more than 8 rows, but by
// enough to try a reduction, found by walking along the detector.
func TestEmbeddedTrace(t *testing.T) {
	for _, name := range Names() {
		p, err := Load(name)
		require.NoError(t, err)
		least, most := math.Inf(1), math.Inf(-1)
		for x := range p.Detector.Columns {
			d := float64(x) - p.Spectrograph.XCenterPx
			shift := p.Spectrograph.TraceTilt*d + p.Spectrograph.TraceCurvePerPx*d*d
			least, most = min(least, shift), max(most, shift)
		}
		t.Logf("%s: %.2f rows end to end", name, most-least)
		require.LessOrEqual(t, most-least, 8.0, name)
		require.GreaterOrEqual(t, most-least, 1.0, name)
	}
}

// TestEmbeddedScale: a mirror's side on the sky is 206264.8 arcsec times its
// pitch over the focal length (geometry; 206264.8 arcsec are a radian).
func TestEmbeddedScale(t *testing.T) {
	for _, name := range Names() {
		p, err := Load(name)
		require.NoError(t, err)
		focal := p.Telescope.DiameterM * p.Spectrograph.FNumber
		require.InEpsilon(t, 206264.8*p.DMD.PitchUM*1e-6/focal, p.DMD.ArcsecPerMirror, 1e-3, name)
	}
}

// skyElectrons is what a pixel of a half-open mask of n elements gathers from a
// sky of constant brightness: the photons of magnitude 0 (AB, 3631 Jy) are
// 1.095974e8 per s, m2 and nm at 500 nm and go as 1/wavelength; the value was
// computed with astropy 5.2.1 from h = 6.62607015e-34 J s.
func skyElectrons(p *Profile, abPerArcsec2 float64, n, elementMirrors int, seconds float64) float64 {
	middle := p.Grid.WavelengthNM(float64(p.Grid.Count) / 2)
	photons := 1.095974e8 * 500 / middle * math.Pow(10, -0.4*abPerArcsec2)
	area := p.ArcsecPerU() * float64(elementMirrors) * p.ArcsecPerU() / p.Spectrograph.WStepPx
	return photons * p.CollectingAreaM2() * p.Throughput(middle) * area * p.Grid.StepNM * float64(n) / 2 * seconds
}

// TestEmbeddedExposure: on a dark sky (AB magnitude per square arc second 21 in
// the visible, 18 between the infrared lines: common practice, no source) an
// exposure of a minute or two is limited by photons, not by the read noise in
// the optical, comparable to it in the infrared, and far from saturation.
func TestEmbeddedExposure(t *testing.T) {
	for _, c := range []struct {
		name            string
		sky, seconds    float64
		leastOverReads  float64
		mostOfSaturated float64
	}{
		{"optical", 21, 90, 8, 0.01},
		{"infrared", 18, 60, 1, 0.02},
	} {
		p, err := Load(c.name)
		require.NoError(t, err)
		electrons := skyElectrons(p, c.sky, 111, 2, c.seconds)
		a := p.Detector.Amplifiers[0]
		full := (p.Detector.SaturationADU - a.BiasADU) * a.GainEPerADU
		t.Logf("%s: %.0f e of sky a pixel in %v s, read noise squared %.0f e2, saturation %.0f e", c.name, electrons, c.seconds, a.ReadNoiseE*a.ReadNoiseE, full)
		require.Greater(t, electrons, c.leastOverReads*a.ReadNoiseE*a.ReadNoiseE, c.name)
		require.Less(t, electrons, c.mostOfSaturated*full, c.name)
	}
}
