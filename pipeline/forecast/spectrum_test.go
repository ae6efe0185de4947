package forecast

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// newTestLight is a light of the embedded profile and target with a sky; change edits both.
func newTestLight(t testing.TB, name, target string, sky scene.Scene, wanted []sequence.Wanted, change func(*instrument.Profile, *sequence.Target)) *Light {
	t.Helper()
	p, err := instrument.Load(name)
	require.NoError(t, err)
	g, err := sequence.LoadTarget(target)
	require.NoError(t, err)
	g.Forecast = &sequence.Forecast{
		SeeingFWHMArcsec: sky.SeeingFWHMArcsec, Sources: sky.Sources, Sky: sky.Sky, Atmosphere: sky.Atmosphere,
		Aim: sequence.AimFaintest, Wanted: wanted,
	}
	if change != nil {
		change(p, g)
	}
	l, err := New(g, p)
	require.NoError(t, err)
	return l
}

func magnitude(m float64) *float64 { return &m }

// Photons a second, m^2 and nm of AB magnitude 0 (3631 Jy), computed with astropy 5.2.1
// (units.spectral_density).
var abPhotons = map[float64]float64{
	400: 1.369967e8, 500: 1.095974e8, 550: 9.963399e7, 600: 9.133116e7, 700: 7.828385e7,
	800: 6.849837e7, 900: 6.088744e7, 1000: 5.479870e7,
}

func TestPhotonsOfMagnitudes(t *testing.T) {
	l := newTestLight(t, "optical", "demo", scene.Scene{SeeingFWHMArcsec: 1}, nil, nil)
	flat := l.photonsOf(&scene.Source{ABMag: magnitude(0), AtNM: 550})
	for nm, want := range abPhotons {
		require.InEpsilon(t, want, flat(nm), 1e-6)
		body := l.photonsOf(&scene.Source{ABMag: magnitude(20), AtNM: nm, TemperatureK: 5000})
		require.InEpsilon(t, want*1e-8, body(nm), 1e-6, "a black body is scaled where it is told")
	}
	// Photons of a black body go as L^-4/(exp(hc/LkT) - 1).
	body := l.photonsOf(&scene.Source{ABMag: magnitude(0), AtNM: 500, TemperatureK: 5000})
	const hcOverK = 1.438776877e7 // nm K, CODATA 2018
	shape := func(nm float64) float64 { return math.Pow(nm, -4) / math.Expm1(hcOverK/nm/5000) }
	require.InEpsilon(t, shape(700)/shape(500), body(700)/body(500), 1e-8)
	require.Nil(t, l.photonsOf(&scene.Source{}))
}

// All electrons of a star that a telescope of 1 m^2 and throughput 1/2 gathers between 500
// and 600 nm: 1/2 int c/L dL = c/2 ln(600/500), c = 500 x 1.095974e8 at magnitude 0.
func TestElectronsByHand(t *testing.T) {
	l := newTestLight(t, "optical", "demo", scene.Scene{SeeingFWHMArcsec: 1.2, Sources: []scene.Source{{
		Kind: scene.KindStar, ABMag: magnitude(20), AtNM: 550,
		Lines: []scene.Line{{WavelengthNM: 550, FluxWM2: 1e-17, FWHMKmS: 50}},
	}}}, nil, func(p *instrument.Profile, _ *sequence.Target) {
		p.Telescope.DiameterM, p.Telescope.ObscuredFraction = math.Sqrt(4/math.Pi), 0
		p.Telescope.Throughput = instrument.Curve{{WavelengthNM: 500, Fraction: 1}, {WavelengthNM: 600, Fraction: 1}}
		p.Spectrograph.Throughput = instrument.Curve{{WavelengthNM: 300, Fraction: 0.5}, {WavelengthNM: 1000, Fraction: 0.5}}
	})
	c := Candidate{Family: "m-sequence", V: 127, N: 111, Dark: 16, ElementMirrors: 2, DwellSeconds: 10, Cycles: 1}
	c, err := l.resolved(c)
	require.NoError(t, err)
	f := l.field(c, sight{})
	sum := func(of func(p *piece) []float64) (total float64) {
		for _, v := range of(f.pieces[0]) {
			total += v * f.pieces[0].still.step
		}
		return total
	}
	continuum := 0.5 * 500 * 1.095974e8 * 1e-8 * math.Log(600./500)
	require.InEpsilon(t, continuum, sum(func(p *piece) []float64 { return p.continuum.value }), 1e-4)
	// A line of 1e-17 W m^-2 at 550 nm: F L/(h c) = 27.6876 photons a second and m^2.
	const h, light = 6.62607015e-34, 299792458.0
	line := 0.5 * 1e-17 * 550e-9 / (h * light)
	require.InEpsilon(t, continuum+line, sum(func(p *piece) []float64 { return p.still.value }), 1e-4)
	require.InEpsilon(t, line, f.pieces[0].lines[0].electrons, 1e-9)
}

// Sums of a table by runs are those of its values one by one.
func TestTableSums(t *testing.T) {
	table := newTable(-40, 60, 0.98)
	for px, e := range map[float64]float64{-20.3: 3, 0: 1, 17.77: 2} {
		table.put(px, e)
	}
	table.finish(1.36)
	total := 0.0
	for _, v := range table.value {
		total += v * table.step
	}
	require.InEpsilon(t, 6, total, 1e-6)
	for _, px := range []float64{-60, -21, -3.2, 0, 18.1, 25, 59.9, 70, 300} {
		for _, count := range []int{1, 2, 37, 120} {
			want := 0.0
			for m := range count {
				want += table.at(px - float64(m)*0.98)
			}
			require.InDelta(t, want, table.sum(px, count), 1e-9, "%v %d", px, count)
		}
	}
}
