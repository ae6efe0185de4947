package reduce_test

import (
	"bufio"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/reduce"
	"mirrorloom/pipeline/rehearse"
)

// placeCase is a case of reduce_wcs.py.
type placeCase struct {
	Name      string  `json:"name"`
	Cube      string  `json:"cube"`
	Scene     string  `json:"scene"`
	RA        float64 `json:"ra"`
	Dec       float64 `json:"dec"`
	LSFVoxels float64 `json:"lsf_voxels"`
	// CType is that of the wavelengths, WAVE if empty; Observer, where not nil, is that of
	// a cube in the frame of the barycentre.
	CType    string    `json:"ctype,omitempty"`
	Observer *observer `json:"observer,omitempty"`
}

// observer is where and when exposures were made: UTC of their middles.
type observer struct {
	Latitude float64  `json:"latitude"`
	East     float64  `json:"east"`
	Height   float64  `json:"height"`
	Middles  []string `json:"middles"`
}

// placed is its answer: the largest distances, in voxels.
type placed struct {
	Name  string  `json:"name"`
	Stars int     `json:"stars"`
	Lines int     `json:"lines"`
	StarX float64 `json:"star_x"`
	StarY float64 `json:"star_y"`
	Line  float64 `json:"line"`
	// VelocityOff is VELOSYS less astropy's, m/s.
	VelocityOff float64 `json:"velocity_off"`
}

func (p placed) worst() float64 { return max(p.StarX, p.StarY, p.Line) }

func findPlaces(t *testing.T, cases []placeCase) []placed {
	t.Helper()
	text, err := json.Marshal(cases)
	require.NoError(t, err)
	list := filepath.Join(t.TempDir(), "cases.json")
	require.NoError(t, os.WriteFile(list, text, 0o644))
	var all []placed
	lines := bufio.NewScanner(strings.NewReader(outside.Python(t, "reduce_wcs.py", list)))
	for lines.Scan() {
		var p placed
		require.NoError(t, json.Unmarshal(lines.Bytes(), &p))
		all = append(all, p)
	}
	require.Len(t, all, len(cases))
	return all
}

// Through astropy's WCS every star lies at the scene's place on the sky and every
// line at its wavelength, within a tenth of a voxel, for both mountings, both
// parities, and turned.
func TestCrosscheckPlaces(t *testing.T) {
	const limit = 0.1
	dir := t.TempDir()
	var cases []placeCase
	for _, field := range fields {
		for _, parity := range []int{1, -1} {
			for _, rotang := range []float64{0, 37} {
				name := fmt.Sprintf("%s, parity %+d, ROTANG %g", field.name, parity, rotang)
				cases = append(cases, placesOf(t, filepath.Join(dir, name), name, field.make, parity, rotang))
			}
		}
	}
	// The check finds a target that lies 0.2 arc seconds from where it is said to.
	wrong := cases[0]
	wrong.Name, wrong.Dec = "wrong target", wrong.Dec+0.2/3600
	for _, p := range findPlaces(t, append(cases, wrong)) {
		t.Logf("%s: %d stars off by at most %.4f, %.4f, %d lines by %.4f voxels", p.Name, p.Stars, p.StarX, p.StarY, p.Lines, p.Line)
		if p.Name == wrong.Name {
			require.Greater(t, p.worst(), limit)
			continue
		}
		require.Len(t, trial.StarPlaces, p.Stars)
		require.Equal(t, 7, p.Lines) // 3 of the sky, 4 of the nebula
		require.Less(t, p.worst(), limit, p.Name)
	}
}

func placesOf(t *testing.T, dir, name string, field func() (*trial.Field, error), parity int, rotang float64) placeCase {
	t.Helper()
	ctx := context.Background()
	f, err := field()
	require.NoError(t, err)
	f.Turn(parity, rotang)
	night, err := f.Plan(ctx, dir)
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(ctx, trial.Twin, rehearse.Options{Noiseless: true, NoTruth: true}))
	_, err = night.Reduce(ctx, trial.Twin, reduce.Options{Cube: true})
	require.NoError(t, err)
	return placeCase{
		Name: name, Cube: night.CubePath(trial.Twin),
		Scene: filepath.Join(night.Frames(trial.Twin), rehearse.TruthFolder, rehearse.SceneFile),
		RA:    f.Target.RADeg, Dec: f.Target.DecDeg, LSFVoxels: f.Profile.Spectrograph.LSFFWHMPx,
	}
}

// fitsverify finds nothing to say about the products.
func TestCrosscheckProductsVerify(t *testing.T) {
	ctx := context.Background()
	f, err := trial.Tiny()
	require.NoError(t, err)
	night, err := f.Plan(ctx, t.TempDir())
	require.NoError(t, err)
	require.NoError(t, night.Rehearse(ctx, trial.Noisy, rehearse.Options{Seed: 2}))
	_, err = night.Reduce(ctx, trial.Noisy, reduce.Options{Cube: true, Elements: true})
	require.NoError(t, err)
	for _, path := range []string{night.CubePath(trial.Noisy), night.ElementsPath(trial.Noisy), night.TruthPath(trial.Noisy)} {
		out := outside.Program(t, "fitsverify", path)
		require.Contains(t, out, "found 0 warning(s) and 0 error(s)", path)
	}
}
