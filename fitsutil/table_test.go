package fitsutil

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// everyColumn is a table of every column type with hard values.
func everyColumn(rows int) *Table {
	random := rand.New(rand.NewPCG(11, 12))
	types := everyType(random, rows)
	logic, vector, texts, words := make([]bool, rows), make([]float64, 8*rows), make([]string, rows), []string{"", "it's", "  lead", "a b", "12345678"}
	for i := range rows {
		logic[i], texts[i] = random.IntN(2) == 0, words[i%len(words)]
	}
	for i := range vector {
		vector[i] = random.NormFloat64()
	}
	null := int64(-1)
	return &Table{
		Name:   "TYPES",
		Header: NewHeader(Card{"OBSERVER", "it's me", "extra card"}, Card{"", nil, ""}, hardCards[3]),
		Columns: []Column{
			{Name: "LOGIC", Format: "L", Data: logic},
			{Name: "LOGIC2", Format: "2L", Data: append(append([]bool{}, logic...), logic...)},
			{Name: "BYTE", Format: "1B", Data: types["u1"]},
			{Name: "SHORT", Format: "I", Data: types["i2"], Unit: "adu"},
			{Name: "INT", Format: "J", Data: types["i4"], Null: &null},
			{Name: "LONG", Format: "K", Data: types["i8"]},
			{Name: "FLOAT", Format: "E", Data: types["f4"], Unit: "ct"},
			{Name: "DOUBLE", Format: "D", Data: types["f8"], Unit: "nm"},
			{Name: "COEF", Format: "8D", Data: vector, Unit: "nm"},
			{Name: "TEXT", Format: "8A", Data: texts},
			{Name: "WIDE", Format: "33A", Data: texts},
		},
	}
}

func roundTrip(t testing.TB, tables ...*Table) []*Table {
	t.Helper()
	path := filepath.Join(t.TempDir(), "tables.fits")
	hdus := make([]any, len(tables))
	for i := range tables {
		hdus[i] = tables[i]
	}
	require.NoError(t, WriteFile(path, nil, hdus...))
	f, err := Open(path)
	require.NoError(t, err)
	defer f.Close()
	read := make([]*Table, len(tables))
	for i := range tables {
		read[i], err = f.Table(tables[i].Name)
		require.NoError(t, err)
	}
	return read
}

// requireSameColumns compares bit by bit, so NaN equals NaN.
func requireSameColumns(t testing.TB, want, got *Table) {
	t.Helper()
	require.Equal(t, want.Rows(), got.Rows())
	require.Len(t, got.Columns, len(want.Columns))
	for i := range want.Columns {
		w, g := want.Columns[i], got.Columns[i]
		require.Equal(t, w.Name, g.Name)
		require.Equal(t, w.Format, g.Format)
		require.Equal(t, w.Unit, g.Unit)
		require.Equal(t, w.Null, g.Null)
		require.NoError(t, g.err)
		require.IsType(t, w.Data, g.Data)
		require.Equal(t, bitsOf(w.Data), bitsOf(g.Data), w.Name)
	}
}

// bitsOf makes floats comparable.
func bitsOf(data any) any {
	switch d := data.(type) {
	case []float32:
		bits := make([]uint32, len(d))
		for i, v := range d {
			bits[i] = math.Float32bits(v)
		}
		return bits
	case []float64:
		bits := make([]uint64, len(d))
		for i, v := range d {
			bits[i] = math.Float64bits(v)
		}
		return bits
	}
	return data
}

func TestTableRoundTrip(t *testing.T) {
	// 500 rows of 136 bytes are within a buffer, 9000 are several.
	for _, rows := range []int{0, 1, 2, 500, 9000} {
		t.Run(fmt.Sprint(rows), func(t *testing.T) {
			want := everyColumn(max(rows, 6))
			if rows < 6 {
				for i := range want.Columns {
					format, err := parseFormat(want.Columns[i].Format)
					require.NoError(t, err)
					data := reflect.ValueOf(want.Columns[i].Data)
					want.Columns[i].Data = data.Slice(0, rows*format.elements()).Interface()
				}
			}
			got := roundTrip(t, want)[0]
			requireSameColumns(t, want, got)
			require.Equal(t, want.Header.Cards(), got.Header.Cards()[:3])
		})
	}
}

