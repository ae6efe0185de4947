package fitsutil

import (
	"fmt"
	"math/rand/v2"
	"os"
	"path/filepath"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/internal/outside"
)

// requireSums reads every HDU's bytes and checks both sums (section 4.4.2.7).
func requireSums(t *testing.T, path string) {
	t.Helper()
	whole, err := os.ReadFile(path)
	require.NoError(t, err)
	f, err := Open(path)
	require.NoError(t, err)
	defer f.Close()
	for _, u := range f.HDUs() {
		end := u.dataOffset + u.dataSize + padding(u.dataSize)
		require.Equal(t, uint32(0xFFFFFFFF), naiveSum(whole[u.headerOffset:end]), "HDU %d", u.Index)
		sum, err := u.Header.Str("DATASUM")
		require.NoError(t, err)
		require.Equal(t, fmt.Sprint(naiveSum(whole[u.dataOffset:end])), sum, "HDU %d", u.Index)
	}
}

// strip is a WriteStrip call.
type strip struct{ hdu, y0, h, l0, nl int }

const testColumns, testRows, testPlanes = 7, 53, 5

// testCube has three images of odd sizes: a run starts at every lane.
var testCube = []ImageSpec{
	{Name: "SIGNAL", BITPIX: -32, Axes: []int{testColumns, testRows, testPlanes}},
	{Name: "FLAGS", BITPIX: 16, Axes: []int{testColumns, testRows, testPlanes}},
	{Name: "MAP", BITPIX: 8, Axes: []int{testColumns, testRows}},
}

// data makes the samples of a strip, functions of their place.
func (s strip) data() any {
	signal, flags, bytes := []float32{}, []int16{}, []uint8{}
	for l := s.l0; l < s.l0+s.nl; l++ {
		for y := s.y0; y < s.y0+s.h; y++ {
			for x := range testColumns {
				v := 1000*l + 10*y + x
				signal = append(signal, float32(v)/7)
				flags = append(flags, int16(3*v-9000))
				bytes = append(bytes, uint8(v))
			}
		}
	}
	return []any{signal, flags, bytes}[s.hdu]
}

// writeCube writes the strips in their order with that many goroutines and
// returns the bytes of the file.
func writeCube(t require.TestingT, path string, strips []strip, workers int) []byte {
	cube, err := CreateCube(path, NewHeader(Card{"SOFTVERS", "1", ""}), testCube)
	require.NoError(t, err)
	defer cube.Abort()
	next := make(chan strip)
	failures := make(chan error, len(strips))
	var running sync.WaitGroup
	for range workers {
		running.Go(func() {
			for s := range next {
				failures <- cube.WriteStrip(s.hdu, s.y0, s.h, s.l0, s.nl, s.data())
			}
		})
	}
	for _, s := range strips {
		next <- s
	}
	close(next)
	running.Wait()
	close(failures)
	for err := range failures {
		require.NoError(t, err)
	}
	require.NoError(t, cube.AppendTable(&Table{Name: "FRAMES", Columns: []Column{
		{Name: "STEP", Format: "J", Data: []int32{1, 2, 3}},
		{Name: "KIND", Format: "8A", Data: []string{"science", "dark", ""}},
	}}))
	require.NoError(t, cube.Commit())
	bytes, err := os.ReadFile(path)
	require.NoError(t, err)
	return bytes
}

// inOrder covers the cube with one strip an image.
func inOrder() []strip {
	return []strip{{0, 0, testRows, 0, testPlanes}, {1, 0, testRows, 0, testPlanes}, {2, 0, testRows, 0, 1}}
}

// Any cutting into strips, in any order, by one to four goroutines, gives the
// bytes of the file written in order.
func TestCubeBytesDoNotDependOnOrder(t *testing.T) {
	folder := t.TempDir()
	want := writeCube(t, filepath.Join(folder, "ordered.fits"), inOrder(), 1)
	requireSums(t, filepath.Join(folder, "ordered.fits"))
	rapid.Check(t, func(t *rapid.T) {
		var strips []strip
		for hdu, planes := range []int{testPlanes, testPlanes, 1} {
			for l0 := 0; l0 < planes; {
				nl := rapid.IntRange(1, planes-l0).Draw(t, "planes")
				for y0 := 0; y0 < testRows; {
					h := rapid.IntRange(1, testRows-y0).Draw(t, "rows")
					strips = append(strips, strip{hdu, y0, h, l0, nl})
					y0 += h
				}
				l0 += nl
			}
		}
		strips = rapid.Permutation(strips).Draw(t, "order")
		got := writeCube(t, filepath.Join(folder, "any.fits"), strips, rapid.IntRange(1, 4).Draw(t, "workers"))
		require.Equal(t, want, got)
	})
}

