package fitsutil

import (
	"encoding/binary"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"
	"mirrorloom/internal/outside"
)

// requireSame compares pixels by their bits; every NaN equals every other.
func requireSame(t *testing.T, want, got []float32, where ...any) {
	t.Helper()
	require.Len(t, got, len(want), where...)
	for i, w := range want {
		g := got[i]
		if math.Float32bits(w) != math.Float32bits(g) && !(w != w && g != g) {
			require.Failf(t, "a pixel differs", "pixel %d: %v, not %v (%v)", i, g, w, where)
		}
	}
}

// readAll reads an image by runs of a number of rows.
func readAll(t *testing.T, im *Image, rows int) []float32 {
	t.Helper()
	w, h := im.Width(), im.Height()
	all := make([]float32, w*h*im.Planes())
	for plane := range im.Planes() {
		for y := 0; y < h; y += rows {
			end := min(y+rows, h)
			at := (plane*h + y) * w
			require.NoError(t, im.ReadPlaneRows(all[at:at+(end-y)*w], plane, y, end))
		}
	}
	return all
}

// Source of the values: astropy and numpy, see the script.
func TestCrosscheckImagesOfAstropy(t *testing.T) {
	folder := t.TempDir()
	var cases []struct {
		Name, Values string
		HDU          int
		Axes         []int
	}
	require.NoError(t, json.Unmarshal([]byte(outside.Python(t, "fitsutil_read_images.py", folder)), &cases))
	require.Len(t, cases, 49)
	pixels := 0
	for _, c := range cases {
		want := readFloats(t, filepath.Join(folder, c.Values))
		f := openTest(t, filepath.Join(folder, c.Name))
		im, err := f.Image(c.HDU)
		require.NoError(t, err, c.Name)
		require.Equal(t, c.Axes, im.Axes, c.Name)
		for _, rows := range []int{1, 7, im.Height()} {
			requireSame(t, want, readAll(t, im, rows), c.Name, rows)
		}
		if c.Name == "amplifiers.fits" {
			sweepSections(t, im, want)
		}
		if c.Name == "extensions.fits" {
			named, err := f.ImageNamed("amp2")
			require.NoError(t, err)
			requireSame(t, want, readAll(t, named, 3))
			first, err := f.FirstImage()
			require.NoError(t, err)
			require.Equal(t, 2, first.HDU)
		}
		pixels += len(want)
	}
	t.Logf("%d files, %d pixels equal in every bit", len(cases), pixels)
}

func readFloats(t *testing.T, path string) []float32 {
	t.Helper()
	raw, err := os.ReadFile(path)
	require.NoError(t, err)
	out := make([]float32, len(raw)/4)
	_, err = binary.Decode(raw, binary.LittleEndian, out)
	require.NoError(t, err)
	return out
}

// sweepSections reads sections at every edge of the image and of its amplifiers.
func sweepSections(t *testing.T, im *Image, all []float32) {
	t.Helper()
	w, h := im.Width(), im.Height()
	edges := func(n int) []int { return []int{0, 1, n/2 - 1, n / 2, n/2 + 1, n - 1, n} }
	for _, x0 := range edges(w) {
		for _, x1 := range edges(w) {
			for _, y0 := range edges(h) {
				for _, y1 := range edges(h) {
					if x1 < x0 || y1 < y0 {
						continue
					}
					var want []float32
					for y := y0; y < y1; y++ {
						want = append(want, all[y*w+x0:y*w+x1]...)
					}
					got := make([]float32, len(want))
					require.NoError(t, im.ReadSection(got, x0, x1, y0, y1))
					requireSame(t, want, got, x0, x1, y0, y1)
				}
			}
		}
	}
}

// rampImage is an image whose pixel i holds i modulo a prime, of any BITPIX.
func rampImage(t testing.TB, bitpix int, axes ...int) (*Image, []float32) {
	t.Helper()
	n := 1
	for _, a := range axes {
		n *= a
	}
	prime := 113 // fits every type
	if bitpix != 8 {
		prime = 32749
	}
	want := make([]float32, n)
	raw := make([]byte, 0, 8*n)
	for i := range want {
		v := i % prime
		want[i] = float32(v)
		switch bitpix {
		case 8:
			raw = append(raw, byte(v))
		case 16:
			raw = binary.BigEndian.AppendUint16(raw, uint16(v))
		case 32:
			raw = binary.BigEndian.AppendUint32(raw, uint32(v))
		case 64:
			raw = binary.BigEndian.AppendUint64(raw, uint64(v))
		case -32:
			raw = binary.BigEndian.AppendUint32(raw, math.Float32bits(float32(v)))
		case -64:
			raw = binary.BigEndian.AppendUint64(raw, math.Float64bits(float64(v)))
		}
	}
	raw = append(raw, make([]byte, padding(int64(len(raw))))...)
	f := openTest(t, writeTemp(t, "ramp.fits", join(headerBytes(primary(bitpix, axes...)...), raw)))
	im, err := f.FirstImage()
	require.NoError(t, err)
	return im, want
}

