package reduce_test

import (
	"bytes"
	"context"
	"math"
	"os"
	"path/filepath"
	"testing"
	"time"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// onScale is the grid of as many voxels between the same two edges on another scale.
func onScale(g instrument.Grid, axis instrument.Axis, spacing instrument.Spacing) instrument.Grid {
	first, last := g.WavelengthNM(-0.5), g.WavelengthNM(float64(g.Count)-0.5)
	if axis == instrument.Air {
		first, last = physics.VacuumToAir(first), physics.VacuumToAir(last)
	}
	out := instrument.Grid{Count: g.Count, Axis: axis, Spacing: spacing, StepNM: (last - first) / float64(g.Count)}
	out.FirstNM = first + out.StepNM/2
	if spacing == instrument.Logarithmic {
		step := math.Log(last/first) / float64(g.Count)
		out.FirstNM = first * math.Exp(step/2)
		out.StepNM = step * out.FirstNM
	}
	return out
}

var scales = []struct {
	ctype   string
	axis    instrument.Axis
	spacing instrument.Spacing
}{
	{"WAVE", instrument.Vacuum, instrument.Linear}, {"AWAV", instrument.Air, instrument.Linear},
	{"WAVE-LOG", instrument.Vacuum, instrument.Logarithmic}, {"AWAV-LOG", instrument.Air, instrument.Logarithmic},
}

// One night reduced to every kind of grid and frame: through astropy's WCS its lines lie at
// the scene's wavelengths, and each spectrum holds the same light on all grids that share
// their outer edges.
func TestCrosscheckGrids(t *testing.T) {
	ctx := context.Background()
	f, err := trial.Square()
	require.NoError(t, err)
	night, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(ctx, trial.Twin, rehearse.Options{Noiseless: true, NoTruth: true}))
	var cases []placeCase
	var totals []map[int]float64
	reduceTo := func(name string, change func(*reduce.GridRecipe)) placeCase {
		recipe, err := reduce.LoadRecipe("nominal")
		require.NoError(t, err)
		change(&recipe.Grid)
		_, err = night.Reduce(ctx, trial.Twin, reduce.Options{Cube: true, Recipe: recipe})
		require.NoError(t, err)
		path := filepath.Join(night.Dir, name+".fits")
		require.NoError(t, os.Rename(night.CubePath(trial.Twin), path))
		require.NoError(t, os.RemoveAll(night.Run(trial.Twin)))
		return placeCase{
			Name: name, Cube: path, Scene: filepath.Join(night.Frames(trial.Twin), rehearse.TruthFolder, rehearse.SceneFile),
			RA: f.Target.RADeg, Dec: f.Target.DecDeg, LSFVoxels: f.Profile.Spectrograph.LSFFWHMPx, CType: "WAVE",
		}
	}
	for _, s := range scales {
		g := onScale(f.Profile.Grid, s.axis, s.spacing)
		c := reduceTo(s.ctype, func(r *reduce.GridRecipe) {
			r.FirstNM, r.StepNM, r.Count, r.Axis, r.Spacing = g.FirstNM, g.StepNM, g.Count, g.Axis, g.Spacing
		})
		c.CType = s.ctype
		cases = append(cases, c)
		totals = append(totals, spectraTotals(t, c.Cube))
	}
	for i, s := range scales[1:] {
		require.Len(t, totals[i+1], len(totals[0]))
		worst := 0.0
		for p, want := range totals[0] {
			worst = max(worst, math.Abs(totals[i+1][p]/want-1))
		}
		t.Logf("%s: the light of %d spectra differs by at most %.1e", s.ctype, len(totals[0]), worst)
		require.Less(t, worst, 1e-5, s.ctype)
	}
	barycentric := reduceTo("barycentric", func(r *reduce.GridRecipe) { r.Frame = "barycentric" })
	barycentric.Observer = observerOf(t, night)
	// Were it taken half a year later, the check would see the difference.
	later := barycentric
	later.Name, later.Observer = "half a year later", observerOf(t, night)
	for i, at := range later.Observer.Middles {
		utc, err := time.Parse(isoTime, at)
		require.NoError(t, err)
		later.Observer.Middles[i] = utc.Add(180 * 24 * time.Hour).Format(isoTime)
	}
	for _, p := range findPlaces(t, append(cases, barycentric, later)) {
		t.Logf("%s: %d lines off by at most %.4f voxels, stars by %.4f, %.4f, VELOSYS by %.3f m/s", p.Name, p.Lines, p.Line, p.StarX, p.StarY, p.VelocityOff)
		require.Equal(t, 7, p.Lines)
		if p.Name == later.Name {
			require.Greater(t, math.Abs(p.VelocityOff), 1000.0)
			continue
		}
		require.Less(t, math.Abs(p.VelocityOff), 1.0, p.Name) // the truncated ephemeris is within 0.5
		require.Less(t, p.worst(), 0.1, p.Name)
	}
}

