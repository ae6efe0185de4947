package product

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/outside"
)

func sampleNoise(s Schema, response bool) Noise {
	n := Noise{
		Family: "m-sequence", V: 7, K: 4, Poly: 11, PhotonVariance: 1.2, Columns: 9, Rows: s.Rows, Uniform: true,
		ResponseVariance: 1e-6, Response: response, Element: []int32{0, -1, 1, 2, -1, 3, 4},
		Frames: []int32{1, 1, 2, 1, 0, 1, 1}, ThroughputErr: []float64{0, 0.1, 0, 0, 0, 0, 0.2},
	}
	return n
}

func writeNoise(t *testing.T, path string, n Noise, s Schema) {
	specs, err := n.NoiseImages(s)
	require.NoError(t, err)
	cube, err := fitsutil.CreateCube(path, fitsutil.NewHeader(), specs)
	require.NoError(t, err)
	defer cube.Abort() // nothing after Commit
	for i, spec := range specs {
		require.NoError(t, cube.WriteStrip(i, 0, spec.Axes[1], 0, 2, make([]float32, spec.Axes[0]*spec.Axes[1]*2)))
	}
	table, err := n.CodeTable()
	require.NoError(t, err)
	require.NoError(t, cube.AppendTable(table))
	require.NoError(t, cube.Commit())
}

func TestNoiseReadsBack(t *testing.T) {
	s := smallSchema(t, "optical", 0, 1)
	for _, response := range []bool{false, true} {
		n := sampleNoise(s, response)
		path := filepath.Join(t.TempDir(), CubeFile)
		writeNoise(t, path, n, s)
		f, err := fitsutil.Open(path)
		require.NoError(t, err)
		defer f.Close()
		back, err := ReadNoise(f)
		require.NoError(t, err)
		require.Equal(t, &n, back)
		require.Contains(t, outside.Program(t, "fitsverify", path), "found 0 warning(s) and 0 error(s)")
	}
}

// A cube of another version, or a table that was cut, names file and cure.
func TestNoiseThatIsNotThere(t *testing.T) {
	s := smallSchema(t, "optical", 0, 1)
	path := filepath.Join(t.TempDir(), CubeFile)
	writeEmpty(t, path, s)
	f, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer f.Close()
	_, err = ReadNoise(f)
	require.ErrorContains(t, err, "make it again with reduce")
	require.ErrorContains(t, err, path)
	n := sampleNoise(s, false)
	n.V = 8
	cut := filepath.Join(t.TempDir(), CubeFile)
	writeNoise(t, cut, n, s)
	f, err = fitsutil.Open(cut)
	require.NoError(t, err)
	defer f.Close()
	_, err = ReadNoise(f)
	require.ErrorContains(t, err, "7 rows for a code of 8 columns")
}
