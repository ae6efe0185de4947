package fitsutil

import (
	"bytes"
	"compress/gzip"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

// packed packs bytes by gzip.
func packed(t testing.TB, content []byte) []byte {
	t.Helper()
	var out bytes.Buffer
	w := gzip.NewWriter(&out)
	_, err := w.Write(content)
	require.NoError(t, err)
	require.NoError(t, w.Close())
	return out.Bytes()
}

func requireEmpty(t *testing.T, dir string) {
	t.Helper()
	left, err := os.ReadDir(dir)
	require.NoError(t, err)
	require.Empty(t, left)
}

// noise is an image that does not pack well, so that its packed form has many bytes to damage.
func noise(width, height int) ([]byte, []float32) {
	rng := rand.New(rand.NewPCG(1, 2))
	stored, want := make([]int16, width*height), make([]float32, width*height)
	for i := range stored {
		stored[i] = int16(rng.Uint32())
		want[i] = float32(stored[i])
	}
	return join(headerBytes(primary(16, width, height)...), dataBytes(stored)), want
}

func TestGzipIsUnpackedOnceAndRemoved(t *testing.T) {
	content, want := noise(300, 200)
	half := len(content) / 2
	for name, stream := range map[string][]byte{
		"one member":  packed(t, content),
		"two members": join(packed(t, content[:half]), packed(t, content[half:])),
	} {
		t.Run(name, func(t *testing.T) {
			scratch := t.TempDir()
			f, err := OpenScratch(writeTemp(t, "frame.fits.gz", stream), scratch)
			require.NoError(t, err)
			left, err := os.ReadDir(scratch)
			require.NoError(t, err)
			require.Len(t, left, 1)
			im, err := f.FirstImage()
			require.NoError(t, err)
			got := make([]float32, len(want))
			require.NoError(t, f.Release())
			require.NoError(t, im.ReadRows(got, 0, 200))
			require.Equal(t, want, got)
			require.NoError(t, f.Close())
			require.NoError(t, f.Close())
			requireEmpty(t, scratch)
		})
	}
}

func TestGzipRefusesDamage(t *testing.T) {
	content, _ := noise(300, 200)
	good := packed(t, content)
	damage := func(at int, mask byte) []byte {
		bad := bytes.Clone(good)
		bad[(at+len(bad))%len(bad)] ^= mask
		return bad
	}
	for name, c := range map[string]struct {
		stream    []byte
		sentinels []error
		text      string
	}{
		"magic alone":        {good[:2], []error{ErrTruncated, ErrGzip}, "cut short"},
		"cut in its header":  {good[:7], []error{ErrTruncated, ErrGzip}, "cut short"},
		"cut in the middle":  {good[:len(good)/2], []error{ErrTruncated, ErrGzip}, "cut short"},
		"cut in its trailer": {good[:len(good)-5], []error{ErrTruncated, ErrGzip}, "cut short"},
		"corrupt CRC":        {damage(-8, 1), []error{ErrGzip}, "checksum"},
		"corrupt length":     {damage(-4, 1), []error{ErrGzip}, "checksum or length"},
		"unknown method":     {damage(2, 0xff), []error{ErrGzip}, "header is damaged"},
		"bytes behind":       {join(good, []byte("trailing junk")), []error{ErrGzip}, "other bytes follow"},
		"corrupt block type": {damage(10, 0x06), []error{ErrGzip}, "damaged"},
		"no FITS inside":     {packed(t, []byte("plain text")), []error{ErrNotFITS}, "does not start with"},
		"truncated inside":   {packed(t, content[:4000]), []error{ErrTruncated}, "before its data do"},
		"nothing inside":     {packed(t, nil), []error{ErrNotFITS}, "empty"},
	} {
		t.Run(name, func(t *testing.T) {
			scratch := t.TempDir()
			path := writeTemp(t, "bad.fits.gz", c.stream)
			f, err := OpenScratch(path, scratch)
			require.Nil(t, f)
			for _, s := range c.sentinels {
				requireError(t, err, s, path, c.text)
			}
			requireEmpty(t, scratch)
		})
	}
}

func TestGzipScratchFolder(t *testing.T) {
	content, _ := noise(3, 2)
	path := writeTemp(t, "frame.fits.gz", packed(t, content))
	_, err := OpenScratch(path, filepath.Join(t.TempDir(), "missing"))
	requireError(t, err, os.ErrNotExist, path, "missing", "name a folder")
}

// The size that gzip tells is modulo 4 GiB: a packed size above it means more.
func TestGzipRoomAboveFourGiB(t *testing.T) {
	f, err := openTrailer(7)
	require.NoError(t, err)
	u := unpacker{dir: "there", free: func(string) (int64, bool) { return 1 << 32, true }}
	requireError(t, u.checkRoom(f), ErrNoRoom, "unpacks to 4294967303 bytes")
	u.free = func(string) (int64, bool) { return 1<<32 + 7, true }
	require.NoError(t, u.checkRoom(f))
}

// openTrailer is a packed file of 8000 bytes that says it unpacks to fewer.
func openTrailer(size byte) (*File, error) {
	content := make([]byte, 8000)
	content[len(content)-4] = size
	return &File{path: "big.gz", size: int64(len(content)), fd: memory{bytes.NewReader(content)}}, nil
}
