package reduce

import (
	"context"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
	"mirrorloom/pipeline/sequence"
)

// A lost code row poisons every element: LOST is set in both cubes, wherever there
// is data.
func TestLostRowFlagsBothCubes(t *testing.T) {
	p, target, scene := tiny(t)
	night, seq := robustNight(t, p, target, scene, "lost=1")
	out := t.TempDir()
	result, err := Run(context.Background(), Options{Night: night, Sequence: seq, Cube: true, Elements: true, Out: out})
	require.NoError(t, err)
	require.Contains(t, result.Degraded[0], "LOST")
	for _, name := range []string{product.CubeFile, product.ElementsFile} {
		lost := 0
		for i, f := range readFlags(t, filepath.Join(out, name)) {
			if f&product.FlagNoData != 0 {
				continue
			}
			require.NotZero(t, f&product.FlagLost, "%s, voxel %d", name, i)
			lost++
		}
		require.NotZero(t, lost, name)
	}
}

func readFlags(t *testing.T, path string) []int16 {
	t.Helper()
	file, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer file.Close()
	image, err := file.ImageNamed(product.FlagsImage)
	require.NoError(t, err)
	var all []int16
	plane := make([]float32, image.Width()*image.Height())
	for l := range image.Planes() {
		require.NoError(t, image.ReadPlaneRows(plane, l, 0, image.Height()))
		for _, f := range plane {
			all = append(all, int16(f))
		}
	}
	return all
}

// A coded lamp frame that is lost is filled in: the voxels of the decoded flat take
// part in the fit all the same.
func TestLostLampFrameLeavesAFlat(t *testing.T) {
	p, target, scene := tiny(t)
	v := 31 // of which one is less than flatsLost
	target.Code.V, target.Code.Dark = &v, nil
	target.Calibration.Flat.Count, target.Calibration.Flat.CodedCycles = 1, 1
	night, seqDir := robustNight(t, p, target, scene)
	seq, err := sequence.Read(context.Background(), seqDir)
	require.NoError(t, err)
	for i, s := range seq.Steps {
		if pattern, _ := seq.Pattern(i); s.Kind == sequence.Flat && pattern == sequence.PatternRow {
			require.NoError(t, os.Remove(filepath.Join(night, rehearse.FrameFile(s.Step))))
			break
		}
	}
	for _, products := range []Options{{Cube: true}, {Elements: true}} {
		products.Night, products.Sequence, products.Out = night, seqDir, t.TempDir()
		result, err := Run(context.Background(), products)
		require.NoError(t, err)
		for _, why := range result.Degraded {
			require.NotContains(t, why, "flat field")
		}
		require.NotNil(t, result.Run.Calibration.Flat)
	}
}

// Without a cube no voxel tells what variance the responses add.
func TestFlatSummaryWithoutCube(t *testing.T) {
	r := &reduction{optics: optics{pixel: &calib.PixelResponse{Scatter: 0.01}, response: &calib.Response{}}}
	require.Zero(t, r.flatSummary().AddedVariance)
}