func TestTableWithoutColumnsOrWidth(t *testing.T) {
	bare := &Table{Name: "BARE"}
	thin := &Table{Name: "THIN", Columns: []Column{
		{Name: "NONE", Format: "0J", Data: []int32{}}, {Name: "NOTEXT", Format: "0A", Data: []string{}}, {Name: "X", Format: "B", Data: []uint8{1, 2}}}}
	read := roundTrip(t, bare, thin)
	require.Empty(t, read[0].Columns)
	require.Zero(t, read[0].Rows())
	requireSameColumns(t, thin, read[1])
	require.Equal(t, 2, read[1].Rows())
}

// TestCrosscheckWrittenTables: astropy and fitsverify read what we wrote.
func TestCrosscheckWrittenTables(t *testing.T) {
	folder := t.TempDir()
	tables := []*Table{everyColumn(1000), everyColumn(6), {Name: "EMPTY", Header: NewHeader(Card{"OBSERVER", "it's me", "extra card"}),
		Columns: []Column{{Name: "STEP", Format: "J", Data: []int32{}}, {Name: "TEXT", Format: "8A", Data: []string{}}, {Name: "COEF", Format: "8D", Data: []float64{}, Unit: "nm"}}}}
	tables[1].Name = "SHORT"
	path := filepath.Join(folder, "tables.fits")
	require.NoError(t, WriteFile(path, nil, tables[0], tables[1], tables[2]))
	requireSums(t, path)
	var expected strings.Builder
	expected.WriteString("{")
	values := 0
	for i, table := range tables {
		fmt.Fprintf(&expected, "%s%q: {", strings.Repeat(",", min(i, 1)), table.Name)
		for j, c := range table.Columns {
			text, err := json.Marshal(map[string]any{"format": strings.TrimPrefix(c.Format, "1"), "unit": c.Unit, "null": c.Null, "rows": table.Rows(), "values": jsonValues(c.Data)})
			require.NoError(t, err)
			fmt.Fprintf(&expected, "%s%q: %s", strings.Repeat(",", min(j, 1)), c.Name, text)
			values += dataLength(c.Data)
		}
		expected.WriteString("}")
	}
	expected.WriteString("}")
	list := filepath.Join(folder, "expected.json")
	require.NoError(t, os.WriteFile(list, []byte(expected.String()), 0o644))
	require.Equal(t, fmt.Sprintf("%d values\n", values), outside.Python(t, "fitsutil_table_read.py", path, list))
	requireFitsverify(t, folder, []string{"tables.fits"})
}

// jsonValues gives values that JSON can hold: NaN as null, infinities as
// numbers beyond float64, which Python reads as such.
func jsonValues(data any) []any {
	v := reflect.ValueOf(data)
	out := make([]any, v.Len())
	for i := range out {
		out[i] = v.Index(i).Interface()
		if x, ok := out[i].(float32); ok {
			out[i] = float64(x)
		}
		if x, ok := out[i].(float64); ok && math.IsNaN(x) {
			out[i] = nil
		} else if ok && math.IsInf(x, 0) {
			out[i] = json.RawMessage(strings.Replace(fmt.Sprint(math.Copysign(1, x)), "1", "1e999", 1))
		}
	}
	return out
}

// TestCrosscheckReadTables: astropy writes tables of every column type and we
// read them.
func TestCrosscheckReadTables(t *testing.T) {
	folder := t.TempDir()
	var expected map[string]map[string][]any
	decoder := json.NewDecoder(strings.NewReader(outside.Python(t, "fitsutil_table_write.py", folder)))
	decoder.UseNumber()
	require.NoError(t, decoder.Decode(&expected))
	f, err := Open(filepath.Join(folder, "tables.fits"))
	require.NoError(t, err)
	defer f.Close()
	require.Len(t, expected, 4)
	columns, values := 0, 0
	for name, table := range expected {
		got, err := f.Table(name)
		require.NoError(t, err)
		for key, want := range table {
			column, err := got.Column(key)
			require.NoError(t, err)
			requireValues(t, name+"."+key, want, column.Data)
			columns++
			values += len(want)
		}
		observer, err := got.Header.Str("OBSERVER")
		require.NoError(t, err)
		require.Equal(t, "it's me", observer)
	}
	t.Logf("%d columns, %d values", columns, values)
	require.Equal(t, 28, columns)
	requireScaled(t, f)
	requireRefusals(t, f)
	// And what was read can be written, and reads the same.
	for _, name := range []string{"TYPES", "SCALED", "EMPTY"} {
		table, err := f.Table(name)
		require.NoError(t, err)
		requireSameColumns(t, table, roundTrip(t, table)[0])
	}
}