// Rows that end one pixel before, at, and one pixel behind a chunk of the reader, read from the
// first row, to the last, and one at a time, with guards at both ends of the buffer.
func TestReadRowsAtChunkBoundaries(t *testing.T) {
	for _, bitpix := range []int{8, 16, 32, 64, -32, -64} {
		chunk := chunkBytes / (max(bitpix, -bitpix) / 8)
		for _, width := range []int{chunk - 1, chunk, chunk + 1, 2*chunk + 1, chunk / 7} {
			const height, guard = 3, -12345
			im, want := rampImage(t, bitpix, width, height)
			for y0 := 0; y0 <= height; y0++ {
				for y1 := y0; y1 <= height; y1++ {
					buffer := make([]float32, (y1-y0)*width+2)
					buffer[0], buffer[len(buffer)-1] = guard, guard
					got := buffer[1 : len(buffer)-1]
					require.NoError(t, im.ReadRows(got, y0, y1))
					requireSame(t, want[y0*width:y1*width], got, bitpix, width, y0, y1)
					require.Equal(t, []float32{guard, guard}, []float32{buffer[0], buffer[len(buffer)-1]})
				}
			}
		}
	}
}

// Sections narrow and wide, so that rows are read one by one, several together, and by chunks.
func TestReadSectionAtChunkBoundaries(t *testing.T) {
	for _, width := range []int{64, 4000, chunkBytes/2 - 1, chunkBytes/2 + 1, chunkBytes + 1} {
		const height = 5
		im, all := rampImage(t, 16, width, height)
		for _, n := range []int{1, 2, width / 5, width / 3, width - 1, width} {
			for _, x0 := range []int{0, (width - n) / 2, width - n} {
				for _, rows := range [][2]int{{0, height}, {1, 2}, {2, 5}, {4, 5}, {3, 3}} {
					var want []float32
					for y := rows[0]; y < rows[1]; y++ {
						want = append(want, all[y*width+x0:y*width+x0+n]...)
					}
					got := make([]float32, len(want))
					require.NoError(t, im.ReadSection(got, x0, x0+n, rows[0], rows[1]))
					requireSame(t, want, got, width, n, x0, rows)
				}
			}
		}
	}
}

// Every short length, so that the loops that take several pixels at once meet every remainder.
func TestConvertEveryRemainder(t *testing.T) {
	for _, bitpix := range []int{8, 16, 32, 64, -32, -64} {
		for n := 1; n <= 17; n++ {
			im, want := rampImage(t, bitpix, n)
			requireSame(t, want, readAll(t, im, 1), bitpix, n)
			got := make([]float32, 1)
			for x := range n {
				require.NoError(t, im.ReadSection(got, x, x+1, 0, 1))
				require.Equal(t, want[x], got[0])
			}
		}
	}
}

func TestReadRefusesBadArguments(t *testing.T) {
	im, _ := rampImage(t, 16, 5, 4, 3)
	dst := make([]float32, 10)
	for name, err := range map[string]error{
		"rows before":     im.ReadRows(dst, -1, 1),
		"rows behind":     im.ReadRows(dst, 3, 5),
		"rows reversed":   im.ReadRows(dst[:0], 3, 2),
		"short buffer":    im.ReadRows(dst[:9], 0, 2),
		"long buffer":     im.ReadRows(dst, 0, 1),
		"plane before":    im.ReadPlaneRows(dst, -1, 0, 2),
		"plane behind":    im.ReadPlaneRows(dst, 3, 0, 2),
		"columns before":  im.ReadSection(dst[:4], -1, 1, 0, 2),
		"columns behind":  im.ReadSection(dst[:4], 4, 6, 0, 2),
		"columns swapped": im.ReadSection(dst[:0], 3, 2, 0, 2),
		"section short":   im.ReadSection(dst[:3], 0, 2, 0, 2),
	} {
		requireError(t, err, ErrRange, "HDU 0", "ramp.fits")
		require.Equal(t, make([]float32, 10), dst, name)
	}
}

