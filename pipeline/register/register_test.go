package register

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// Pointings are corrected to a tenth of a voxel, by one star or many, with stars in the
// list that are not there and stars that are not listed.
func TestPointing(t *testing.T) {
	for n, c := range []struct {
		listed            int
		east, north, turn float64
		within            float64 // arc seconds, at the corners
	}{{1, 1.2, -0.8, 0, 0.05}, {2, -2.5, 1.5, 0, 0.05}, {8, 3.1, 2.2, 0.4, 0.05}, {8, 0, 0, 0, 0.05}, {12, -4.4, 1, -1.5, 0.05}} {
		t.Run(fmt.Sprint(n), func(t *testing.T) {
			rng := rand.New(rand.NewPCG(1, uint64(n)))
			asked := askedSchema()
			truth := moved(asked, c.east, c.north, c.turn, 1, 1)
			k := newSky(rng, truth, 12)
			p := k.picture(rng, truth, 2)
			list := append([]Star{}, k.stars[:c.listed]...)
			if c.listed > 2 { // two that are not there
				list = append(list, Star{"gone", truth.RADeg + 0.001, truth.DecDeg + 0.0007}, Star{"far", 12, 3})
			}
			got, err := Solve(p, asked, list, "stars.csv", Rule{Pointing, 6})
			require.NoError(t, err)
			require.Less(t, apart(got.Schema, truth), c.within, "%+v", got.Report)
			r := got.Report
			require.Equal(t, c.listed, r.Used, "%+v", r)
			for i, s := range r.Stars {
				require.Equal(t, i < c.listed, s.Used, "%+v", s)
				require.Equal(t, s.Used, s.Why == "")
			}
			require.InDelta(t, c.east, r.East.Value, 0.05)
			require.InDelta(t, c.north, r.North.Value, 0.05)
			if c.listed > 2 {
				require.InDelta(t, c.turn, r.Turn.Value, 0.2)
				require.Positive(t, r.Turn.Error)
			}
			require.Less(t, r.RMSArcsec, 0.05)
		})
	}
}

// The errors of a pointing hold: pulls of 50 fields have a mean square of 1 within 5
// standard errors.
func TestPointingErrors(t *testing.T) {
	const fields = 50
	var square [3]float64
	for n := range fields {
		rng := rand.New(rand.NewPCG(2, uint64(n)))
		asked := askedSchema()
		east, north, turn := 2*rng.NormFloat64(), 2*rng.NormFloat64(), rng.NormFloat64()
		truth := moved(asked, east, north, turn, 1, 1)
		k := newSky(rng, truth, 10)
		got, err := Solve(k.picture(rng, truth, 4), asked, k.stars, "", Rule{Pointing, 9})
		require.NoError(t, err)
		for i, pull := range []float64{
			(got.Report.East.Value - east) / got.Report.East.Error, (got.Report.North.Value - north) / got.Report.North.Error,
			(got.Schema.RotangDeg - truth.RotangDeg) / got.Report.Turn.Error,
		} {
			square[i] += pull * pull / fields
		}
	}
	t.Logf("mean squares of pulls: %.2f", square)
	for _, s := range square {
		// Too small an error is a fault; the floor of the centroids makes it too large.
		require.Less(t, s, 1+5*math.Sqrt(2.0/fields))
	}
}

// A similarity is found whatever the turn, the scale within 10 %, and the parity.
func TestSimilarity(t *testing.T) {
	for n, c := range []struct {
		east, north, turn, scale float64
		parity                   int
	}{{0.5, 0.3, 0.2, 1, 1}, {-3, 5, 12, 1.04, 1}, {4, 2, -100, 0.95, -1}, {0, -6, 175, 1.08, -1}} {
		t.Run(fmt.Sprint(n), func(t *testing.T) {
			rng := rand.New(rand.NewPCG(3, uint64(n)))
			asked := askedSchema()
			truth := moved(asked, c.east, c.north, c.turn, c.scale, c.parity)
			k := newSky(rng, truth, 9)
			p := k.picture(rng, truth, 2)
			list := append(append([]Star{}, k.stars[:7]...), Star{"gone", truth.RADeg + 0.001, truth.DecDeg + 0.0007})
			got, err := Solve(p, asked, list, "", Rule{Similarity, 5})
			require.NoError(t, err)
			r := got.Report
			require.Less(t, apart(got.Schema, truth), 0.06, "%+v", r)
			require.Equal(t, truth.Parity, r.Parity)
			require.Less(t, math.Abs(r.Scale.Value-c.scale), 5*r.Scale.Error+1e-4)
			require.Less(t, math.Abs(math.Remainder(got.Schema.RotangDeg-truth.RotangDeg, 360)), 5*r.Turn.Error)
			require.Equal(t, 7, r.Used)
		})
	}
}

// astropy's fit_wcs_from_points of the same places gives the same sky.
func TestCrosscheckSimilarity(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	asked := askedSchema()
	truth := moved(asked, 3, -2, 20, 1.03, -1)
	k := newSky(rng, truth, 12)
	got, err := Solve(k.picture(rng, truth, 1), asked, k.stars, "", Rule{Similarity, 5})
	require.NoError(t, err)
	var in struct {
		X, Y, RA, Dec []float64
		Corners       [][2]float64
	}
	for i, s := range got.Report.Stars {
		if s.Used {
			in.X, in.Y = append(in.X, *s.Element), append(in.Y, *s.Row)
			in.RA, in.Dec = append(in.RA, k.stars[i].RADeg), append(in.Dec, k.stars[i].DecDeg)
		}
	}
	require.Greater(t, len(in.X), 8)
	in.Corners = [][2]float64{{0, 0}, {59, 0}, {0, 89}, {59, 89}, {29.5, 45.3}}
	text, err := json.Marshal(in)
	require.NoError(t, err)
	path := filepath.Join(t.TempDir(), "points.json")
	require.NoError(t, os.WriteFile(path, text, 0o644))
	var corners [][2]float64
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "register_points.py", path)), &corners))
	for i, c := range in.Corners {
		j, y := got.Schema.PlaceOf(corners[i][0], corners[i][1])
		// Theirs has six parameters to our four: they differ by the centroids' noise.
		require.Less(t, math.Hypot((j-c[0])*0.56, (y-c[1])*0.28), 0.03, "corner %v", c)
	}
}

func TestSolveRefuses(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 5))
	s := askedSchema()
	k := newSky(rng, s, 6)
	dark := sky{}.picture(rng, s, 2)
	_, err := Solve(dark, s, k.stars, "", Rule{Pointing, 5})
	require.ErrorContains(t, err, "no star is bright enough")
	p := k.picture(rng, s, 2)
	_, err = Solve(p, s, []Star{{"far", 1, 2}}, "", Rule{Pointing, 5})
	require.ErrorContains(t, err, "no listed star lies in the field")
	_, err = Solve(p, s, k.stars[:2], "", Rule{Similarity, 5})
	require.ErrorContains(t, err, "where a similarity takes 4")
	other := newSky(rand.New(rand.NewPCG(5, 6)), s, 1)
	_, err = Solve(p, s, other.stars, "", Rule{Pointing, 0.01})
	require.ErrorContains(t, err, "0 of the 1 listed stars")
	require.ErrorContains(t, err, "search_arcsec")
}
