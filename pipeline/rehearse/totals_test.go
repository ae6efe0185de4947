package rehearse

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
)

// ab550 is the photon flux of AB magnitude 0 at 550 nm, in photons/s/m^2/nm: 3631
// Jy x 1e-26 / (h x 550), computed with astropy 5.2.1 (spectral_density).
const ab550 = 9.963399e7

// flatProfile is a small profile whose telescope passes 0.7 and whose
// spectrograph 0.3 of the light at all wavelengths of the band.
func flatProfile(t testing.TB, name string) *instrument.Profile {
	p := smallProfile(t, name)
	p.Telescope.Throughput = instrument.Curve{{WavelengthNM: 300, Fraction: 0.7}, {WavelengthNM: 2500, Fraction: 0.7}}
	for i := range p.Spectrograph.Throughput {
		p.Spectrograph.Throughput[i].Fraction = 0.3
	}
	require.NoError(t, p.Validate())
	return p
}

// total sums SIGNAL less SKY over the whole cube.
func total(t *testing.T, dir string) float64 {
	signal, _, _, _ := truth(t, dir, "SIGNAL")
	sky, _, _, _ := truth(t, dir, "SKY")
	sum := 0.0
	for i := range signal {
		sum += float64(signal[i]) - float64(sky[i])
	}
	return sum
}

// Totals of truth by hand, each within 1 %:
//
//	electrons = photons/s/m^2 x collecting area x throughput x seconds
//
// area pi/4 D^2 (1 - obscured); a continuum of one AB magnitude has
// ab550 10^(-0.4 m) 550/L photons/s/m^2/nm, whose integral over the grid is
// ab550 10^(-0.4 m) 550 ln(L2/L1); a black body is scaled to that at at_nm; a
// line of F W/m^2 has F L/(h c) photons/s/m^2.
func TestTotalsByHand(t *testing.T) {
	const h, c, k = 6.62607015e-34, 299792458.0, 1.380649e-23
	for _, name := range testProfiles() {
		p := flatProfile(t, name)
		seq := planned(t, p, smallTarget(p))
		tel, grid := p.Telescope, p.Grid
		area := math.Pi / 4 * tel.DiameterM * tel.DiameterM * (1 - tel.ObscuredFraction)
		scale := area * 0.7 * 0.3 * 60
		low, high := grid.FirstNM-grid.StepNM/2, grid.FirstNM+(float64(grid.Count)-0.5)*grid.StepNM
		nm := p.Spectrograph.CenterNM
		flat := ab550 * math.Pow(10, -0.4*17) * 550 * math.Log(high/low)
		planck := func(l float64) float64 { return math.Pow(l, -4) / math.Expm1(h*c/(l*1e-9*k*4000)) }
		body := 0.0
		for i := range grid.Count {
			l := grid.FirstNM + float64(i)*grid.StepNM
			body += ab550 * math.Pow(10, -0.4*17) * 550 / (nm + 5) * planck(l) / planck(nm+5) * grid.StepNM
		}
		line := 4e-17 * nm * 1e-9 / (h * c)
		for what, s := range map[string]struct {
			source Source
			want   float64
		}{
			"star of one AB magnitude": {Source{Kind: KindStar, ABMag: ptr(17), AtNM: nm}, flat},
			"black star":               {Source{Kind: KindStar, ABMag: ptr(17), AtNM: nm + 5, TemperatureK: 4000}, body},
			"line of a star":           {Source{Kind: KindStar, Lines: []Line{{WavelengthNM: nm, FluxWM2: 4e-17}}}, line},
			"line of a Gaussian":       {Source{Kind: KindGaussian, WidthArcsec: 0.8, Lines: []Line{{WavelengthNM: nm, FluxWM2: 4e-17, FWHMKmS: 200}}}, line},
			"line of a ring":           {Source{Kind: KindRing, RadiusArcsec: 0.7, WidthArcsec: 0.5, Lines: []Line{{WavelengthNM: nm, FluxWM2: 4e-17}}}, line},
			"line of a galaxy":         {Source{Kind: KindGalaxy, RadiusArcsec: 0.15, Lines: []Line{{WavelengthNM: nm, FluxWM2: 4e-17}}}, line},
		} {
			scene := &Scene{SeeingFWHMArcsec: 0.7, Sources: []Source{s.source}, Sky: Sky{ContinuumABArcsec2: ptr(25)}}
			dir, _ := rehearsed(t, seq, scene, Options{Perfect: true, Noiseless: true})
			got := total(t, dir) / (s.want * scale)
			t.Logf("%s, %s: %.1f e, by hand %.1f, ratio %.5f", name, what, got*s.want*scale, s.want*scale, got)
			require.InDelta(t, 1, got, 0.01, "%s, %s", name, what)
		}
	}
}

