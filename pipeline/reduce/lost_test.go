package reduce

import (
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

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
	require.Contains(t, strings.Join(result.Degraded, "; "), "so that every voxel is LOST; repeat step")
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

// Lamps are looked at without a cube as well, and a lamp's mask of which no frame is
// left is a reason why the product is not whole.
func TestFlatsForElementsAlone(t *testing.T) {
	p, target, scene := tiny(t)
	target.Calibration.Flat.Count, target.Calibration.Flat.CodedCycles = 1, 1
	night, seqDir := robustNight(t, p, target, scene)
	seq, err := sequence.Read(context.Background(), seqDir)
	require.NoError(t, err)
	run := func() []string {
		result, err := Run(context.Background(), Options{Night: night, Sequence: seqDir, Elements: true, Out: t.TempDir()})
		require.NoError(t, err)
		require.NotNil(t, result.Run.Calibration.Flat)
		require.Zero(t, result.Run.Calibration.Flat.AddedVariance)
		return result.Degraded
	}
	const neighbours = "the light of open neighbours is not measured"
	require.NotContains(t, strings.Join(run(), "; "), neighbours)
	for _, i := range seq.StepsOf(sequence.Flat) {
		if pattern, _ := seq.Pattern(i); pattern == sequence.PatternEven {
			require.NoError(t, os.Remove(filepath.Join(night, rehearse.FrameFile(seq.Steps[i].Step))))
		}
	}
	require.Contains(t, strings.Join(run(), "; "), neighbours)
}
