package product

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/outside"
)

// writeEmpty writes a cube of zeros with all that cube.fits has.
func writeEmpty(t testing.TB, path string, s Schema) {
	t.Helper()
	primary, err := Provenance{ProfileName: "optical", ProfileSHA: "aa", SequenceSHA: "bb", RecipeSHA: "cc", FramesUsed: 7, FramesLost: 1}.Primary(s.Object)
	require.NoError(t, err)
	specs, err := s.Images()
	require.NoError(t, err)
	cube, err := fitsutil.CreateCube(path, primary, specs)
	require.NoError(t, err)
	defer cube.Abort() // nothing after Commit
	voxels := s.Elements * s.Rows * s.Grid.Count
	for i, spec := range specs {
		var data any = make([]float32, voxels)
		if spec.BITPIX == 16 {
			data = make([]int16, voxels)
		}
		require.NoError(t, cube.WriteStrip(i, 0, s.Rows, 0, s.Grid.Count, data))
	}
	require.NoError(t, cube.AppendTable(sampleLedger().Table()))
	require.NoError(t, cube.Commit())
}

func TestCrosscheckCubeIsStandard(t *testing.T) {
	s := smallSchema(t, "infrared", 37, -1)
	path := filepath.Join(t.TempDir(), CubeFile)
	writeEmpty(t, path, s)
	out := outside.Program(t, "fitsverify", path)
	require.Contains(t, out, "found 0 warning(s) and 0 error(s)")
}

// The elements' cube keeps detector coordinates: axes x, y, column, no WCS.
func TestCrosscheckElementCubeIsStandard(t *testing.T) {
	specs, err := ElementImages(5, 4, 3)
	require.NoError(t, err)
	path := filepath.Join(t.TempDir(), ElementsFile)
	primary, err := Provenance{ProfileName: "optical"}.Primary("Field")
	require.NoError(t, err)
	cube, err := fitsutil.CreateCube(path, primary, specs)
	require.NoError(t, err)
	defer cube.Abort() // nothing after Commit
	require.NoError(t, cube.WriteStrip(0, 0, 4, 0, 3, make([]float32, 60)))
	require.NoError(t, cube.WriteStrip(1, 0, 4, 0, 3, make([]float32, 60)))
	require.NoError(t, cube.WriteStrip(2, 0, 4, 0, 3, make([]int16, 60)))
	require.NoError(t, cube.Commit())
	require.Contains(t, outside.Program(t, "fitsverify", path), "found 0 warning(s) and 0 error(s)")
	file, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer file.Close()
	for i, name := range []string{Signal, Variance, FlagsImage} {
		require.Equal(t, name, file.HDUs()[i+1].Name)
		require.Equal(t, []int{5, 4, 3}, file.HDUs()[i+1].Axes)
		require.False(t, file.HDUs()[i+1].Header.Has("CTYPE1"))
	}
}

// The contract's cards of cube.fits, read back.
func TestCubeCards(t *testing.T) {
	s := smallSchema(t, "optical", 0, 1)
	path := filepath.Join(t.TempDir(), CubeFile)
	writeEmpty(t, path, s)
	file, err := fitsutil.Open(path)
	require.NoError(t, err)
	defer file.Close()
	h := file.HDUs()[0].Header
	for key, want := range map[string]any{
		"OBJECT": "Field", "PROFNAME": "optical", "PROFSHA": "aa", "SEQSHA": "bb", "RECSHA": "cc",
		"NFRAMES": int64(7), "NLOST": int64(1),
	} {
		for _, c := range h.Cards() {
			if c.Key == key {
				require.Equal(t, want, c.Value, key)
			}
		}
		require.True(t, h.Has(key), key)
	}
	for i, want := range []struct {
		name   string
		bitpix int
	}{{"SIGNAL", -32}, {"VARIANCE", -32}, {"FLAGS", 16}, {"SCALE", -32}} {
		u := file.HDUs()[i+1]
		require.Equal(t, want.name, u.Name)
		require.Equal(t, want.bitpix, u.BITPIX)
		require.Equal(t, s.Axes(), u.Axes)
		require.True(t, u.Header.Has("CHECKSUM") && u.Header.Has("DATASUM"), u.Name)
	}
	require.Equal(t, "FRAMES", file.HDUs()[5].Name)
}

func TestFlags(t *testing.T) {
	bad := int16(0)
	seen := int16(0)
	for _, f := range Flags() {
		require.Zero(t, seen&f.Bit, f.Name)
		seen |= f.Bit
		if f.Bit <= 64 {
			bad |= f.Bit
		}
	}
	require.EqualValues(t, FlagBad, bad) // the first seven bits make a voxel bad
	require.Zero(t, seen&128)
}
