package reduce_test

import (
	"context"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// besides are the small fields beside the middle of their devices: more than half of the
// elements away, so that no element lies where a centred field has it. Mounted diagonally the
// corner leaves fewer rows.
var besides = []struct {
	name string
	make func() (*trial.Field, error)
}{
	{"square", func() (*trial.Field, error) {
		f, err := trial.Square()
		if err == nil {
			f.Beside(61)
		}
		return f, err
	}},
	{"diagonal", func() (*trial.Field, error) {
		f, err := trial.Diagonal()
		if err == nil {
			f.Beside(-15, -33, 33)
		}
		return f, err
	}},
}

// A field beside the device's middle has the pulls of one in it, its voxels in the same rows
// and columns are good.
func TestPullsOfAFieldBeside(t *testing.T) {
	for i, field := range besides {
		t.Run(field.name, func(t *testing.T) {
			f, err := field.make()
			require.NoError(t, err)
			night, result, err := f.Pair(context.Background(), t.TempDir(), uint64(41+i))
			require.NoError(t, err)
			require.Empty(t, result.Degraded)
			require.InDelta(t, float64(f.Target.OffsetU()), night.Seq.FieldCenterU()-f.Profile.UCenter(), 0.5)
			require.Nil(t, night.Seq.Target.Field.Rows, "field.rows is resolved")
			pulls, cube, err := night.PullsOf(1)
			require.NoError(t, err)
			hold(t, pulls.Findings(field.name))
			hold(t, trial.GoodFindings(field.name, cube, night.Seq, 0.4))
			require.GreaterOrEqual(t, result.Run.Quality.CoveredGoodFraction, 0.99)
		})
	}
}

// Its own lamps calibrate it: lines are found where the offset puts them, elements of two
// mirrors, the device turned by 200 degrees on the sky.
func TestCalibratedFieldBeside(t *testing.T) {
	f, err := trial.Lamps()
	require.NoError(t, err)
	f.Beside(-40)
	f.Turn(-1, 200)
	night, result, err := f.Calibrated(context.Background(), t.TempDir(), 7)
	require.NoError(t, err)
	g := f.Profile.Grid
	findings, err := night.CalibratedFindings("lamps", []float64{g.WavelengthNM(0.1 * float64(g.Count)), g.WavelengthNM(0.25 * float64(g.Count))})
	require.NoError(t, err)
	hold(t, findings)
	require.GreaterOrEqual(t, result.Run.Quality.CoveredGoodFraction, 0.99)
	checkGeometry(t, night, result.Run.Calibration)
}

// Through astropy's WCS the stars and lines of a field beside the middle lie where the scene
// has them, turned, with either parity and with elements of one and of three mirrors.
func TestCrosscheckPlacesOfAFieldBeside(t *testing.T) {
	dir := t.TempDir()
	var cases []placeCase
	for _, field := range besides {
		cases = append(cases, placesOf(t, filepath.Join(dir, field.name), field.name, field.make, 1, 125))
	}
	cases = append(cases, placesOf(t, filepath.Join(dir, "wide"), "elements of three mirrors", func() (*trial.Field, error) {
		f, err := trial.Square()
		if err != nil {
			return nil, err
		}
		f.Target.Code.ElementMirrors = 3
		f.SetCode("m-sequence", 31, 0)
		f.Beside(-22)
		return f, nil
	}, -1, -70))
	for _, p := range findPlaces(t, cases) {
		t.Logf("%s: %d stars off by at most %.4f, %.4f, %d lines by %.4f voxels", p.Name, p.Stars, p.StarX, p.StarY, p.Lines, p.Line)
		require.Len(t, trial.StarPlaces, p.Stars)
		require.Equal(t, 7, p.Lines)
		require.Less(t, p.worst(), 0.1, p.Name)
	}
}

// The reduction's geometry has the light of each element where section 3 of the design puts
// that of its mirrors, the middle of the device's at x_c.
func TestOffsetMovesTheLight(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	f.Beside(61)
	ctx := context.Background()
	night, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(ctx, trial.Twin, rehearse.Options{Noiseless: true, NoTruth: true}))
	_, err = night.Reduce(ctx, trial.Twin, reduce.Options{Cube: true})
	require.NoError(t, err)
	path := filepath.Join(night.Frames(trial.Twin), rehearse.TruthFolder, rehearse.GeometryFile)
	g := geometryOf(t, night.CubePath(trial.Twin)) // XC YC XE JC ...
	truth := readGeometry(t, path)
	// Section 3 of the design: element j's middle is u = first + 2 j + 1/2, and its light of
	// the centre wavelength lies at x_c + u_step (u - u_c) on the row y_c.
	first := float64(night.Seq.Elements[night.Seq.ElementColumns()[0]].First)
	for _, j := range []float64{0, 20, 46} {
		want := truth.XCenterPx + truth.UStepPx*(first+2*j+0.5-float64(f.Profile.DMD.Columns-1)/2)
		require.InDelta(t, want, g[0]+g[2]*(j-g[3]), 1e-9)
	}
	require.InDelta(t, 23-30.5, g[3], 1e-9, "61 mirrors are 30.5 elements")
}
