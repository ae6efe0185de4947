package fitsutil

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// headerBytes makes a header by hand: each text is one record, padded to 80 bytes; END and
// spaces up to a whole block follow.
func headerBytes(records ...string) []byte {
	var out bytes.Buffer
	for _, r := range append(records, "END") {
		fmt.Fprintf(&out, "%-80.80s", r)
	}
	return append(out.Bytes(), bytes.Repeat([]byte{' '}, int(padding(int64(out.Len()))))...)
}

// unended is a header without its END card, cut at a whole block.
func unended(records ...string) []byte {
	return bytes.Replace(headerBytes(records...), []byte("END "), []byte("    "), 1)
}

// dataBytes is big-endian data filled up to a whole block.
func dataBytes(data any) []byte {
	var out bytes.Buffer
	if err := binary.Write(&out, binary.BigEndian, data); err != nil {
		panic("internal error: " + err.Error())
	}
	return append(out.Bytes(), make([]byte, padding(int64(out.Len())))...)
}

// primary gives the mandatory cards of a primary array.
func primary(bitpix int, axes ...int) []string {
	cards := []string{"SIMPLE  =                    T", fmt.Sprintf("BITPIX  = %20d", bitpix), fmt.Sprintf("NAXIS   = %20d", len(axes))}
	for i, n := range axes {
		cards = append(cards, fmt.Sprintf("%-8s= %20d", axisKey(i), n))
	}
	return cards
}

// extension gives the mandatory cards of an extension.
func extension(kind string, bitpix int, axes ...int) []string {
	cards := primary(bitpix, axes...)
	cards[0] = fmt.Sprintf("XTENSION= '%-8s'", kind)
	return append(cards, "PCOUNT  =                    0", "GCOUNT  =                    1")
}

func join(parts ...[]byte) []byte { return bytes.Join(parts, nil) }

// writeTemp puts bytes into a file of the test's own folder.
func writeTemp(t testing.TB, name string, content []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	require.NoError(t, os.WriteFile(path, content, 0o600))
	return path
}

// openTest opens a file that the test closes at its end.
func openTest(t testing.TB, path string) *File {
	t.Helper()
	f, err := Open(path)
	require.NoError(t, err)
	t.Cleanup(func() { require.NoError(t, f.Close()) })
	return f
}

// openBytes makes a File of bytes in memory.
func openBytes(content []byte) (*File, error) {
	f := &File{path: "memory.fits", size: int64(len(content)), open: func() (source, error) {
		return memory{bytes.NewReader(content)}, nil
	}}
	if err := f.scan(); err != nil {
		return nil, err
	}
	return f, nil
}

type memory struct{ *bytes.Reader }

func (memory) Close() error { return nil }

// requireError checks that an error is one plain *Error in one line that names its file.
func requireError(t *testing.T, err error, sentinel error, texts ...string) *Error {
	t.Helper()
	require.Error(t, err)
	require.ErrorIs(t, err, sentinel)
	var e *Error
	require.ErrorAs(t, err, &e)
	for _, text := range append(texts, e.File) {
		require.Contains(t, err.Error(), text)
	}
	require.NotContains(t, err.Error(), "\n")
	require.False(t, strings.HasSuffix(err.Error(), "; "))
	return e
}