// Readers in several goroutines, while another keeps closing the descriptor under them.
func TestReadersShareAFile(t *testing.T) {
	im, want := rampImage(t, 16, 501, 200)
	var readers, releaser sync.WaitGroup
	stop := make(chan struct{})
	releaser.Go(func() {
		for {
			select {
			case <-stop:
				return
			default:
				_ = im.file.Release()
			}
		}
	})
	var failures sync.Map
	for worker := range 4 {
		readers.Go(func() {
			rng := rand.New(rand.NewPCG(uint64(worker), 3))
			for range 300 {
				y0 := rng.IntN(200)
				y1 := y0 + 1 + rng.IntN(200-y0)
				got := make([]float32, (y1-y0)*501)
				if err := im.ReadRows(got, y0, y1); err != nil {
					failures.Store(err.Error(), true)
				}
				for i, v := range want[y0*501 : y1*501] {
					if got[i] != v {
						failures.Store("a pixel differs", true)
					}
				}
			}
		})
	}
	readers.Wait()
	close(stop)
	releaser.Wait()
	failures.Range(func(text, _ any) bool {
		t.Error(text)
		return true
	})
}

func TestReadAllocatesNothing(t *testing.T) {
	if raceEnabled {
		t.Log("the race detector makes sync.Pool drop buffers: allocations are counted without it")
		return
	}
	im, want := rampImage(t, 16, 1000, 300)
	dst := make([]float32, len(want))
	section := make([]float32, 100*300)
	require.Zero(t, testing.AllocsPerRun(50, func() {
		if im.ReadRows(dst, 0, 300) != nil || im.ReadSection(section, 300, 400, 0, 300) != nil {
			t.Error("reading failed")
		}
	}))
}

func TestReadAfterTheFileChanged(t *testing.T) {
	content := join(headerBytes(primary(16, 2)...), dataBytes([]int16{1, 2}))
	path := writeTemp(t, "frame.fits", content)
	f, err := Open(path)
	require.NoError(t, err)
	im, err := f.FirstImage()
	require.NoError(t, err)
	dst := make([]float32, 2)

	require.NoError(t, f.Release())
	require.NoError(t, f.Release())
	require.NoError(t, os.Rename(writeTemp(t, "other.fits", content), path))
	requireError(t, im.ReadRows(dst, 0, 1), ErrChanged, path)
	require.NoError(t, os.Remove(path))
	requireError(t, im.ReadRows(dst, 0, 1), os.ErrNotExist, path)
	require.NoError(t, f.Close())
	requireError(t, im.ReadRows(dst, 0, 1), ErrClosed, path)

	require.NoError(t, os.WriteFile(path, content, 0o600))
	f = openTest(t, path)
	im, err = f.FirstImage()
	require.NoError(t, err)
	require.NoError(t, os.Truncate(path, 2881))
	e := requireError(t, im.ReadRows(dst, 0, 1), ErrTruncated, path, "shorter")
	require.Equal(t, int64(2881), e.Offset)
	require.ErrorIs(t, e, ErrChanged)
}

// Two whole files, given byte by byte: see testdata/checksum.md for their source.
func TestReadKnownHDUs(t *testing.T) {
	for _, c := range []struct {
		axes  []int
		cards []string
		data  []byte
		want  []float32
	}{
		{[]int{4, 3}, nil, []byte("\xec\x78\xf0\x60\xf4\x48\xf8\x30\xfc\x18\x00\x00\x03\xe8\x07\xd0\x0b\xb8\x0f\xa0\x13\x88\x17\x70"),
			[]float32{-5000, -4000, -3000, -2000, -1000, 0, 1000, 2000, 3000, 4000, 5000, 6000}},
		{[]int{3, 2}, []string{"BSCALE  =                    1", "BZERO   =                32768"},
			[]byte("\x80\x00\x80\x01\xff\xff\x00\x00\x1c\x40\x7f\xff"), []float32{0, 1, 32767, 32768, 40000, 65535}},
	} {
		content := join(headerBytes(append(primary(16, c.axes...), c.cards...)...), dataBytes(c.data))
		f := openTest(t, writeTemp(t, strings.Repeat("k", len(c.want))+".fits", content))
		im, err := f.FirstImage()
		require.NoError(t, err)
		requireSame(t, c.want, readAll(t, im, 1))
	}
}
