package fitsutil

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/astrogo/fitsio"
	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
)

// manifestEntry tells testdata/crosscheck/fitsutil_write_images.py what an HDU
// must hold.
type manifestEntry struct {
	File    string         `json:"file"`
	HDUs    int            `json:"hdus"`
	Index   int            `json:"index"`
	Name    string         `json:"name"`
	Axes    []int          `json:"axes"`
	Dtype   string         `json:"dtype"`
	Dump    string         `json:"dump"`
	Cards   []manifestCard `json:"cards"`
	History []string       `json:"history"`
}

type manifestCard struct {
	Key     string
	Value   any
	Kind    string
	Comment string
}

func manifestCards(cards []Card) []manifestCard {
	out := make([]manifestCard, len(cards))
	for i, c := range cards {
		out[i] = manifestCard{c.Key, c.Value, fmt.Sprintf("%T", c.Value), c.Comment}
	}
	return out
}

// everyType gives random samples of every type, extreme values included.
func everyType(random *rand.Rand, n int) map[string]any {
	u8, i16, u16, i32, i64 := make([]uint8, n), make([]int16, n), make([]uint16, n), make([]int32, n), make([]int64, n)
	f32, f64 := make([]float32, n), make([]float64, n)
	for i := range n {
		bits := random.Uint64()
		u8[i], i16[i], u16[i], i32[i], i64[i] = uint8(bits), int16(bits), uint16(bits), int32(bits), int64(bits)
		f32[i], f64[i] = float32(random.NormFloat64()), random.NormFloat64()*1e200
	}
	copy(i16, []int16{math.MinInt16, math.MaxInt16, 0})
	copy(u16, []uint16{0, math.MaxUint16, 32768, 32767})
	copy(i32, []int32{math.MinInt32, math.MaxInt32})
	copy(i64, []int64{math.MinInt64, math.MaxInt64})
	copy(f32, []float32{float32(math.NaN()), float32(math.Inf(1)), float32(math.Inf(-1)), math.SmallestNonzeroFloat32, math.MaxFloat32, float32(math.Copysign(0, -1))})
	copy(f64, []float64{math.NaN(), math.Inf(1), math.Inf(-1), math.SmallestNonzeroFloat64, math.MaxFloat64, math.Copysign(0, -1)})
	return map[string]any{"u1": u8, "i2": i16, "u2": u16, "i4": i32, "i8": i64, "f4": f32, "f8": f64}
}

// hardCards are values that writers get wrong.
var hardCards = []Card{
	{"OBJECT", "it's ''quoted''", "name"},
	{"EMPTY", "", ""},
	{"SLASH", "a / b", "c / d"},
	{"LONG", strings.Repeat("a'b ", 60) + "end", ""},
	{"LONGER", strings.Repeat("0123456789", 30), "with a comment"},
	{"EDGE68", strings.Repeat("x", 68), ""},
	{"EDGE69", strings.Repeat("y", 69), ""},
	{"PI", math.Pi, "float"},
	{"TINY", 5e-324, ""},
	{"HUGE", math.MaxFloat64, ""},
	{"THIRD", -1.0 / 3, "all digits"},
	{"WHOLE", 3.0, "stays a float"},
	{"BIG", int64(math.MaxInt64), ""},
	{"SMALL", int64(math.MinInt64), ""},
	{"YES", true, ""},
	{"NO", false, "logical"},
}

func writeManifest(t *testing.T, folder string, manifest []manifestEntry) {
	t.Helper()
	text, err := json.Marshal(manifest)
	require.NoError(t, err)
	require.NoError(t, os.WriteFile(filepath.Join(folder, "manifest.json"), text, 0o644))
}

func dump(t *testing.T, path string, data any) {
	t.Helper()
	var out bytes.Buffer
	require.NoError(t, binary.Write(&out, binary.LittleEndian, data))
	require.NoError(t, os.WriteFile(path, out.Bytes(), 0o644))
}

