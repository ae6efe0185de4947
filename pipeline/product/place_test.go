package product

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/calib/physics"
)

// Offset is the matrix CD of the header, which wcslib is asked about, times the offset
// from the reference pixel; Place inverts it.
func TestPlace(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := Schema{
			Elements: 25, Rows: 40, RowCenter: 18.5, C1Deg: 2.5e-4, C2Deg: 7e-5, RADeg: 30, DecDeg: -50,
			RotangDeg: rapid.Float64Range(-180, 180).Draw(t, "rotang"), Parity: rapid.SampledFrom([]int{1, -1}).Draw(t, "parity"),
		}
		cd := map[string]float64{}
		for _, c := range s.wcs() {
			if v, ok := c.value.(float64); ok {
				cd[c.key] = v
			}
		}
		j, y := rapid.Float64Range(-10, 40).Draw(t, "j"), rapid.Float64Range(-10, 60).Draw(t, "y")
		dx, dy := j+1-cd["CRPIX1"], y+1-cd["CRPIX2"]
		east, north := s.Offset(j, y)
		require.InDelta(t, 3600*(cd["CD1_1"]*dx+cd["CD1_2"]*dy), east, 1e-9)
		require.InDelta(t, 3600*(cd["CD2_1"]*dx+cd["CD2_2"]*dy), north, 1e-9)
		j2, y2 := s.Place(east, north)
		require.InDelta(t, j, j2, 1e-9)
		require.InDelta(t, y, y2, 1e-9)
	})
}

// A cube that is off by a shift and a turn, corrected by what a fit of stars says, puts
// every place where it is.
func TestRepointed(t *testing.T) {
	truth := Schema{Elements: 25, Rows: 40, RowCenter: 18.5, C1Deg: 2.5e-4, C2Deg: 7e-5, RADeg: 30, DecDeg: -50, RotangDeg: 77.3, Parity: -1}
	off := truth
	off.RADeg, off.DecDeg = physics.FromGnomonic(3, -2, truth.RADeg, truth.DecDeg)
	off.RotangDeg -= 0.2
	const turn = 0.2
	// By the definition: a place at (e, n) of the wrong cube is truly at ...
	centreEast, centreNorth := physics.Gnomonic(truth.RADeg, truth.DecDeg, off.RADeg, off.DecDeg)
	fixed := off.Repointed(centreEast, centreNorth, turn)
	for _, at := range [][2]float64{{0, 0}, {24, 39}, {3, 30}} {
		e, n := off.Offset(at[0], at[1])
		angle := turn * math.Pi / 180
		ra, dec := physics.FromGnomonic(e+centreEast+angle*n, n+centreNorth-angle*e, off.RADeg, off.DecDeg)
		gotRA, gotDec := fixed.Sky(at[0], at[1])
		trueRA, trueDec := truth.Sky(at[0], at[1])
		for _, want := range [][2]float64{{ra, dec}, {trueRA, trueDec}} {
			require.InDelta(t, want[0], gotRA, 1e-3/3600)
			require.InDelta(t, want[1], gotDec, 1e-3/3600)
		}
	}
}