// TestCrosscheckCube: astropy and fitsverify read a cube written in disorder.
func TestCrosscheckCube(t *testing.T) {
	folder := t.TempDir()
	var strips []strip
	for hdu, planes := range []int{testPlanes, testPlanes, 1} {
		for l := range planes {
			for y := 0; y < testRows; y += 10 {
				strips = append(strips, strip{hdu, y, min(10, testRows-y), l, 1})
			}
		}
	}
	rand.New(rand.NewPCG(13, 14)).Shuffle(len(strips), func(i, j int) { strips[i], strips[j] = strips[j], strips[i] })
	writeCube(t, filepath.Join(folder, "cube.fits"), strips, 3)
	var manifest []manifestEntry
	for i, whole := range inOrder() {
		name := fmt.Sprintf("image%d.bin", i)
		dump(t, filepath.Join(folder, name), whole.data())
		manifest = append(manifest, manifestEntry{File: "cube.fits", HDUs: 5, Index: i + 1, Name: testCube[i].Name,
			Axes: testCube[i].Axes, Dtype: []string{"f4", "i2", "u1"}[i], Dump: name})
	}
	writeManifest(t, folder, manifest)
	require.Equal(t, "3 images, 0 cards\n", outside.Python(t, "fitsutil_write_images.py", folder))
	requireFitsverify(t, folder, []string{"cube.fits"})
}

// The file of a cube is that of WriteFile with the same content, over more
// than one conversion buffer.
func TestCubeEqualsWriteFile(t *testing.T) {
	folder := t.TempDir()
	const nx, ny = 300, 400
	pixels := make([]uint16, nx*ny)
	random := rand.New(rand.NewPCG(3, 4))
	for i := range pixels {
		pixels[i] = uint16(random.Uint32())
	}
	header := NewHeader(Card{"STEP", 12, "of the sequence"})
	whole, strips := filepath.Join(folder, "whole.fits"), filepath.Join(folder, "strips.fits")
	require.NoError(t, WriteFile(whole, nil, &ImageData{Header: header, Axes: []int{nx, ny}, Data: pixels}))
	cube, err := CreateCube(strips, nil, []ImageSpec{{Header: header, BITPIX: 16, Unsigned: true, Axes: []int{nx, ny}}})
	require.NoError(t, err)
	for _, y := range random.Perm(ny / 16) {
		require.NoError(t, cube.WriteStrip(0, 16*y, 16, 0, 1, pixels[16*y*nx:16*(y+1)*nx]))
	}
	require.NoError(t, cube.Commit())
	want, err := os.ReadFile(whole)
	require.NoError(t, err)
	got, err := os.ReadFile(strips)
	require.NoError(t, err)
	require.Equal(t, want, got)
	requireSums(t, whole)
	entries, err := os.ReadDir(folder)
	require.NoError(t, err)
	require.Len(t, entries, 2)
}

