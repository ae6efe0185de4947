package forecast_test

import (
	"context"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/forecast"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/scene"
	"mirrorloom/pipeline/sequence"
)

// The pixels of rehearsed frames without noise, in the mean over a cycle, are the forecast's
// within 1 %, and 0.2 % of the row's brightest.
func TestFramesAsForecast(t *testing.T) {
	refracted := func() (*trial.Field, error) {
		f, err := trial.Square()
		f.Scene.Atmosphere = &scene.Atmosphere{Refraction: true, Extinction: f.Profile.Site.Extinction}
		f.Target.StartUTC = "2031-02-11T08:30:00Z" // air mass 1.8
		return f, err
	}
	beside := func(make func() (*trial.Field, error), offset int, rows ...int) func() (*trial.Field, error) {
		return func() (*trial.Field, error) {
			f, err := make()
			f.Beside(offset, rows...)
			return f, err
		}
	}
	for name, make := range map[string]func() (*trial.Field, error){
		"square": trial.Square, "diagonal": trial.Diagonal, "refracted": refracted,
		"square, beside": beside(trial.Square, 61), "diagonal, beside": beside(trial.Diagonal, -15, -33, 33),
	} {
		field, err := make()
		require.NoError(t, err)
		field.Target.Forecast = &sequence.Forecast{
			SeeingFWHMArcsec: field.Scene.SeeingFWHMArcsec, Sources: field.Scene.Sources, Sky: field.Scene.Sky, Atmosphere: field.Scene.Atmosphere, Aim: sequence.AimFaintest,
		}
		n, err := field.Plan(context.Background(), t.TempDir())
		require.NoError(t, err)
		light, err := forecast.New(n.Seq.Target, field.Profile)
		require.NoError(t, err)
		require.NoError(t, n.Rehearse(context.Background(), "twin", rehearse.Options{Seed: 1, Noiseless: true, NoTruth: true}))
		frames := meanElectrons(t, n, "twin")
		for y := 4; y < field.Profile.Detector.Rows-4; y += 5 {
			row, err := light.Row(forecast.CandidateOf(n.Seq), y)
			require.NoError(t, err)
			most := 0.0
			for _, v := range frames[y] {
				most = max(most, v)
			}
			if most < 20 {
				continue // closed rows have leaked light alone, 4 e
			}
			for x, want := range frames[y] {
				require.InDelta(t, want, row[x], 0.01*want+0.002*most, "%s column %d row %d", name, x, y)
			}
		}
	}
}

// meanElectrons is the mean of a night's science frames less its first bias frame, electrons
// by row.
func meanElectrons(t *testing.T, n *trial.Night, name string) [][]float64 {
	p := n.Seq.Profile
	mean := make([][]float64, p.Detector.Rows)
	for y := range mean {
		mean[y] = make([]float64, p.Detector.Columns)
	}
	bias := n.Seq.StepsOf(sequence.Bias)[0]
	level, width := samples(t, n.Frames(name), bias)
	science := n.Seq.StepsOf(sequence.Science)
	for _, step := range science {
		pixels, _ := samples(t, n.Frames(name), step)
		for a, place := range p.Detector.Active() {
			x0, x1, y0, y1 := place.Raw.Bounds0()
			gain := p.Detector.Amplifiers[a].GainEPerADU / float64(len(science))
			for y := y0; y < y1; y++ {
				for x := x0; x < x1; x++ {
					mean[place.Y0+y-y0][place.X0+x-x0] += gain * float64(pixels[y*width+x]-level[y*width+x])
				}
			}
		}
	}
	return mean
}

// samples are those of a step's frame, ADU.
func samples(t *testing.T, dir string, step int) (pixels []float32, width int) {
	f, err := fitsutil.Open(filepath.Join(dir, rehearse.FrameFile(step+1)))
	require.NoError(t, err)
	defer f.Close() // only read from
	im, err := f.FirstImage()
	require.NoError(t, err)
	pixels = make([]float32, im.Width()*im.Height())
	require.NoError(t, im.ReadRows(pixels, 0, im.Height()))
	return pixels, im.Width()
}

// One night of two plans: what `make validate` does with twenty of twelve.
func TestNightsAsForecast(t *testing.T) {
	plans := trial.ForecastPlans()
	for _, i := range []int{9, 10} {
		lines, bands, err := plans[i].MeasureForecast(context.Background(), t.TempDir(), 1, 77)
		require.NoError(t, err)
		for what, j := range map[string]*trial.Forecasted{", line": lines, ", band": bands} {
			require.InDelta(t, 1, j.Light(), 0.005, plans[i].Name+what)
			for _, f := range j.Findings(plans[i].Name + what) {
				require.True(t, f.OK, f.String())
			}
			require.Greater(t, j.Voxels.N, 1000)
		}
	}
}