// TestCrosscheckWrittenImages: astropy (checksum=True, warnings as errors),
// fitsverify and, for the types that it knows, fitsio read what we wrote.
func TestCrosscheckWrittenImages(t *testing.T) {
	folder := t.TempDir()
	random := rand.New(rand.NewPCG(5, 6))
	header := NewHeader(hardCards...)
	require.NoError(t, header.AddHistory(strings.Repeat("made by a test; ", 10)))
	require.NoError(t, header.AddComment("it's a comment"))
	var manifest []manifestEntry
	var files []string
	for _, axes := range [][]int{{7}, {13, 5}, {31, 29, 3}, {4, 3, 2, 2}, {640, 480}} {
		n := 1
		for _, a := range axes {
			n *= a
		}
		var extensions []any
		all := fmt.Sprintf("all%d_%d.fits", len(axes), axes[0])
		types := everyType(random, n)
		for i, dtype := range []string{"u1", "i2", "u2", "i4", "i8", "f4", "f8"} {
			data := types[dtype]
			entry := manifestEntry{Axes: axes, Dtype: dtype, Dump: fmt.Sprintf("%s_%d_%d.bin", dtype, len(axes), axes[0])}
			dump(t, filepath.Join(folder, entry.Dump), data)

			alone := entry
			alone.File, alone.HDUs, alone.Name = strings.Replace(entry.Dump, ".bin", ".fits", 1), 1, "PRIMARY"
			alone.Cards = manifestCards(hardCards)
			require.NoError(t, WriteFile(filepath.Join(folder, alone.File), nil, &ImageData{Header: header, Axes: axes, Data: data}))
			requireFitsioReads(t, filepath.Join(folder, alone.File), axes, data)

			entry.File, entry.HDUs, entry.Index, entry.Name = all, 8, i+1, strings.ToUpper("IM_"+dtype)
			extensions = append(extensions, &ImageData{Name: entry.Name, Header: NewHeader(hardCards[:3]...), Axes: axes, Data: data})
			entry.Cards = manifestCards(hardCards[:3])
			manifest = append(manifest, alone, entry)
			files = append(files, alone.File)
		}
		require.NoError(t, WriteFile(filepath.Join(folder, all), NewHeader(hardCards...), extensions...))
		manifest = append(manifest, manifestEntry{File: all, HDUs: 8, Index: 0, Name: "PRIMARY", Cards: manifestCards(hardCards), History: nil})
		files = append(files, all)
	}
	writeManifest(t, folder, manifest)
	require.Equal(t, "70 images, 745 cards\n", outside.Python(t, "fitsutil_write_images.py", folder))
	for _, file := range files {
		requireSums(t, filepath.Join(folder, file))
	}
	requireFitsverify(t, folder, files)
}

// requireFitsverify fails unless fitsverify has neither an error nor a warning
// to say of any of the files, in its short and in its full report.
func requireFitsverify(t *testing.T, folder string, files []string) {
	t.Helper()
	paths := make([]string, len(files))
	for i, file := range files {
		paths[i] = filepath.Join(folder, file)
	}
	short := outside.Program(t, "fitsverify", append([]string{"-q"}, paths...)...)
	require.Equal(t, len(files), strings.Count(short, "verification OK"), short)
	full := outside.Program(t, "fitsverify", paths...)
	require.Equal(t, len(files), strings.Count(full, "**** Verification found 0 warning(s) and 0 error(s). ****"), full)
}

// requireFitsioReads compares the primary array with what fitsio reads; it
// ignores BZERO, so unsigned samples come as stored, and knows no 3-axis limit.
func requireFitsioReads(t *testing.T, path string, axes []int, data any) {
	t.Helper()
	defer func() {
		if r := recover(); r != nil {
			t.Fatalf("fitsio panics on %s: %v", path, r)
		}
	}()
	in, err := os.Open(path)
	require.NoError(t, err)
	defer in.Close()
	f, err := fitsio.Open(in)
	require.NoError(t, err)
	defer f.Close()
	image, ok := f.HDU(0).(fitsio.Image)
	require.True(t, ok)
	require.Equal(t, axes, image.Header().Axes())
	kind, n, ok := sampleTypeOf(data)
	require.True(t, ok)
	want := make([]byte, n*kind.size())
	putSamples(want, data, 0, n)
	require.Equal(t, want, image.Raw()[:len(want)])
}

func TestWriteFileIsDeterministic(t *testing.T) {
	folder := t.TempDir()
	write := func(name string) []byte {
		path := filepath.Join(folder, name)
		require.NoError(t, WriteFile(path, NewHeader(hardCards...),
			&ImageData{Name: "A", Axes: []int{2, 2}, Data: []int16{1, 2, 3, 4}},
			&Table{Name: "T", Columns: []Column{{Name: "X", Format: "D", Data: []float64{1, 2}}}}))
		content, err := os.ReadFile(path)
		require.NoError(t, err)
		return content
	}
	require.Equal(t, write("one.fits"), write("two.fits"))
}

