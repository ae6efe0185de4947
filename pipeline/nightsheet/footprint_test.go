package nightsheet

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/plan"
	"mirrorloom/pipeline/sequence"
)

func built(t *testing.T, target, profile string, change func(*sequence.Target)) *sequence.Sequence {
	t.Helper()
	p, err := instrument.Load(profile)
	require.NoError(t, err)
	g, err := sequence.LoadTarget(target)
	require.NoError(t, err)
	if change != nil {
		change(g)
	}
	s, _, err := plan.Build(context.Background(), g, p)
	require.NoError(t, err)
	return s
}

func area(p []Offset) float64 {
	sum := 0.0
	for i, b := range p {
		a := p[(i+len(p)-1)%len(p)]
		sum += a[0]*b[1] - a[1]*b[0]
	}
	return math.Abs(sum) / 2
}

// Corners by the WCS of the cube: CD1_1 = -c1 cos t, CD1_2 = c2 sin t, CD2_1 = c1 sin t,
// CD2_2 = c2 cos t (FITS WCS papers I and II: east and north of pixel offsets), t the position
// angle. 222 mirrors of 0.2826 arcsec and all 160 rows.
func TestFootprintIsTheCubes(t *testing.T) {
	for _, deg := range []float64{0, 30, -125} {
		s := built(t, "demo", "optical", func(g *sequence.Target) { g.RotangDeg = deg })
		f := footprintOf(s)
		require.Len(t, f.Outline, 4)
		a := s.Profile.DMD.ArcsecPerMirror
		sin, cos := math.Sincos(deg * math.Pi / 180)
		for _, o := range f.Outline {
			found := false
			for _, x := range []float64{-111, 111} {
				for _, y := range []float64{-80, 80} {
					east, north := -a*x*cos+a*y*sin, a*x*sin+a*y*cos
					found = found || math.Hypot(o[0]-east, o[1]-north) < 0.002
				}
			}
			require.True(t, found, "%v at %v", o, deg)
		}
		require.Len(t, f.Elements, 12) // 0, 10 ... 110
		require.Equal(t, 110, f.Elements[11].Element)
	}
	// At the position angle 0 element 0 lies in the east.
	f := footprintOf(built(t, "demo", "optical", nil))
	require.Greater(t, f.Elements[0].Ends[0][0], 0.0)
}

// A diagonal device cuts corners: no more than the strip's rectangle, and the closed rows lie
// within the outline. With all rows closed but some the rest adds up.
func TestFootprintOfADiamond(t *testing.T) {
	s := built(t, "demo-infrared", "infrared", nil)
	f := footprintOf(s)
	require.Greater(t, len(f.Outline), 4)
	whole, closed := area(f.Outline), 0.0
	for _, p := range f.Patches {
		require.Equal(t, sequence.UseClosed, p.Use)
		closed += area(p.Outline)
	}
	a := s.Profile.ArcsecPerU()
	require.InEpsilon(t, 134*169*a*a, whole-closed, 2e-3) // 67 elements of two, 169 rows
}

// Rows of one element are its own; sentinels are all elements'.
func TestPatches(t *testing.T) {
	f := footprintOf(built(t, "testdata/crowded.yaml", "optical", nil))
	a := 0.2826 * 0.2826
	uses := map[string][]float64{}
	for _, p := range f.Patches {
		uses[p.Use] = append(uses[p.Use], area(p.Outline)/a)
	}
	require.InDeltaSlice(t, []float64{11 * 234}, uses[sequence.UseSentinel], 1)
	require.InDeltaSlice(t, []float64{5 * 234, 31 * 2, 21 * 2}, uses[sequence.UseClosed], 1)
	require.Len(t, f.Marks, 30)
}