func TestWriteStripRefuses(t *testing.T) {
	path := filepath.Join(t.TempDir(), "cube.fits")
	cases := map[string]struct {
		strip strip
		data  any
		want  error
	}{
		"negative row":      {strip{0, -1, 2, 0, 1}, make([]float32, 2*testColumns), ErrRange},
		"rows beyond":       {strip{0, testRows - 1, 2, 0, 1}, make([]float32, 2*testColumns), ErrRange},
		"rows overflow":     {strip{0, 1, 1<<63 - 1, 0, 1}, make([]float32, testColumns), ErrRange},
		"no rows":           {strip{0, 0, 0, 0, 1}, []float32{}, ErrRange},
		"planes beyond":     {strip{0, 0, 1, testPlanes, 1}, make([]float32, testColumns), ErrRange},
		"negative plane":    {strip{0, 0, 1, -1, 1}, make([]float32, testColumns), ErrRange},
		"no planes":         {strip{0, 0, 1, 0, 0}, []float32{}, ErrRange},
		"plane of 2 axes":   {strip{2, 0, 1, 1, 1}, make([]uint8, testColumns), ErrRange},
		"image beyond":      {strip{3, 0, 1, 0, 1}, make([]float32, testColumns), ErrRange},
		"negative image":    {strip{-1, 0, 1, 0, 1}, make([]float32, testColumns), ErrRange},
		"short data":        {strip{0, 0, 1, 0, 1}, make([]float32, testColumns-1), ErrRange},
		"long data":         {strip{0, 0, 1, 0, 1}, make([]float32, testColumns+1), ErrRange},
		"other type":        {strip{0, 0, 1, 0, 1}, make([]float64, testColumns), ErrType},
		"unsigned, not int": {strip{1, 0, 1, 0, 1}, make([]uint16, testColumns), ErrType},
		"no slice":          {strip{0, 0, 1, 0, 1}, 5, ErrType},
		"nil":               {strip{0, 0, 1, 0, 1}, nil, ErrType},
	}
	cube, err := CreateCube(path, nil, testCube)
	require.NoError(t, err)
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			err := cube.WriteStrip(c.strip.hdu, c.strip.y0, c.strip.h, c.strip.l0, c.strip.nl, c.data)
			require.ErrorIs(t, err, c.want)
			var typed *Error
			require.ErrorAs(t, err, &typed)
			require.Equal(t, path, typed.File)
		})
	}
	// A refused strip leaves no trace: the cube can still be finished.
	for _, s := range inOrder() {
		require.NoError(t, cube.WriteStrip(s.hdu, s.y0, s.h, s.l0, s.nl, s.data()))
	}
	require.NoError(t, cube.Commit())
	require.ErrorIs(t, cube.Commit(), ErrClosed)
	require.ErrorIs(t, cube.WriteStrip(0, 0, 1, 0, 1, make([]float32, testColumns)), ErrClosed)
	require.ErrorIs(t, cube.AppendTable(&Table{Name: "T"}), ErrClosed)
	require.NoError(t, cube.Abort())
	_, err = os.Stat(path)
	require.NoError(t, err, "Abort after Commit removes nothing")
}

func TestCommitRefusesMissingAndDoubledRows(t *testing.T) {
	cases := map[string]struct {
		strips []strip
		says   string
	}{
		"nothing":        {nil, "row 0 of plane 0"},
		"last row":       {[]strip{{0, 0, testRows, 0, testPlanes}, {1, 0, testRows, 0, testPlanes}, {2, 0, testRows - 1, 0, 1}}, fmt.Sprintf("MAP: row %d of plane 0", testRows-1)},
		"row in between": {[]strip{{0, 0, testRows, 0, 3}, {0, 0, 9, 3, 2}, {0, 10, testRows - 10, 3, 2}}, "SIGNAL: row 9 of plane 3"},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "cube.fits")
			require.NoError(t, os.WriteFile(path, []byte("old"), 0o644))
			cube, err := CreateCube(path, nil, testCube)
			require.NoError(t, err)
			for _, s := range c.strips {
				require.NoError(t, cube.WriteStrip(s.hdu, s.y0, s.h, s.l0, s.nl, s.data()))
			}
			err = cube.Commit()
			require.ErrorIs(t, err, ErrRange)
			require.ErrorContains(t, err, c.says)
			onlyFile(t, path, "old")
		})
	}
	t.Run("doubled", func(t *testing.T) {
		path := filepath.Join(t.TempDir(), "cube.fits")
		require.NoError(t, os.WriteFile(path, []byte("old"), 0o644))
		cube, err := CreateCube(path, nil, testCube)
		require.NoError(t, err)
		a, b := strip{0, 0, 20, 1, 2}, strip{0, 19, 3, 2, 1}
		require.NoError(t, cube.WriteStrip(a.hdu, a.y0, a.h, a.l0, a.nl, a.data()))
		err = cube.WriteStrip(b.hdu, b.y0, b.h, b.l0, b.nl, b.data())
		require.ErrorIs(t, err, ErrRange)
		require.ErrorContains(t, err, "were written before")
		require.Equal(t, err, cube.Commit())
		onlyFile(t, path, "old")
	})
}

func TestAbortLeavesOld(t *testing.T) {
	path := filepath.Join(t.TempDir(), "cube.fits")
	require.NoError(t, os.WriteFile(path, []byte("old"), 0o644))
	cube, err := CreateCube(path, nil, testCube)
	require.NoError(t, err)
	require.NoError(t, cube.WriteStrip(0, 0, 1, 0, 1, make([]float32, testColumns)))
	require.NoError(t, cube.Abort())
	require.NoError(t, cube.Abort())
	require.ErrorIs(t, cube.Commit(), ErrClosed)
	onlyFile(t, path, "old")
}

