package fitsutil

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// FuzzHeader: a header that is read is written back byte for byte, and every card whose value
// is understood reads back the same after it was written anew; or there is a typed error and no
// header.
func FuzzHeader(f *testing.F) {
	for _, seed := range [][]byte{
		headerBytes(primary(16, 4, 3)...),
		headerBytes("SIMPLE  = T", "A       = 'one &' / first", "CONTINUE  'two&' / second", "CONTINUE  ''", "COMMENT   x", "HISTORY   y"),
		headerBytes("SIMPLE  = T", "HIERARCH ESO TEL AIRM = 1.25 / c", "U       =", "Z       = (1.5, -2)", "D       = 1.5D+03", "bad     4"),
		headerBytes("SIMPLE  = T", "Q       = 'O''HARA' / '", "Q2      = ''''", "N       = 9223372036854775808", "X       = 12:30:00"),
		unended("SIMPLE  = T"), []byte("SIMPLE  = "), nil,
	} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, block []byte) {
		h, n, err := parseHeader(block, "fuzz.fits", 0, 0)
		if err != nil {
			if h != nil {
				t.Fatal("a header came with an error")
			}
			requireTyped(t, err)
			return
		}
		written, err := h.encode()
		if err != nil || len(written) != n {
			t.Fatalf("%d bytes became %d (%v)", n, len(written), err)
		}
		end := bytes.LastIndex(written, []byte("END"))
		if !bytes.Equal(written[:end+3], block[:end+3]) {
			t.Fatalf("changed:\n%q\n%q", block[:end+3], written[:end+3])
		}
		for _, c := range h.Cards() {
			checkRewritten(t, c)
		}
	})
}

func requireTyped(t *testing.T, err error) {
	t.Helper()
	var e *Error
	if !errors.As(err, &e) || e.What == "" || e.Err == nil {
		t.Fatalf("not a whole *Error: %#v", err)
	}
	if strings.Contains(err.Error(), "\n") {
		t.Fatalf("more than one line: %q", err)
	}
}

// checkRewritten writes a card anew and reads it.
func checkRewritten(t *testing.T, c Card) {
	t.Helper()
	fresh := NewHeader(Card{Key: "SIMPLE", Value: true}, c)
	written, err := fresh.encode()
	if err != nil { // such as a lowercase keyword
		requireTyped(t, err)
		return
	}
	back, _, err := parseHeader(written, "", 0, 0)
	if err != nil {
		t.Fatal(err)
	}
	got := back.Cards()[1]
	if got.Key != c.Key || !sameValue(got.Value, c.Value) {
		t.Fatalf("%+v came back as %+v", c, got)
	}
}

// FuzzOpen: whole files, with their images and tables, give values or typed errors, and never
// panic. Packed files go by a file on disk, others by memory.
func FuzzOpen(f *testing.F) {
	whole := join(headerBytes(primary(16, 4, 3)...), dataBytes(make([]int16, 12)))
	table := join(headerBytes(append(extension("BINTABLE", 8, 6, 2), "TFIELDS =                    2", "TTYPE1  = 'A'", "TFORM1  = '1J'",
		"TTYPE2  = 'B'", "TFORM2  = '2A'", "EXTNAME = 'T'")...), dataBytes(make([]byte, 12)))
	cube := join(headerBytes(append(extension("IMAGE", -32, 3, 2, 2), "BZERO   = 2.5", "BSCALE  = 0.5")...), dataBytes(make([]float32, 12)))
	for _, seed := range [][]byte{whole, join(whole, table), join(headerBytes(primary(8)...), cube, table), packed(f, whole)} {
		f.Add(seed)
	}
	for _, bad := range badFiles() {
		if len(bad.content) < 1<<16 {
			f.Add(bad.content)
		}
	}
	dir := f.TempDir()
	f.Fuzz(func(t *testing.T, content []byte) {
		file, err := openFuzzed(dir, content)
		if err != nil {
			if file != nil {
				t.Fatal("a file came with an error")
			}
			requireTyped(t, err)
			return
		}
		for _, u := range file.HDUs() {
			readFuzzed(t, file, u)
		}
		if err := file.Close(); err != nil {
			t.Fatal(err)
		}
	})
}

func openFuzzed(dir string, content []byte) (*File, error) {
	if !bytes.HasPrefix(content, []byte{0x1f, 0x8b}) {
		return openBytes(content)
	}
	path := filepath.Join(dir, "packed.fits.gz")
	if err := os.WriteFile(path, content, 0o600); err != nil {
		return nil, err
	}
	return OpenScratch(path, dir)
}

// readFuzzed reads all of an HDU.
func readFuzzed(t *testing.T, file *File, u *HDU) {
	t.Helper()
	if table, err := file.TableAt(u.Index); err == nil {
		_ = table.Rows()
	} else {
		requireTyped(t, err)
	}
	im, err := file.Image(u.Index)
	if err != nil {
		requireTyped(t, err)
		return
	}
	row := make([]float32, im.Width())
	for plane := range im.Planes() {
		for y := range im.Height() {
			if err := im.ReadPlaneRows(row, plane, y, y+1); err != nil {
				t.Fatal(err) // the file was found to be whole
			}
		}
	}
	half := im.Width() / 2
	if err := im.ReadSection(make([]float32, half*im.Height()), half, 2*half, 0, im.Height()); err != nil {
		t.Fatal(err)
	}
}
