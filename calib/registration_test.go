package calib

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
	"pgregory.net/rapid"
)

// truthMap is a device of 0.3 arcsec a mirror, turned by an angle, of a parity.
func truthMap(rotangDeg, parity float64) PlaneMap {
	sin, cos := math.Sincos(rotangDeg * math.Pi / 180)
	return PlaneMap{East: [3]float64{12, -parity * 0.3 * cos, 0.3 * sin}, North: [3]float64{-5, parity * 0.3 * sin, 0.3 * cos}}
}

// matched are stars all over the device, measured with errors of sigma arcsec.
func matched(rng *rand.Rand, m PlaneMap, n int, sigma float64) []StarMatch {
	var stars []StarMatch
	for range n {
		u, w := 1000*rng.Float64(), 700*rng.Float64()
		east, north := m.At(u, w)
		stars = append(stars, StarMatch{U: u, W: w, East: east + sigma*rng.NormFloat64(), North: north + sigma*rng.NormFloat64(), Sigma: max(sigma, 1e-6)})
	}
	return stars
}

// Without noise a fit of either kind is the truth, at every angle and parity.
func TestPlaneMapExact(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		angle := rapid.Float64Range(-179, 179).Draw(t, "rotang")
		parity := rapid.SampledFrom([]float64{1, -1}).Draw(t, "parity")
		kind := rapid.SampledFrom([]MapKind{Similarity, Affine}).Draw(t, "kind")
		truth := truthMap(angle, parity)
		stars := matched(rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1)), truth, 6, 0)
		fit, err := FitPlaneMap(stars, MapRule{Kind: kind, Sigmas: 4})
		require.NoError(t, err)
		require.Equal(t, 6, fit.Used)
		for _, s := range stars {
			east, north := fit.Map.At(s.U, s.W)
			require.InDelta(t, s.East, east, 1e-7)
			require.InDelta(t, s.North, north, 1e-7)
			u, w := fit.Map.Invert(east, north)
			require.InDelta(t, s.U, u, 1e-6)
			require.InDelta(t, s.W, w, 1e-6)
		}
		shape := fit.Map.Shape()
		require.InDelta(t, angle, shape.RotangDeg, 1e-6)
		require.InDelta(t, 0.3, shape.ScaleU, 1e-8)
		require.InDelta(t, 0.3, shape.ScaleW, 1e-8)
		require.InDelta(t, 0, shape.SkewDeg, 1e-5)
		require.Equal(t, int(parity), shape.Parity)
	})
}

// The words of the cube's WCS: at ROTANG 0, parity 1, east is towards -u and north is +w.
func TestPlaneMapWords(t *testing.T) {
	require.Equal(t, Shape{ScaleU: 1, ScaleW: 2, Parity: 1}, PlaneMap{East: [3]float64{0, -1, 0}, North: [3]float64{0, 0, 2}}.Shape())
	s := PlaneMap{East: [3]float64{0, 1, 0}, North: [3]float64{0, 0, 2}}.Shape()
	require.Equal(t, -1, s.Parity)
	require.Equal(t, 0.0, s.SkewDeg)
	east := PlaneMap{East: [3]float64{0, 0, 1}, North: [3]float64{0, 1, 0}}.Shape() // +w points east: position angle 90
	require.InDelta(t, 90, east.RotangDeg, 1e-12)
	require.Equal(t, 1, east.Parity)
}

// Three of ten matches are wrong by many arc seconds: they are found and leave no trace;
// errors of the parameters hold. 500 fields.
func TestPlaneMapRobust(t *testing.T) {
	const fields = 500
	for kind, name := range map[MapKind]string{Similarity: "similarity", Affine: "affine"} {
		rng := rand.New(rand.NewPCG(4, uint64(kind)))
		var pulls [6]float64
		wrong, lost, chi2 := 0, 0, 0.0
		for range fields {
			truth := truthMap(360*rng.Float64(), 1)
			stars := matched(rng, truth, 10, 0.05)
			for i := range 3 {
				stars[i].East += 2 + 8*rng.Float64()
				stars[i].North -= 8 * rng.Float64()
			}
			fit, err := FitPlaneMap(stars, MapRule{Kind: kind, Sigmas: 4})
			require.NoError(t, err)
			for i, r := range fit.Residuals {
				if r.Used && i < 3 {
					wrong++
				}
				if !r.Used && i >= 3 {
					lost++
				}
			}
			chi2 += fit.Chi2 / fields
			of := func(k int, got, want float64) {
				pulls[k] += (got - want) * (got - want) / fit.Covariance.At(k, k) / fields
			}
			if kind == Affine {
				for k := range 3 {
					of(k, fit.Map.East[k], truth.East[k])
					of(k+3, fit.Map.North[k], truth.North[k])
				}
			} else {
				of(0, fit.Map.East[0], truth.East[0])
				of(1, fit.Map.North[0], truth.North[0])
				of(2, fit.Map.North[2], truth.North[2])
				of(3, fit.Map.East[2], truth.East[2])
			}
		}
		t.Logf("%s: wrong ones used %d, right ones lost %d, chi2 %.3f, squared pulls %.3f", name, wrong, lost, chi2, pulls)
		require.Zero(t, wrong)
		require.Less(t, lost, fields*7/100) // a few of affine maps through three stars close by
		require.InDelta(t, 1, chi2, 0.1)
		for k := range (MapRule{Kind: kind}).parameters() {
			// A covariance made larger with chi2 above 1 only makes pulls below 1.
			require.InDelta(t, 0.85, pulls[k], max(0.2, 5*math.Sqrt(2.0/fields)))
		}
	}
}