// requireValues compares with JSON numbers, exactly.
func requireValues(t *testing.T, name string, want []any, data any) {
	t.Helper()
	got := reflect.ValueOf(data)
	require.Equal(t, len(want), got.Len(), name)
	for i, w := range want {
		g := got.Index(i)
		switch g.Kind() {
		case reflect.Float32, reflect.Float64:
			if w == nil {
				require.True(t, math.IsNaN(g.Float()), "%s value %d", name, i)
				continue
			}
			x, err := w.(json.Number).Float64()
			require.NoError(t, err)
			require.Equal(t, x, g.Float(), "%s value %d", name, i)
		case reflect.Uint8:
			require.Equal(t, string(w.(json.Number)), fmt.Sprint(g.Uint()), "%s value %d", name, i)
		case reflect.Int16, reflect.Int32, reflect.Int64:
			require.Equal(t, string(w.(json.Number)), fmt.Sprint(g.Int()), "%s value %d", name, i)
		default:
			require.Equal(t, w, g.Interface(), "%s value %d", name, i)
		}
	}
}

func requireScaled(t *testing.T, f *File) {
	t.Helper()
	table, err := f.Table("scaled") // case does not count
	require.NoError(t, err)
	formats := map[string]string{"S8": "1I", "U16": "1J", "U32": "1K", "U64": "K", "QUARTERS": "1D", "NULLED": "J", "FSCALED": "1D"}
	for name, format := range formats {
		column, err := table.Column(strings.ToLower(name))
		require.NoError(t, err)
		require.Equal(t, format, column.Format, name)
	}
	_, err = table.Int32s("NULLED")
	require.ErrorIs(t, err, ErrRange)
	floats, err := table.Float64s("NULLED")
	require.NoError(t, err)
	require.Equal(t, 2.0, floats[1])
	require.True(t, math.IsNaN(floats[2]))
}

// requireRefusals: columns of the types that are not read fail when asked for,
// and only then.
func requireRefusals(t *testing.T, f *File) {
	t.Helper()
	table, err := f.Table("HARD")
	require.NoError(t, err)
	for name, says := range map[string]string{"RAGGED": "variable length", "RAGGED64": "variable length", "BITS": "bits",
		"COMPLEX": "complex", "DCOMPLEX": "complex", "WORDS": "array of strings"} {
		column, err := table.Column(name)
		require.Nil(t, column)
		require.ErrorIs(t, err, ErrType)
		require.ErrorContains(t, err, says)
		var typed *Error
		require.ErrorAs(t, err, &typed)
		require.Equal(t, 3, typed.HDU)
		require.Equal(t, f.Path(), typed.File)
		_, err = table.Float64s(name)
		require.ErrorIs(t, err, ErrType)
	}
	err = WriteFile(filepath.Join(t.TempDir(), "x.fits"), nil, table)
	require.ErrorIs(t, err, ErrType, "a table with holes is not written")
}

func TestGetters(t *testing.T) {
	null := int64(3)
	table := &Table{Name: "T", Columns: []Column{
		{Name: "L", Format: "L", Data: []bool{true, false}},
		{Name: "B", Format: "B", Data: []uint8{1, 255}},
		{Name: "I", Format: "I", Data: []int16{-1, 2}},
		{Name: "J", Format: "J", Data: []int32{-1, 2}},
		{Name: "K", Format: "K", Data: []int64{-1, 1 << 40}},
		{Name: "N", Format: "J", Data: []int32{3, 4}, Null: &null},
		{Name: "E", Format: "E", Data: []float32{0.5, 2}},
		{Name: "D", Format: "D", Data: []float64{0.1, 2}},
		{Name: "A", Format: "4A", Data: []string{"a", "b"}},
	}}
	type result struct {
		value any
		err   error
	}
	get := func(value any, err error) result { return result{value, err} }
	cases := []struct {
		name string
		got  result
		want any // a value or an error
	}{
		{"Bools L", get(table.Bools("L")), []bool{true, false}},
		{"Bools B", get(table.Bools("B")), ErrType},
		{"Strings A", get(table.Strings("a")), []string{"a", "b"}},
		{"Strings L", get(table.Strings("L")), ErrType},
		{"Float32s E", get(table.Float32s("E")), []float32{0.5, 2}},
		{"Float32s D", get(table.Float32s("D")), ErrType},
		{"Int32s B", get(table.Int32s("B")), []int32{1, 255}},
		{"Int32s I", get(table.Int32s("I")), []int32{-1, 2}},
		{"Int32s J", get(table.Int32s("J")), []int32{-1, 2}},
		{"Int32s K", get(table.Int32s("K")), ErrRange},
		{"Int32s N", get(table.Int32s("N")), ErrRange},
		{"Int32s E", get(table.Int32s("E")), ErrType},
		{"Int64s I", get(table.Int64s("I")), []int64{-1, 2}},
		{"Int64s K", get(table.Int64s("K")), []int64{-1, 1 << 40}},
		{"Int64s A", get(table.Int64s("A")), ErrType},
		{"Float64s B", get(table.Float64s("B")), []float64{1, 255}},
		{"Float64s K", get(table.Float64s("K")), []float64{-1, 1 << 40}},
		{"Float64s E", get(table.Float64s("E")), []float64{0.5, 2}},
		{"Float64s D", get(table.Float64s("D")), []float64{0.1, 2}},
		{"Float64s L", get(table.Float64s("L")), ErrType},
		{"Float64s none", get(table.Float64s("NONE")), ErrMissingColumn},
	}
	for _, c := range cases {
		if want, ok := c.want.(error); ok {
			require.ErrorIs(t, c.got.err, want, c.name)
			require.Zero(t, reflect.ValueOf(c.got.value).Len(), c.name)
			continue
		}
		require.NoError(t, c.got.err, c.name)
		require.Equal(t, c.want, c.got.value, c.name)
	}
	table.Columns[1].Name = "l"
	_, err := table.Bools("L")
	require.ErrorIs(t, err, ErrStructure, "two columns of one name")
}