const isoTime = "2006-01-02T15:04:05.000"

// observerOf reads when the night's science frames were taken.
func observerOf(t *testing.T, n *trial.Night) *observer {
	t.Helper()
	site := n.Field.Profile.Site
	o := &observer{Latitude: site.LatitudeDeg, East: site.LongitudeEastDeg, Height: site.HeightM}
	for _, i := range n.Seq.StepsOf(sequence.Science) {
		f, err := fitsutil.Open(filepath.Join(n.Frames(trial.Twin), rehearse.FrameFile(n.Seq.Steps[i].Step)))
		require.NoError(t, err)
		text, err := f.HDUs()[0].Header.Str("DATE-OBS")
		require.NoError(t, err)
		require.NoError(t, f.Close())
		start, err := time.Parse(isoTime, text)
		require.NoError(t, err)
		o.Middles = append(o.Middles, start.Add(time.Duration(n.Seq.Steps[i].ExptimeSeconds/2*float64(time.Second))).Format(isoTime))
	}
	return o
}

// spectraTotals adds up each spectrum, by place, where all its voxels are good.
func spectraTotals(t *testing.T, path string) map[int]float64 {
	t.Helper()
	c, err := trial.ReadCube(path)
	require.NoError(t, err)
	totals := map[int]float64{}
	plane := c.N * c.Rows
	for p := range plane {
		sum, whole := 0.0, true
		for l := range c.Voxels {
			whole = whole && c.Good(l*plane+p)
			sum += float64(c.Signal[l*plane+p])
		}
		if whole && sum > 0 {
			totals[p] = sum
		}
	}
	require.Greater(t, len(totals), 1000)
	return totals
}

// Pulls on a logarithmic grid in air are as normal as on a linear one in vacuum.
func TestPullsOnAirAndLog(t *testing.T) {
	f, err := trial.Square()
	require.NoError(t, err)
	f.Profile.Grid = onScale(f.Profile.Grid, instrument.Air, instrument.Logarithmic)
	night, result, err := f.Pair(context.Background(), t.TempDir(), 12)
	require.NoError(t, err)
	require.Empty(t, result.Degraded)
	pulls, cube, err := night.PullsOf(1)
	require.NoError(t, err)
	hold(t, pulls.Findings("AWAV-LOG"))
	hold(t, trial.GoodFindings("AWAV-LOG", cube, night.Seq, 0.6))
}

// renameCard takes a card out of all frames of a folder.
func renameCard(t *testing.T, folder, key string) {
	t.Helper()
	frames, err := filepath.Glob(filepath.Join(folder, "*.fits"))
	require.NoError(t, err)
	for _, path := range frames {
		data, err := os.ReadFile(path)
		require.NoError(t, err)
		card := []byte((key + "        ")[:8] + "=")
		require.True(t, bytes.Contains(data, card), path)
		require.NoError(t, os.WriteFile(path, bytes.Replace(data, card, []byte("XXXXXXXX="), 1), 0o644))
	}
}

// Without the times of its frames a night is reduced, as observed, and says so.
func TestBarycentricWithoutTimes(t *testing.T) {
	ctx := context.Background()
	f, err := trial.Tiny()
	require.NoError(t, err)
	night, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 3, NoTruth: true}))
	recipe, err := reduce.LoadRecipe("nominal")
	require.NoError(t, err)
	recipe.Grid.Frame = "barycentric"
	renameCard(t, night.Frames(trial.Noisy), "DATE-OBS")
	result, err := night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Recipe: recipe})
	require.NoError(t, err)
	require.Len(t, result.Degraded, 1)
	require.Contains(t, result.Degraded[0], "has no DATE-OBS; give the frames their time, or leave out grid.frame")
	require.Equal(t, product.SpectralFrame{}, result.Schema.Frame)
}
