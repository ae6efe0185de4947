package reduce_test

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// rewriting is a form that a night's frames may have.
type rewriting struct {
	name string
	job  map[string]any
	// profile changes the profile to one of frames in that form.
	profile func(p *instrument.Profile)
}

func rewritings() []rewriting {
	plain := func(bitpix int) rewriting {
		return rewriting{name: fmt.Sprintf("BITPIX %d", bitpix), job: map[string]any{"form": "plain", "bitpix": bitpix}}
	}
	names := map[string]string{
		"STEP": "EXPNO", "MASKID": "APERTURE", "KIND": "IMGTYPE", "EXPTIME": "ITIME", "DATE-OBS": "UTSTART",
		"AIRMASS": "SECZ", "RA": "TELRA", "DEC": "TELDEC", "ROTANG": "POSANG", "INSTRUME": "CAMERA",
	}
	words := map[string]string{"bias": "ZERO", "dark": "SHUT", "all-off": "PARKED", "science": "OBJECT"}
	return []rewriting{
		plain(8), plain(16), plain(32), plain(64), plain(-32), plain(-64),
		{name: "scaled, BITPIX 16", job: map[string]any{"form": "scaled", "bitpix": 16, "bscale": 0.25, "bzero": -1000}},
		{name: "scaled, BITPIX 8", job: map[string]any{"form": "scaled", "bitpix": 8, "bscale": -1, "bzero": 255}},
		{name: "scaled, BITPIX -32", job: map[string]any{"form": "scaled", "bitpix": -32, "bscale": 8, "bzero": 3}},
		{name: "extension", job: map[string]any{"form": "extension"}},
		{name: "gzip", job: map[string]any{"form": "gzip"}},
		{name: "keywords", job: map[string]any{"form": "keywords", "map": names, "kinds": words}, profile: func(p *instrument.Profile) {
			p.Keywords = instrument.Keywords{
				Step: "EXPNO", MaskID: "APERTURE", Kind: "IMGTYPE", Exptime: "ITIME", DateObs: "UTSTART",
				Airmass: "SECZ", RA: "TELRA", Dec: "TELDEC", RotAng: "POSANG", Instrume: "CAMERA",
			}
			p.Kinds.Bias, p.Kinds.Dark, p.Kinds.AllOff, p.Kinds.Science = "ZERO", "SHUT", "PARKED", "OBJECT"
		}},
		// The first amplifier's overscan goes to the left of its data: 16, 36, 36, 16
		// columns instead of 36, 36, 16, 16.
		{name: "amplifiers elsewhere", job: map[string]any{"form": "layout", "runs": [][2]int{{73, 88}, {1, 36}, {37, 72}, {89, 104}}}, profile: func(p *instrument.Profile) {
			a := p.Detector.Amplifiers
			a[0].Overscan, a[0].Data = instrument.Overscan{1, 16, 1, 16}, instrument.Section{17, 52, 1, 16}
			a[1].Data, a[1].Overscan = instrument.Section{53, 88, 1, 16}, instrument.Overscan{89, 104, 1, 16}
		}},
	}
}

// eightBits is the tiny field with all raw values of its night between 0 and 255.
func eightBits(t *testing.T) *trial.Field {
	t.Helper()
	f, err := trial.Tiny()
	require.NoError(t, err)
	d := &f.Profile.Detector
	for i := range d.Amplifiers {
		d.Amplifiers[i].BiasADU = 60 + 5*float64(i)
	}
	d.SaturationADU = 250
	f.Target.DwellSeconds = 6
	f.Target.Calibration.Dark.DwellSeconds = 6
	return f
}

// However an observatory writes the same pixel values, the cube is the same, bit
// by bit.
func TestCrosscheckRewrittenFrames(t *testing.T) {
	ctx := context.Background()
	dir := t.TempDir()
	base, err := eightBits(t).Plan(ctx, filepath.Join(dir, "base"))
	require.NoError(t, err)
	require.NoError(t, base.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 8, NoTruth: true}))
	_, err = base.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
	require.NoError(t, err)
	want, err := trial.ReadCube(base.CubePath(trial.Noisy))
	require.NoError(t, err)
	require.Greater(t, goodFraction(want), 0.6)

	forms := rewritings()
	nights := make([]*trial.Night, len(forms))
	var jobs []map[string]any
	for i, form := range forms {
		f := eightBits(t)
		if form.profile != nil {
			form.profile(f.Profile)
		}
		nights[i], err = f.Plan(ctx, filepath.Join(dir, fmt.Sprint(i)))
		require.NoError(t, err, form.name)
		form.job["night"], form.job["out"] = base.Frames(trial.Noisy), nights[i].Frames(trial.Noisy)
		jobs = append(jobs, form.job)
	}
	list := filepath.Join(dir, "jobs.json")
	text, err := json.Marshal(jobs)
	require.NoError(t, err)
	require.NoError(t, os.WriteFile(list, text, 0o644))
	require.Equal(t, fmt.Sprintf("%d frames\n", len(forms)*len(base.Seq.Steps)), outside.Python(t, "reduce_rewrite.py", list))
	for i, form := range forms {
		t.Run(form.name, func(t *testing.T) {
			result, err := nights[i].Reduce(ctx, trial.Noisy, reduce.Options{Cube: true})
			require.NoError(t, err)
			require.Empty(t, result.Degraded)
			require.Empty(t, result.Run.Warnings)
			got, err := trial.ReadCube(nights[i].CubePath(trial.Noisy))
			require.NoError(t, err)
			requireSameBits(t, want.Signal, got.Signal)
			requireSameBits(t, want.Variance, got.Variance)
			require.Equal(t, want.Flags, got.Flags)
		})
	}
}

// requireSameBits compares floats as bits, not a number included.
func requireSameBits(t *testing.T, want, got []float32) {
	t.Helper()
	require.Len(t, got, len(want))
	for i := range want {
		if math.Float32bits(want[i]) != math.Float32bits(got[i]) {
			t.Fatalf("voxel %d is %v, not %v", i, got[i], want[i])
		}
	}
}
