package fitsutil

import (
	"bytes"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// memorySource is a file in memory.
type memorySource struct{ *bytes.Reader }

func (memorySource) Close() error { return nil }

// memoryFile scans bytes as a File.
func memoryFile(content []byte) (*File, error) {
	f := &File{path: "memory.fits", size: int64(len(content)), fd: memorySource{bytes.NewReader(content)}}
	if err := f.scan(); err != nil {
		return nil, err
	}
	return f, nil
}

// emptyPrimary comes before the extension under test.
var emptyPrimary = headerBytes(primary(8)...)

// tableBytes is a table HDU by hand: rows and columns as cards, then data.
func tableBytes(rowBytes, rows, pcount int, columns []string, data []byte) []byte {
	cards := extension("BINTABLE", 8, rowBytes, rows)
	cards[len(cards)-2] = fmt.Sprintf("PCOUNT  = %20d", pcount)
	count := 0
	for _, card := range columns {
		if strings.HasPrefix(card, "TFORM") {
			count++
		}
	}
	cards = append(cards, fmt.Sprintf("TFIELDS = %20d", count))
	return join(headerBytes(append(cards, columns...)...), dataBytes(data))
}

// badTables are table HDUs with a fault, and what becomes of them.
var badTables = map[string]struct {
	hdu    []byte
	opened error // of opening the file
	table  error // of the table
	column error // of its column X
	says   string
}{
	"no TFIELDS": {hdu: headerBytes(extension("BINTABLE", 8, 4, 0)...), table: ErrStructure, says: "card TFIELDS"},
	"text TFIELDS": {hdu: headerBytes(append(extension("BINTABLE", 8, 4, 0), "TFIELDS = 'one'")...),
		table: ErrStructure, says: "card TFIELDS"},
	"too many fields": {hdu: headerBytes(append(extension("BINTABLE", 8, 4, 0), "TFIELDS = 1000")...),
		table: ErrStructure, says: "card TFIELDS"},
	"lying rows":  {hdu: tableBytes(4, 1<<40, 0, []string{"TFORM1  = 'J'"}, make([]byte, 8)), opened: ErrTruncated},
	"overflowing": {hdu: tableBytes(1<<40, 1<<40, 0, []string{"TFORM1  = 'J'"}, nil), opened: ErrTooLarge},
	"columns too wide": {hdu: tableBytes(4, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = '2J'"}, make([]byte, 4)),
		table: ErrStructure, says: "card NAXIS1"},
	"columns too narrow": {hdu: tableBytes(8, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'J'"}, make([]byte, 8)),
		table: ErrStructure, says: "fill 4 of the 8 bytes"},
	"huge repeat": {hdu: tableBytes(4, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = '99999999999999999999J'"}, make([]byte, 4)),
		column: ErrBadCard, says: "out of range"},
	"no TFORM": {hdu: tableBytes(4, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 5"}, make([]byte, 4)),
		column: ErrType, says: "TFORM1"},
	"unknown letter": {hdu: tableBytes(4, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = '4Z'"}, make([]byte, 4)),
		column: ErrBadCard, says: "unknown type letter"},
	"behind an unknown letter": {hdu: tableBytes(8, 1, 0, []string{"TFORM1  = '4Z'", "TTYPE2  = 'X'", "TFORM2  = 'J'"}, make([]byte, 8)),
		column: ErrBadCard, says: "its place is not known, since TFORM1"},
	// As fitsio 0.3.0 writes its tables: all values would read as 0.
	"TSCAL 0": {hdu: tableBytes(4, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'J'", "TSCAL1  = 0"}, make([]byte, 4)),
		column: ErrBadCard, says: "TSCAL1 is 0"},
	"text TZERO": {hdu: tableBytes(4, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'J'", "TZERO1  = 'a'"}, make([]byte, 4)),
		column: ErrType, says: "TZERO1"},
	"text TNULL": {hdu: tableBytes(4, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'J'", "TNULL1  = 'a'"}, make([]byte, 4)),
		column: ErrType, says: "TNULL1"},
	// As fitsio 0.3.0 writes logicals.
	"logicals 0 and 1": {hdu: tableBytes(1, 2, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'L'"}, []byte{1, 0}),
		column: ErrStructure, says: "row 1: "},
	"undefined logical": {hdu: tableBytes(1, 2, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'L'"}, []byte{'T', 0}),
		column: ErrStructure, says: "row 2: "},
	"not ASCII": {hdu: tableBytes(2, 2, 0, []string{"TTYPE1  = 'X'", "TFORM1  = '2A'"}, []byte("ab\xc3\xa9")),
		column: ErrStructure, says: "row 2: "},
	"unsigned beyond int64": {hdu: tableBytes(8, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'K'", "TZERO1  = 9223372036854775808"}, make([]byte, 8)),
		column: ErrRange, says: "beyond a signed 64-bit integer"},
	"descriptor twice": {hdu: tableBytes(16, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = '2PJ'"}, make([]byte, 16)),
		column: ErrBadCard, says: "repeats"},
	"descriptor beyond the file": {hdu: tableBytes(8, 1, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'PJ(9)'"}, bytes.Repeat([]byte{0x7F}, 8)),
		column: ErrType, says: "variable length"},
}

func TestBadTables(t *testing.T) {
	for name, c := range badTables {
		t.Run(name, func(t *testing.T) {
			f, err := memoryFile(join(emptyPrimary, c.hdu))
			if c.opened != nil {
				require.ErrorIs(t, err, c.opened)
				return
			}
			require.NoError(t, err)
			table, err := f.TableAt(1)
			if c.table == nil {
				require.NoError(t, err)
				var column *Column
				column, err = table.Column("X")
				require.Nil(t, column)
				require.ErrorIs(t, err, c.column)
			} else {
				require.Nil(t, table)
				require.ErrorIs(t, err, c.table)
			}
			require.ErrorContains(t, err, c.says)
			var typed *Error
			require.ErrorAs(t, err, &typed)
			require.Equal(t, "memory.fits", typed.File)
			require.Equal(t, 1, typed.HDU)
		})
	}
}

func TestMissingTables(t *testing.T) {
	f, err := memoryFile(join(emptyPrimary, tableBytes(4, 1, 0, []string{"EXTNAME = 'STEPS'", "TFORM1  = 'J'"}, make([]byte, 4)), headerBytes(append(extension("IMAGE", 8), "EXTNAME = 'CODE'")...)))
	require.NoError(t, err)
	_, err = f.Table("FRAMES")
	require.ErrorIs(t, err, ErrMissingHDU)
	require.ErrorContains(t, err, "STEPS")
	_, err = f.Table("CODE")
	require.ErrorIs(t, err, ErrType)
	for _, index := range []int{-1, 3} {
		_, err = f.TableAt(index)
		require.ErrorIs(t, err, ErrMissingHDU)
	}
	table, err := f.Table("steps")
	require.NoError(t, err)
	require.Equal(t, 1, table.Rows())
}

// seedTables are HDUs for FuzzTable: every type, and every fault.
func seedTables(f *testing.F) [][]byte {
	f.Helper()
	path := filepath.Join(f.TempDir(), "seeds.fits")
	seeds := [][]byte{
		tableBytes(2, 3, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'I'", "TZERO1  = 32768", "TNULL1  = -5"}, []byte{0, 1, 0, 2, 0xFF, 0xFB}),
		tableBytes(2, 2, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'I'", "TZERO1  = 1.5", "TSCAL1  = 0.1", "TNULL1  = 1"}, []byte{0, 1, 0, 2}),
		tableBytes(8, 2, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'K'", "TZERO1  = 9223372036854775808"}, bytes.Repeat([]byte{0x80}, 16)),
		tableBytes(1, 2, 0, []string{"TTYPE1  = 'X'", "TFORM1  = 'B'", "TZERO1  = -128"}, []byte{0, 255}),
		tableBytes(29, 1, 16, []string{"TTYPE1  = 'P'", "TFORM1  = 'PD(2)'", "TTYPE2  = 'X'", "TFORM2  = '9X'", "TTYPE3  = 'C'", "TFORM3  = 'C'", "TTYPE4  = 'A'", "TFORM4  = '3A1'", "TTYPE5  = 'K'", "TFORM5  = 'K'"}, make([]byte, 45)),
		tableBytes(0, 5, 0, []string{"TTYPE1  = 'X'", "TFORM1  = '0A'", "TTYPE2  = 'Y'", "TFORM2  = '0E'"}, nil),
	}
	for _, rows := range []int{6, 40} {
		require.NoError(f, WriteFile(path, nil, everyColumn(rows)))
		content, err := os.ReadFile(path)
		require.NoError(f, err)
		seeds = append(seeds, content[len(emptyPrimary):])
	}
	for _, c := range badTables {
		seeds = append(seeds, c.hdu)
	}
	return seeds
}

// FuzzTable: the bytes of an extension give an error or tables whose readable
// columns can be written and read back equal, twice to the same bytes; nothing
// panics and no header makes us allocate out of proportion to the bytes.
func FuzzTable(f *testing.F) {
	for _, seed := range seedTables(f) {
		f.Add(seed)
	}
	// A file system in memory, as WriteFile syncs.
	folder := "/dev/shm"
	if _, err := os.Stat(folder); err != nil {
		folder = os.TempDir()
	}
	folder, err := os.MkdirTemp(folder, "fuzztable")
	require.NoError(f, err)
	f.Cleanup(func() { os.RemoveAll(folder) })
	path := filepath.Join(folder, "x.fits")
	f.Fuzz(func(t *testing.T, hdu []byte) {
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		tables := readTables(join(emptyPrimary, hdu))
		runtime.ReadMemStats(&after)
		// 64 bytes a byte: strings of one character; 8 MiB: buffers, cards.
		if grown := after.TotalAlloc - before.TotalAlloc; grown > uint64(64*len(hdu))+8<<20 {
			t.Fatalf("%d bytes allocated for %d of input", grown, len(hdu))
		}
		for _, table := range tables {
			requireRewritable(t, path, table)
		}
	})
}

// readTables reads every table of a file.
func readTables(content []byte) []*Table {
	file, err := memoryFile(content)
	if err != nil {
		return nil
	}
	var tables []*Table
	for _, u := range file.HDUs() {
		if table, err := file.TableAt(u.Index); err == nil {
			tables = append(tables, table)
		}
	}
	return tables
}

func requireRewritable(t *testing.T, path string, table *Table) {
	t.Helper()
	kept := &Table{Name: "T", Header: table.Header, rows: table.rows}
	for i, c := range table.Columns {
		if c.err != nil {
			require.Nil(t, c.Data)
			continue
		}
		c.Name = fmt.Sprintf("C%d", i) // foreign names may be empty or doubled
		kept.Columns = append(kept.Columns, c)
	}
	require.NoError(t, WriteFile(path, nil, kept))
	first, err := os.ReadFile(path)
	require.NoError(t, err)
	again := readTables(first)
	require.Len(t, again, 1)
	requireSameColumns(t, kept, again[0])
	require.Equal(t, kept.Header.Cards(), again[0].Header.Cards())
	require.NoError(t, WriteFile(path, nil, again[0]))
	second, err := os.ReadFile(path)
	require.NoError(t, err)
	require.Equal(t, first, second)
}