// A header that was read is written again with the structure of its new HDU,
// not of its old one.
func TestStructureCardsAreMadeAnew(t *testing.T) {
	folder := t.TempDir()
	raw, again := filepath.Join(folder, "raw.fits"), filepath.Join(folder, "again.fits")
	frame := NewHeader(Card{"STEP", 7, "of the sequence"}, Card{"BLANK", -32768, ""}, hardCards[3])
	require.NoError(t, WriteFile(raw, nil, &ImageData{Header: frame, Axes: []int{2, 3}, Data: make([]uint16, 6)}))
	f, err := Open(raw)
	require.NoError(t, err)
	defer f.Close()
	read := f.HDUs()[0].Header
	require.True(t, read.Has("BZERO"))
	require.True(t, read.Has("BLANK"))
	require.NoError(t, WriteFile(again, nil, &ImageData{Header: read, Axes: []int{3}, Data: []float32{1, 2, 3}}))
	g, err := Open(again)
	require.NoError(t, err)
	defer g.Close()
	u := g.HDUs()[0]
	require.Equal(t, -32, u.BITPIX)
	require.Equal(t, []int{3}, u.Axes)
	for _, gone := range []string{"BZERO", "BSCALE", "BLANK", "NAXIS2"} {
		require.False(t, u.Header.Has(gone), gone)
	}
	step, err := u.Header.Int("STEP")
	require.NoError(t, err)
	require.EqualValues(t, 7, step)
	long, err := u.Header.Str("LONG")
	require.NoError(t, err)
	require.Equal(t, hardCards[3].Value, long)
	count := 0
	for _, c := range u.Header.Cards() {
		if c.Key == "CHECKSUM" || c.Key == "DATASUM" || c.Key == "LONGSTRN" {
			count++
		}
	}
	require.Equal(t, 3, count)
	requireSums(t, again)
	requireFitsverify(t, folder, []string{"raw.fits", "again.fits"})
}

func TestWriteFilePlaces(t *testing.T) {
	image := func(name string) *ImageData { return &ImageData{Name: name, Axes: []int{1}, Data: []uint8{1}} }
	table := &Table{Name: "T"}
	cases := map[string]struct {
		primary *Header
		hdus    []any
		names   []string
		pixels  bool // in the primary
	}{
		"nothing":           {nil, nil, []string{""}, false},
		"header only":       {NewHeader(), nil, []string{""}, false},
		"primary array":     {nil, []any{image("")}, []string{""}, true},
		"array, table":      {nil, []any{image(""), table}, []string{"", "T"}, true},
		"named image":       {nil, []any{image("A")}, []string{"", "A"}, false},
		"header and image":  {NewHeader(), []any{image("")}, []string{"", ""}, false},
		"table only":        {nil, []any{table}, []string{"", "T"}, false},
		"unnamed in second": {nil, []any{image("A"), image("")}, []string{"", "A", ""}, false},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "x.fits")
			require.NoError(t, WriteFile(path, c.primary, c.hdus...))
			f, err := Open(path)
			require.NoError(t, err)
			defer f.Close()
			var names []string
			for _, u := range f.HDUs() {
				names = append(names, u.Name)
			}
			require.Equal(t, c.names, names)
			require.Equal(t, c.pixels, f.HDUs()[0].HasPixels())
			requireSums(t, path)
		})
	}
}

func TestWriteFileRefuses(t *testing.T) {
	one := []uint8{1}
	cases := map[string]struct {
		hdus []any
		want error
	}{
		"no HDU":         {[]any{"text"}, ErrType},
		"nil":            {[]any{nil}, ErrType},
		"nil image":      {[]any{(*ImageData)(nil)}, ErrType},
		"data type":      {[]any{&ImageData{Axes: []int{1}, Data: []int{1}}}, ErrType},
		"no data":        {[]any{&ImageData{Axes: []int{1}}}, ErrType},
		"too few":        {[]any{&ImageData{Axes: []int{2}, Data: one}}, ErrStructure},
		"too many":       {[]any{&ImageData{Axes: []int{1}, Data: []uint8{1, 2}}}, ErrStructure},
		"axis 0":         {[]any{&ImageData{Axes: []int{0}, Data: []uint8{}}}, ErrStructure},
		"negative axes":  {[]any{&ImageData{Axes: []int{-1, -1}, Data: one}}, ErrStructure},
		"overflow":       {[]any{&ImageData{Axes: []int{1 << 32, 1 << 32}, Data: one}}, ErrTooLarge},
		"name twice":     {[]any{&ImageData{Name: "A", Axes: []int{1}, Data: one}, &Table{Name: "a "}}, ErrStructure},
		"header's fault": {[]any{&ImageData{Header: NewHeader(Card{"X", math.NaN(), ""}), Axes: []int{1}, Data: one}}, ErrBadCard},
		"bad name":       {[]any{&ImageData{Name: "\u00e9", Axes: []int{1}, Data: one}}, ErrBadCard},
	}
	for name, c := range cases {
		t.Run(name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "x.fits")
			require.NoError(t, os.WriteFile(path, []byte("old"), 0o644))
			err := WriteFile(path, nil, c.hdus...)
			require.ErrorIs(t, err, c.want)
			var typed *Error
			require.ErrorAs(t, err, &typed)
			require.Equal(t, path, typed.File)
			onlyFile(t, path, "old")
		})
	}
}