func TestCreateCubeRefuses(t *testing.T) {
	folder := t.TempDir()
	bad := NewHeader(Card{"lower case", 1, ""})
	cases := map[string]struct {
		image ImageSpec
		want  error
	}{
		"BITPIX":         {ImageSpec{Name: "A", BITPIX: 12, Axes: []int{3}}, ErrStructure},
		"no axes":        {ImageSpec{Name: "A", BITPIX: 16}, ErrStructure},
		"axis 0":         {ImageSpec{Name: "A", BITPIX: 16, Axes: []int{3, 0}}, ErrStructure},
		"negative axis":  {ImageSpec{Name: "A", BITPIX: 16, Axes: []int{-3, 3}}, ErrStructure},
		"huge":           {ImageSpec{Name: "A", BITPIX: 16, Axes: []int{1 << 40, 1 << 40}}, ErrTooLarge},
		"unsigned float": {ImageSpec{Name: "A", BITPIX: -32, Unsigned: true, Axes: []int{3}}, ErrStructure},
		"bad card":       {ImageSpec{Name: "A", BITPIX: 16, Axes: []int{3}, Header: bad}, ErrBadCard},
		"bad name":       {ImageSpec{Name: "\x01", BITPIX: 16, Axes: []int{3}}, ErrBadCard},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(folder, "cube.fits")
			cube, err := CreateCube(path, nil, []ImageSpec{c.image})
			require.ErrorIs(t, err, c.want)
			require.Nil(t, cube)
			var typed *Error
			require.ErrorAs(t, err, &typed)
			require.Equal(t, path, typed.File)
			entries, err := os.ReadDir(folder)
			require.NoError(t, err)
			require.Empty(t, entries)
		})
	}
	_, err := CreateCube(filepath.Join(folder, "cube.fits"), nil, []ImageSpec{
		{Name: "A", BITPIX: 16, Axes: []int{3}}, {Name: "a", BITPIX: 16, Axes: []int{3}}})
	require.ErrorIs(t, err, ErrStructure)
}

// The set of rows against a plain map.
func TestRowSet(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		planes, height := rapid.IntRange(1, 6).Draw(t, "planes"), rapid.IntRange(1, 200).Draw(t, "height")
		set, plain := newRowSet(planes, height), map[[2]int]bool{}
		for range rapid.IntRange(1, 20).Draw(t, "calls") {
			l0, y0 := rapid.IntRange(0, planes-1).Draw(t, "l0"), rapid.IntRange(0, height-1).Draw(t, "y0")
			nl, h := rapid.IntRange(1, planes-l0).Draw(t, "nl"), rapid.IntRange(1, height-y0).Draw(t, "h")
			fresh := true
			for l := l0; l < l0+nl; l++ {
				for y := y0; y < y0+h; y++ {
					fresh = fresh && !plain[[2]int{l, y}]
					plain[[2]int{l, y}] = true
				}
			}
			require.Equal(t, fresh, set.add(l0, nl, y0, h))
		}
		plane, row, missing := set.firstMissing()
		require.Equal(t, len(plain) < planes*height, missing)
		if missing {
			require.False(t, plain[[2]int{plane, row}])
			for i := range plane*height + row {
				require.True(t, plain[[2]int{i / height, i % height}])
			}
		}
	})
}

func TestWriteStripAllocatesNothing(t *testing.T) {
	const nx, h, runs = 2048, 8, 200
	cube, err := CreateCube(filepath.Join(t.TempDir(), "cube.fits"), nil, []ImageSpec{{Name: "A", BITPIX: -32, Axes: []int{nx, h * (runs + 2), 3}}})
	require.NoError(t, err)
	defer cube.Abort()
	data := make([]float32, nx*h*3)
	y := 0
	allocations := testing.AllocsPerRun(runs, func() {
		if err := cube.WriteStrip(0, y, h, 0, 3, data); err != nil {
			t.Fatal(err)
		}
		y += h
	})
	if raceEnabled {
		return // the pool then drops buffers on purpose; the race is looked for above
	}
	// A collection may empty the pool of buffers once in between.
	require.Less(t, allocations, 0.5)
}

func BenchmarkWriteStrip(b *testing.B) {
	const nx, h, planes = 2048, 8, 64
	path := filepath.Join(b.TempDir(), "cube.fits")
	data := make([]float32, nx*h*planes)
	b.SetBytes(int64(4 * len(data)))
	cube, err := CreateCube(path, nil, []ImageSpec{{Name: "A", BITPIX: -32, Axes: []int{nx, h, planes}}})
	require.NoError(b, err)
	defer cube.Abort()
	for b.Loop() {
		clear(cube.images[0].written.bits)
		if err := cube.WriteStrip(0, 0, h, 0, planes, data); err != nil {
			b.Fatal(err)
		}
	}
}