// The sky by hand, a voxel: photons/s/m^2/nm/arcsec^2 x the voxel's solid angle
// (the element's width times a row's height) x its nm; a sky line likewise,
// summed over wavelength. Voxels within the light of all mirrors, away from its
// edges.
func TestSkyByHand(t *testing.T) {
	const h, c = 6.62607015e-34, 299792458.0
	for _, name := range testProfiles() {
		p := flatProfile(t, name)
		seq := planned(t, p, smallTarget(p))
		tel, grid, nm := p.Telescope, p.Grid, p.Spectrograph.CenterNM
		scale := math.Pi / 4 * tel.DiameterM * tel.DiameterM * (1 - tel.ObscuredFraction) * 0.7 * 0.3 * 60
		// A mirror's side in the square mounting, its diagonal's half in the other.
		side := map[string]float64{"optical": p.DMD.ArcsecPerMirror, "infrared": p.DMD.ArcsecPerMirror / math.Sqrt2}[name]
		solid := 2 * side * side / p.Spectrograph.WStepPx
		scene := &Scene{SeeingFWHMArcsec: 1, Sky: Sky{ContinuumABArcsec2: ptr(20)}}
		dir, _ := rehearsed(t, seq, scene, Options{Perfect: true, Noiseless: true})
		sky, n, rows, _ := truth(t, dir, "SKY")
		l := grid.Count / 2
		at := grid.FirstNM + float64(l)*grid.StepNM
		want := ab550 * math.Pow(10, -0.4*20) * 550 / at * grid.StepNM * solid * scale
		got := float64(sky[(l*rows+rows/2)*n+n/2])
		t.Logf("%s: sky %.4f e a voxel, by hand %.4f", name, got, want)
		require.InDelta(t, 1, got/want, 0.01)

		scene.Sky = Sky{Lines: []SkyLine{{WavelengthNM: nm, FluxWM2Arcsec2: 3e-18}}}
		dir, _ = rehearsed(t, seq, scene, Options{Perfect: true, Noiseless: true})
		sky, n, rows, voxels := truth(t, dir, "SKY")
		sum := 0.0
		for l := range voxels {
			sum += float64(sky[(l*rows+rows/2)*n+n/2])
		}
		want = 3e-18 * nm * 1e-9 / (h * c) * solid * scale
		t.Logf("%s: sky line %.4f e, by hand %.4f", name, sum, want)
		require.InDelta(t, 1, sum/want, 0.01)
	}
}

// The frames hold what truth says: on a noiseless night a frame's electrons in
// excess of the bias are those of its open elements, over a line that no edge
// cuts. Required: 1e-6.
func TestFluxOfFramesIsThatOfTruth(t *testing.T) {
	for _, name := range testProfiles() {
		p := smallProfile(t, name)
		target := smallTarget(p)
		seq := planned(t, p, target)
		nm := p.Spectrograph.CenterNM
		scene := &Scene{SeeingFWHMArcsec: 1, Sources: []Source{
			{Kind: KindStar, EastArcsec: 0.4, Lines: []Line{{WavelengthNM: nm, FluxWM2: 3e-16, FWHMKmS: 80}}},
			{Kind: KindRing, RadiusArcsec: 1, WidthArcsec: 0.7, NorthArcsec: 0.3, Lines: []Line{{WavelengthNM: nm + 3, FluxWM2: 5e-16}}, Velocity: Velocity{SystemicKmS: 70, GradientKmSArcsec: 9}},
		}}
		p.Detector.DarkEPerS = 0
		dir, _ := rehearsed(t, seq, scene, Options{Perfect: true, Noiseless: true})
		signal, n, rows, voxels := truth(t, dir, "SIGNAL")
		light := make([]float64, n)
		for l := range voxels {
			for y := range rows {
				for j := range n {
					light[j] += float64(signal[(l*rows+y)*n+j])
				}
			}
		}
		worst := 0.0
		columns := seq.ElementColumns()
		for i, st := range seq.Steps {
			if st.Kind != "science" {
				continue
			}
			want, got := 0.0, 0.0
			for j, column := range columns {
				want += float64(seq.Code[i][column]) * light[j]
			}
			for _, row := range electrons(t, dir, seq, i, 0) {
				for _, e := range row {
					got += e
				}
			}
			worst = math.Max(worst, math.Abs(got/want-1))
		}
		t.Logf("%s: frames against truth %.1e", name, worst)
		require.Less(t, worst, 1e-6)
	}
}