func TestPlaneMapRefused(t *testing.T) {
	one := StarMatch{U: 1, W: 2, Sigma: 1}
	_, err := FitPlaneMap([]StarMatch{one, one}, MapRule{Kind: Similarity, Sigmas: 4})
	require.ErrorContains(t, err, "give at least 3")
	_, err = FitPlaneMap([]StarMatch{one, one, one}, MapRule{Kind: Similarity, Sigmas: 4})
	require.ErrorContains(t, err, "lie on one place or one line")
	line := []StarMatch{{0, 0, 0, 0, 1}, {1, 1, 1, 1, 1}, {2, 2, 2, 2, 1}, {3, 3, 3, 3, 1}}
	_, err = FitPlaneMap(line, MapRule{Kind: Affine, Sigmas: 4})
	require.ErrorContains(t, err, "lie on one place or one line")
	_, err = FitPlaneMap([]StarMatch{one, {Sigma: 1, U: math.NaN()}}, MapRule{Kind: Pointing, Sigmas: 4})
	require.ErrorContains(t, err, "star 2 has no finite place")
	_, err = FitPlaneMap([]StarMatch{one, {}}, MapRule{Kind: Similarity, Sigmas: 4, Parity: 1})
	require.ErrorContains(t, err, "star 2")
	u, _ := PlaneMap{}.Invert(1, 1)
	require.True(t, math.IsNaN(u))
}

// A known map that is off by a shift and a turn: one star gives the shift, three both, in
// spite of a wrong fourth; two stars give a similarity of known parity.
func TestPlaneMapPointing(t *testing.T) {
	const turn = 1e-5
	var stars []StarMatch
	for _, at := range [][2]float64{{-60, 10}, {40, 50}, {20, -70}, {5, 5}} {
		stars = append(stars, StarMatch{U: at[0], W: at[1], East: at[0] + 1.5 + turn*at[1], North: at[1] - 0.7 - turn*at[0], Sigma: 0.01})
	}
	fit, err := FitPlaneMap(stars[3:], MapRule{Kind: Shift, Sigmas: 4})
	require.NoError(t, err)
	require.InDelta(t, 1.5, fit.Map.East[0], 1e-4)
	require.True(t, math.IsNaN(fit.Chi2))
	require.InDelta(t, 1e-4, fit.Covariance.At(0, 0), 1e-12)
	stars[3].East += 20
	fit, err = FitPlaneMap(stars, MapRule{Kind: Pointing, Sigmas: 4})
	require.NoError(t, err)
	require.Equal(t, 3, fit.Used)
	require.False(t, fit.Residuals[3].Used)
	require.InDelta(t, 20, fit.Residuals[3].East, 1e-6)
	require.InDelta(t, 1.5, fit.Map.East[0], 1e-9)
	require.InDelta(t, -0.7, fit.Map.North[0], 1e-9)
	require.InDelta(t, turn*180/math.Pi, fit.Map.Shape().RotangDeg, 1e-12) // north has turned to the east
	truth := truthMap(100, -1)
	fit, err = FitPlaneMap(matched(rand.New(rand.NewPCG(1, 1)), truth, 2, 0), MapRule{Kind: Similarity, Sigmas: 4, Parity: -1})
	require.NoError(t, err)
	require.InDelta(t, truth.East[1], fit.Map.East[1], 1e-9)
}

// numpy's least squares on the same stars.
func TestCrosscheckPlaneMap(t *testing.T) {
	type fitted struct{ East, North [3]float64 }
	var cases []map[string]any
	var fits []*MapFit
	for _, kind := range []MapKind{Similarity, Affine} {
		rng := rand.New(rand.NewPCG(8, uint64(kind)))
		stars := matched(rng, truthMap(35, 1), 9, 0.1)
		for i := range stars {
			stars[i].Sigma *= 1 + float64(i%3)
		}
		fit, err := FitPlaneMap(stars, MapRule{Kind: kind, Sigmas: 1e6})
		require.NoError(t, err)
		fits = append(fits, fit)
		cases = append(cases, map[string]any{"affine": kind == Affine, "stars": stars})
	}
	text, err := json.Marshal(cases)
	require.NoError(t, err)
	path := filepath.Join(t.TempDir(), "stars.json")
	require.NoError(t, os.WriteFile(path, text, 0o644))
	var got []fitted
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "calib_registration.py", path)), &got))
	require.Len(t, got, 2)
	for i, g := range got {
		for k := range 3 {
			require.InDelta(t, g.East[k], fits[i].Map.East[k], 1e-9)
			require.InDelta(t, g.North[k], fits[i].Map.North[k], 1e-9)
		}
	}
}