func TestTableWriteRefuses(t *testing.T) {
	null, far := int64(3), int64(1<<20)
	ok := Column{Name: "OK", Format: "J", Data: []int32{1, 2}}
	cases := map[string]struct {
		table Table
		says  string
	}{
		"no name":        {Table{Columns: []Column{ok}}, "no name"},
		"column name":    {Table{Name: "T", Columns: []Column{{Format: "J", Data: []int32{1}}}}, "empty or taken"},
		"name twice":     {Table{Name: "T", Columns: []Column{ok, {Name: "ok", Format: "J", Data: []int32{1, 2}}}}, "empty or taken"},
		"no data":        {Table{Name: "T", Columns: []Column{{Name: "X", Format: "J"}}}, "<nil>"},
		"no format":      {Table{Name: "T", Columns: []Column{{Name: "X", Data: []int32{1}}}}, "no type letter"},
		"other format":   {Table{Name: "T", Columns: []Column{{Name: "X", Format: "E", Data: []int32{1}}}}, "do not go with"},
		"heap":           {Table{Name: "T", Columns: []Column{{Name: "X", Format: "PJ", Data: []int32{1}}}}, "do not go with"},
		"unsigned":       {Table{Name: "T", Columns: []Column{{Name: "X", Format: "I", Data: []uint16{1}}}}, "do not go with"},
		"rows":           {Table{Name: "T", Columns: []Column{ok, {Name: "X", Format: "J", Data: []int32{1}}}}, "need 2 values, not 1"},
		"vector":         {Table{Name: "T", Columns: []Column{ok, {Name: "X", Format: "8D", Data: make([]float64, 15)}}}, "need 16 values, not 15"},
		"broken vector":  {Table{Name: "T", Columns: []Column{{Name: "X", Format: "8D", Data: make([]float64, 15)}}}, "need 8 values, not 15"},
		"long string":    {Table{Name: "T", Columns: []Column{{Name: "X", Format: "2A", Data: []string{"ab", "abc"}}}}, "row 2, \"abc\""},
		"not ASCII":      {Table{Name: "T", Columns: []Column{{Name: "X", Format: "9A", Data: []string{"\u00e9"}}}}, "row 1"},
		"null of float":  {Table{Name: "T", Columns: []Column{{Name: "X", Format: "E", Data: []float32{1}, Null: &null}}}, "cannot hold Null"},
		"null too large": {Table{Name: "T", Columns: []Column{{Name: "X", Format: "I", Data: []int16{1}, Null: &far}}}, "cannot hold Null"},
		"too many":       {Table{Name: "T", Columns: make([]Column, 1000)}, "1000 columns"},
		"bad unit":       {Table{Name: "T", Columns: []Column{{Name: "X", Format: "J", Data: []int32{1}, Unit: "\u00b5m"}}}, "TUNIT1"},
		"header's fault": {Table{Name: "T", Header: NewHeader(Card{"X", math.Inf(1), ""}), Columns: []Column{ok}}, "card X"},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "x.fits")
			err := WriteFile(path, nil, &c.table)
			var typed *Error
			require.ErrorAs(t, err, &typed)
			require.Equal(t, path, typed.File)
			require.ErrorContains(t, err, c.says)
			_, err = os.Stat(path)
			require.ErrorIs(t, err, os.ErrNotExist)
		})
	}
}
