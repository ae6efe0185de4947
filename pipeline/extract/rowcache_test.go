package extract

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/rowfile"
)

// withRows makes the cache of c in a folder of its own.
func withRows(t *testing.T, c *Cube, dir string) *Cube {
	t.Helper()
	last, total := 0, 0
	require.NoError(t, c.MakeRows(t.Context(), dir, func(done, of int) {
		require.GreaterOrEqual(t, done, last)
		last, total = done, of
	}))
	require.Equal(t, total, last)
	rows, err := c.OpenRows(dir)
	require.NoError(t, err)
	t.Cleanup(func() { rows.Close() })
	return c.WithRows(rows)
}

// bits turns every float of a spectrum into its bits, so that NaN equals NaN.
func bits(v reflect.Value) any {
	switch v.Kind() {
	case reflect.Float64:
		return math.Float64bits(v.Float())
	case reflect.Pointer:
		return bits(v.Elem())
	case reflect.Slice, reflect.Array:
		var all []any
		for i := range v.Len() {
			all = append(all, bits(v.Index(i)))
		}
		return all
	case reflect.Struct:
		var all []any
		for i := range v.NumField() {
			all = append(all, bits(v.Field(i)))
		}
		return all
	}
	return v.Interface()
}

// requireSameSpectra holds what both cubes say of several apertures against each other.
func requireSameSpectra(t *testing.T, want, got *Cube) {
	t.Helper()
	circle, err := ParseCircle(fmt.Sprintf("%d %d 1.6", want.Elements/2, want.Rows/2), true)
	require.NoError(t, err)
	ring, err := ParseAnnulus("2 3", circle)
	require.NoError(t, err)
	list, err := ParseVoxels("2-4,7,9-10", "3,5-7")
	require.NoError(t, err)
	nm := want.Grid.WavelengthNM(float64(want.Grid.Count) / 2)
	for i, o := range []SpectrumOptions{
		{Aperture: circle},
		{Aperture: circle, Background: ring, Lines: &LineOptions{RestNM: []float64{nm}}},
		{Aperture: list, Bands: []Band{{FromNM: nm - 0.4, ToNM: nm + 0.3}}},
	} {
		a, err := want.Spectrum(t.Context(), o)
		require.NoError(t, err)
		b, err := got.Spectrum(t.Context(), o)
		require.NoError(t, err)
		require.Equal(t, bits(reflect.ValueOf(a)), bits(reflect.ValueOf(b)), "aperture %d", i)
	}
}

// A cube and its cache give the same bits: in every family of codes, on other grids and of
// shifted fields.
func TestCacheGivesTheSameBits(t *testing.T) {
	for _, code := range codes {
		t.Run(code.family, func(t *testing.T) {
			c := tinyRun(t, code.family, code.v, code.dark)
			requireSameSpectra(t, c, withRows(t, c, t.TempDir()))
		})
	}
	for _, change := range []string{"air, log", "refraction"} {
		t.Run(change, func(t *testing.T) {
			c := tinyRun(t, "m-sequence", 31, 8, change)
			requireSameSpectra(t, c, withRows(t, c, t.TempDir()))
		})
	}
	t.Run("throughput", func(t *testing.T) {
		c := tinyRun(t, "m-sequence", 31, 8)
		for k := range c.noise.ThroughputErr {
			c.noise.ThroughputErr[k] = 0.01
		}
		requireSameSpectra(t, c, withRows(t, c, t.TempDir()))
	})
}

// So does a cube of two runs, each of which has a cache in the same folder.
func TestCacheOfACombinedCube(t *testing.T) {
	dir := t.TempDir()
	TinyPair(t, dir, 2, 1, "m-sequence", 31, 8)
	c := openRun(t, filepath.Join(dir, "all"))
	cache := t.TempDir()
	requireSameSpectra(t, c, withRows(t, c, cache))
	files, err := os.ReadDir(cache)
	require.NoError(t, err)
	require.Len(t, files, 3)
	size := int64(0)
	for _, f := range files {
		info, err := f.Info()
		require.NoError(t, err)
		size += info.Size()
	}
	require.Equal(t, c.RowsBytes(), size)
	require.NoError(t, c.RemoveRows(cache))
	files, err = os.ReadDir(cache)
	require.NoError(t, err)
	require.Empty(t, files)
}

// A cache of another cube is not taken, a damaged one neither; a whole one is kept.
func TestCacheIsOfThisCube(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8)
	dir := t.TempDir()
	_, err := c.OpenRows(dir)
	require.ErrorIs(t, err, os.ErrNotExist)
	withRows(t, c, dir)
	path := c.rowsPath(dir)
	before, err := os.Stat(path)
	require.NoError(t, err)
	withRows(t, c, dir)
	after, err := os.Stat(path)
	require.NoError(t, err)
	require.Equal(t, before.ModTime(), after.ModTime())

	other := *c
	other.SHA = c.SHA[:16] + "0000" // its name is the same
	_, err = other.OpenRows(dir)
	require.ErrorIs(t, err, rowfile.ErrOther)
	withRows(t, &other, dir)
	_, err = c.OpenRows(dir)
	require.ErrorIs(t, err, rowfile.ErrOther)

	cached := withRows(t, c, dir)
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	text[len(text)/2] ^= 4 // in place: the open file sees it
	require.NoError(t, os.WriteFile(path, text, 0o600))
	shape, err := ParseVoxels(fmt.Sprintf("0-%d", c.Elements-1), fmt.Sprintf("0-%d", c.Rows-1))
	require.NoError(t, err)
	_, err = cached.Spectrum(t.Context(), SpectrumOptions{Aperture: shape})
	require.ErrorIs(t, err, rowfile.ErrDamaged)
}

func TestCancelledCacheLeavesNothing(t *testing.T) {
	c := tinyRun(t, "m-sequence", 31, 8)
	dir := t.TempDir()
	ctx, cancel := context.WithCancel(t.Context())
	err := c.MakeRows(ctx, dir, func(done, _ int) {
		if done == c.Rows/2 {
			cancel()
		}
	})
	require.ErrorIs(t, err, context.Canceled)
	left, err := os.ReadDir(dir)
	require.NoError(t, err)
	require.Empty(t, left)
	require.Error(t, c.MakeRows(t.Context(), filepath.Join(dir, "none"), func(int, int) {}))
}
