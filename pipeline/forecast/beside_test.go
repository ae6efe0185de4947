package forecast

import (
	"context"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// besideLight wants the band and the line of a nebula at a place of it, and a star's band.
func besideLight(t *testing.T) (*Light, Candidate) {
	sky, err := scene.Load("demo")
	require.NoError(t, err)
	east, north, radius, nm, star := 2.0, 9.5, 1.5, 500.824, 3
	l := newTestLight(t, "optical", "demo", *sky, []sequence.Wanted{
		{Name: "band", EastArcsec: &east, NorthArcsec: &north, RadiusArcsec: &radius, BandNM: []float64{600, 606}},
		{Name: "line", EastArcsec: &east, NorthArcsec: &north, RadiusArcsec: &radius, LineNM: &nm},
		{Name: "star", Source: &star, BandNM: []float64{600, 606}},
	}, nil)
	return l, Candidate{Family: "m-sequence", V: 127, N: 111, Dark: 16, ElementMirrors: 2, DwellSeconds: 90, Cycles: 1}
}

// The sky is wanted of no measurement: what a band at a place wants and the sky are all light
// there, where no other source is left out.
func TestSkyIsNotWanted(t *testing.T) {
	l, c := besideLight(t)
	voxels, err := l.Voxels(c, 0)
	require.NoError(t, err)
	require.NotEmpty(t, voxels)
	for _, v := range voxels {
		require.Positive(t, v.Sky)
		require.Less(t, v.Wanted, v.Light)
		require.InEpsilon(t, v.Light, v.Wanted+v.Sky, 1e-9)
	}
}

// Beside a line lie the same cells at other wavelengths with next to nothing of the line;
// about a star lie other cells at the same wavelengths. Their light is that of Voxels.
func TestBeside(t *testing.T) {
	l, c := besideLight(t)
	_, all, err := l.Taken(context.Background(), c, 1, nil)
	require.NoError(t, err)
	type place struct{ element, row, channel int }
	for i, name := range []string{"band", "line", "star"} {
		beside, err := l.Beside(context.Background(), c, i)
		require.NoError(t, err)
		require.NotEmpty(t, beside, name)
		in := map[place]bool{}
		cells := map[[2]int]bool{}
		most, ownWanted, ownUnwanted := 0.0, 0.0, 0.0
		for _, v := range all[i] {
			ownWanted += v.Weight * v.Wanted
			ownUnwanted += v.Weight * (v.Light - v.Wanted)
			in[place{v.Element, v.Row, v.Channel}] = true
			cells[[2]int{v.Element, v.Row}] = true
			most = max(most, v.Wanted)
		}
		wanted, unwanted := 0.0, 0.0
		for _, v := range beside {
			require.Positive(t, v.Weight)
			require.False(t, in[place{v.Element, v.Row, v.Channel}], "%s: %+v", name, v)
			require.Equal(t, name == "line", cells[[2]int{v.Element, v.Row}], name)
			if name == "line" {
				require.Less(t, v.Wanted, 0.06*most, name)
			}
			wanted += v.Weight * v.Wanted
			unwanted += v.Weight * (v.Light - v.Wanted)
		}
		require.Positive(t, unwanted)
		if name != "band" { // the nebula fills the ring about its place
			require.Less(t, wanted/unwanted, 0.2*ownWanted/ownUnwanted, name)
		}
	}
	_, err = l.Beside(context.Background(), c, 3)
	require.ErrorContains(t, err, "there is no measurement 3")
}

// Frames of half the cycles are as noisy as a plan of half the cycles, but for what is taken
// off all frames.
func TestTakenAsPlanned(t *testing.T) {
	l, c := besideLight(t)
	planned, err := l.Planned(context.Background(), c)
	require.NoError(t, err)
	of, err := l.Of(context.Background(), c)
	require.NoError(t, err)
	require.Equal(t, of.Wanted, planned)
	c.Cycles = 2
	taken, _, err := l.Taken(context.Background(), c, 1, nil)
	require.NoError(t, err)
	for i, m := range taken {
		require.InEpsilon(t, planned[i].Sigma, m.Sigma, 2e-3, m.Name)
		require.InEpsilon(t, planned[i].Signal, m.Signal, 1e-9, m.Name)
	}
	_, _, err = l.Taken(context.Background(), c, 0, nil)
	require.ErrorContains(t, err, "are no frames")
}
