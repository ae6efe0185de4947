package reduce_test

import (
	"math"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib/physics"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// atAirmass has the night begin when the target, sinking, stands at an air mass.
func atAirmass(t *testing.T, f *trial.Field, airmass float64) {
	t.Helper()
	site := f.Profile.Site
	at := time.Date(2031, 2, 11, 0, 0, 0, 0, time.UTC)
	before := math.NaN()
	for range 24 * 60 {
		x := physics.TargetAirmass(f.Target.RADeg, f.Target.DecDeg, at, site.LatitudeDeg, site.LongitudeEastDeg)
		if before < airmass && x >= airmass {
			f.Target.StartUTC = at.Format(time.RFC3339)
			return
		}
		before, at = x, at.Add(time.Minute)
	}
	t.Fatalf("the target never sinks through an air mass of %g", airmass)
}

// starCentres are the centres of light, in elements and rows, of the last but one star of
// the field in each voxel of the wavelength axis, within a window around its place.
func starCentres(c *trial.Cube, signal []float32, j0, y0, half int) (x, y []float64) {
	for l := range c.Voxels {
		var sum, sx, sy, sky float64
		n := 0
		for row := y0 - half; row <= y0+half; row++ {
			for j := j0 - half; j <= j0+half; j++ {
				if abs(row-y0) == half || abs(j-j0) == half {
					sky += float64(signal[(l*c.Rows+row)*c.N+j])
					n++
				}
			}
		}
		sky /= float64(n)
		for row := y0 - half; row <= y0+half; row++ {
			for j := j0 - half; j <= j0+half; j++ {
				v := float64(signal[(l*c.Rows+row)*c.N+j]) - sky
				sum, sx, sy = sum+v, sx+v*float64(j), sy+v*float64(row)
			}
		}
		x, y = append(x, sx/sum), append(y, sy/sum)
	}
	return x, y
}

func abs(i int) int { return max(i, -i) }

// At an air mass of 1.5 refraction moves the light of stars by voxels against the
// wavelength of the guider. It is taken out: the cube is the truth's, whose stars stand
// still, centroids within a hundredth of a voxel or so, pulls normal; left in, they are
// off by far more.
func TestRefractedNight(t *testing.T) {
	const guide = 640.0
	ctx := t.Context()
	f := fineField(t)
	f.Turn(1, 25)
	// A fast night of bright stars: refraction changes little while it lasts, which would
	// blur the stars and upset the decoding.
	f.Target.DwellSeconds, f.Profile.Detector.ReadS = 2, 0.1
	f.Target.Calibration.Dark.DwellSeconds = 2
	for i := range f.Scene.Sources {
		*f.Scene.Sources[i].ABMag -= 4
		f.Scene.Sources[i].Lines = nil
	}
	atAirmass(t, f, 1.5)
	nm := guide
	f.Scene.Atmosphere = &rehearse.Atmosphere{Refraction: true, GuideNM: &nm}
	night, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	recipe.Grid.Refraction, recipe.Grid.GuideNM = "auto", guide
	cubes := map[string]*trial.Cube{}
	for name, opts := range map[string]rehearse.Options{trial.Noisy: {Seed: 41}, trial.Twin: {Seed: 41, Noiseless: true, NoTruth: true}} {
		require.NoError(t, night.Rehearse(ctx, name, opts))
		result, err := night.Reduce(ctx, name, reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err)
		require.Empty(t, result.Degraded)
		require.Empty(t, result.Run.Warnings)
		require.InDelta(t, 1.5, *result.Run.FieldShift.Airmass, 0.02)
		cubes[name], err = trial.ReadCube(night.CubePath(name))
		require.NoError(t, err)
	}
	twin, noisy := cubes[trial.Twin], cubes[trial.Noisy]
	truth, err := twin.ReadTruth(night.TruthPath(trial.Noisy))
	require.NoError(t, err)

	brightest, peak := 0, 0.0
	plane := twin.N * twin.Rows
	for i := range plane {
		j, y := i%twin.N, i/twin.N
		if v := float64(truth[twin.Voxels/2*plane+i]); v > peak && j > 8 && j < twin.N-9 && y > 13 && y < twin.Rows-14 {
			brightest, peak = i, v
		}
	}
	j0, y0 := brightest%twin.N, brightest/twin.N
	wantX, wantY := starCentres(twin, truth, j0, y0, 6)
	gotX, gotY := starCentres(twin, twin.Signal, j0, y0, 6)
	worst := 0.0
	for l := range wantX {
		worst = max(worst, math.Hypot(gotX[l]-wantX[l], gotY[l]-wantY[l]))
	}
	t.Logf("centroids of the star at element %d, row %d: off by at most %.4f voxels", j0, y0, worst)
	require.Less(t, worst, 0.1)

	pulls, err := trial.NewPulls(noisy, truth, twin.Variance, 1)
	require.NoError(t, err)
	for _, finding := range pulls.FaultyFindings("refraction taken out")[:2] {
		t.Log(finding)
		require.True(t, finding.OK)
	}

	recipe.Grid.Refraction, recipe.Grid.GuideNM = "off", 0
	require.NoError(t, night.Discard("left"))
	n := *night
	_, err = n.Reduce(ctx, trial.Twin, reduce.Options{Cube: true, Recipe: recipe})
	require.NoError(t, err)
	left, err := trial.ReadCube(night.CubePath(trial.Twin))
	require.NoError(t, err)
	leftX, leftY := starCentres(left, left.Signal, j0, y0, 6)
	worst = 0
	for l := range wantX {
		worst = max(worst, math.Hypot(leftX[l]-wantX[l], leftY[l]-wantY[l]))
	}
	t.Logf("left in: off by up to %.3f voxels", worst)
	require.Greater(t, worst, 0.3)
}
