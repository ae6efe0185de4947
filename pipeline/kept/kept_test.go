package kept

import (
	"bytes"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"testing"
	"testing/iotest"
	"time"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// part and everything have each kind of field that can be kept.
type part struct {
	Name  string
	Count *int
}

type everything struct {
	Yes              bool
	Small            int8
	Signed           int
	Unsigned         uint16
	Single           float32
	Double           float64
	Text             string
	Parts            []part
	None, Nil        []string
	Pair             [2]float64
	Ratio, Missing   *float64
	Singles          []float32
	Doubles          []float64
	Flags            []int16
	Bytes            []byte
	Grid             [][]float64
	When             time.Time
	Covariance, Lack *mat.SymDense
}

func whole() everything {
	zero, count := 0.0, 3
	m := mat.NewSymDense(3, nil)
	m.SetSym(0, 1, -2.5)
	m.SetSym(2, 2, math.Inf(1))
	e := everything{
		Yes: true, Small: -128, Signed: math.MinInt, Unsigned: 65535, Single: -1.5, Double: math.Inf(-1), Text: "é\x00",
		Parts: []part{{"a", &count}, {"", nil}}, None: []string{}, Pair: [2]float64{1, 2}, Ratio: &zero,
		Singles: []float32{1, math.MaxFloat32, 0}, Doubles: []float64{math.Copysign(0, -1), math.SmallestNonzeroFloat64}, Flags: []int16{-1, 4},
		Bytes: []byte{0, 255}, Grid: [][]float64{nil, {}, {7}},
		When: time.Date(2026, 3, 4, 5, 6, 7, 89, time.UTC), Covariance: m,
	}
	for range 10000 { // more than the buffers hold
		e.Singles = append(e.Singles, float32(len(e.Singles)))
	}
	return e
}

func encoded(t testing.TB, v any) []byte {
	t.Helper()
	var b bytes.Buffer
	require.NoError(t, Encode(&b, v))
	return b.Bytes()
}

// What is kept comes back as it was, nil apart from empty and pointers to zero apart from
// none; from a reader that gives one byte at a time as well.
func TestValuesComeBack(t *testing.T) {
	want := whole()
	data := encoded(t, want)
	for _, r := range []*Decoder{NewDecoder(bytes.NewReader(data), int64(len(data))), NewDecoder(iotest.OneByteReader(bytes.NewReader(data)), int64(len(data)))} {
		var got everything
		require.NoError(t, r.Decode(&got))
		require.True(t, r.Ended())
		require.Equal(t, want, got)
		require.NotNil(t, got.None)
		require.Nil(t, got.Nil)
		require.NotNil(t, got.Ratio)
		require.Equal(t, data, encoded(t, got))
	}
	nan := math.Float64frombits(0x7ff8000000000123)
	var back []float64
	data = encoded(t, []float64{nan})
	require.NoError(t, NewDecoder(bytes.NewReader(data), int64(len(data))).Decode(&back))
	require.Equal(t, math.Float64bits(nan), math.Float64bits(back[0]))
}

// A value that was cut anywhere, or of another type, is an error.
func TestCutValuesAreRefused(t *testing.T) {
	e := whole()
	e.Singles = e.Singles[:3]
	data := encoded(t, e)
	for n := range data {
		var got everything
		err := NewDecoder(bytes.NewReader(data[:n]), int64(n)).Decode(&got)
		require.ErrorIs(t, err, ErrUnfit, "%d bytes", n)
	}
	var other struct{ Yes bool }
	require.ErrorIs(t, NewDecoder(bytes.NewReader(data), int64(len(data))).Decode(&other), ErrUnfit)
	// A field of another name is another type.
	renamed := encoded(t, struct{ No bool }{true})
	require.ErrorIs(t, NewDecoder(bytes.NewReader(renamed), int64(len(renamed))).Decode(&other), ErrUnfit)
}

// A length that promises more than is there takes no memory.
func TestLengthsAreBounded(t *testing.T) {
	data := encoded(t, []float64{1})
	long := append(append([]byte{}, data[:4]...), 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0x7f)
	var got []float64
	allocated := testing.AllocsPerRun(1, func() {
		require.ErrorIs(t, NewDecoder(bytes.NewReader(long), int64(len(long))).Decode(&got), ErrUnfit)
	})
	require.Less(t, allocated, 100.0)
	require.Nil(t, got)
}

func TestWhatCannotBeKept(t *testing.T) {
	for _, v := range []any{map[string]int{}, struct{ hidden int }{1}, struct{ A any }{}, func() {}, nil, make(chan int)} {
		require.ErrorContains(t, Encode(&bytes.Buffer{}, v), "internal error", "%T", v)
	}
}

// Every changed byte of a state is seen, and so is every cut.
func TestChangedStatesAreRefused(t *testing.T) {
	path := filepath.Join(t.TempDir(), "state")
	written, err := WriteState(path, part{Name: "x"}, []float32{1, 2})
	require.NoError(t, err)
	data, err := os.ReadFile(path)
	require.NoError(t, err)
	s, err := OpenState(path)
	require.NoError(t, err)
	require.Equal(t, written, s.Digest)
	var p part
	var x []float32
	require.NoError(t, s.Decode(&p))
	require.False(t, s.Ended())
	require.NoError(t, s.Decode(&x))
	require.True(t, s.Ended())
	require.Equal(t, part{Name: "x"}, p)
	require.Equal(t, []float32{1, 2}, x)
	s.Close()
	try := func(changed []byte) error {
		require.NoError(t, os.WriteFile(path, changed, 0o644))
		_, err := OpenState(path)
		return err
	}
	for i := range data {
		changed := bytes.Clone(data)
		changed[i] ^= 1 << (i % 8)
		require.ErrorIs(t, try(changed), ErrUnfit, "byte %d", i)
		require.ErrorIs(t, try(data[:i]), ErrUnfit, "cut at %d", i)
	}
	require.NoError(t, os.Remove(path))
	_, err = OpenState(path)
	require.ErrorIs(t, err, os.ErrNotExist)
}

// records reads a journal, and appends one more.
func records(t *testing.T, path string, wanted func(string) bool) []string {
	t.Helper()
	var all []string
	j, err := OpenJournal(path, func(r []byte) bool {
		if !wanted(string(r)) {
			return false
		}
		all = append(all, string(r))
		return true
	})
	require.NoError(t, err)
	require.NoError(t, j.Append([]byte("more")))
	require.NoError(t, j.Close())
	return all
}

// A journal that is cut or changed anywhere has the whole records before that place, and
// grows behind them.
func TestTornJournalsEndBeforeTheTear(t *testing.T) {
	path := filepath.Join(t.TempDir(), "journal")
	j, err := CreateJournal(path)
	require.NoError(t, err)
	want := []string{"first", "", "third"}
	var ends []int
	for _, r := range want {
		require.NoError(t, j.Append([]byte(r)))
		ends = append(ends, int(j.end))
	}
	require.NoError(t, j.Sync())
	require.NoError(t, j.Close())
	data, err := os.ReadFile(path)
	require.NoError(t, err)
	require.Len(t, data, ends[2])
	all := func(string) bool { return true }
	whole := func(n int) int { // records that end within n bytes
		k := 0
		for k < len(ends) && ends[k] <= n {
			k++
		}
		return k
	}
	for n := range len(data) + 1 {
		for _, changed := range []bool{false, true} {
			torn := bytes.Clone(data[:n])
			if changed {
				if n == len(data) {
					continue
				}
				torn = bytes.Clone(data)
				torn[n] ^= 0x20
			}
			require.NoError(t, os.WriteFile(path, torn, 0o644))
			k := whole(n)
			require.Equal(t, want[:k], append([]string{}, records(t, path, all)...), "byte %d, changed %v", n, changed)
			require.Equal(t, append(append([]string{}, want[:k]...), "more"), records(t, path, all))
		}
	}
	require.NoError(t, os.WriteFile(path, data, 0o644))
	require.Equal(t, want[:1], records(t, path, func(r string) bool { return r != "" }), "a record that is not wanted ends it")
}

// Whatever the bytes, reading a value ends with one that is written again as the same
// bytes, or with an error.
func FuzzDecode(f *testing.F) {
	f.Add(encoded(f, whole()))
	f.Add(encoded(f, everything{}))
	f.Add([]byte{})
	f.Fuzz(func(t *testing.T, data []byte) {
		// The type's description is not what is to be found by chance.
		data = append(encoded(t, everything{})[:4], data...)
		var got everything
		d := NewDecoder(bytes.NewReader(data), int64(len(data)))
		if d.Decode(&got) != nil {
			return
		}
		var again everything
		second := encoded(t, got)
		require.NoError(t, NewDecoder(bytes.NewReader(second), int64(len(second))).Decode(&again))
		require.Equal(t, second, encoded(t, again))
	})
}

// Whatever the bytes, a journal is read to its end, and what was accepted is there the
// next time as well.
func FuzzJournal(f *testing.F) {
	path := filepath.Join(f.TempDir(), "seed")
	j, err := CreateJournal(path)
	require.NoError(f, err)
	for i := range 3 {
		require.NoError(f, j.Append([]byte(fmt.Sprint("record", i))))
	}
	require.NoError(f, j.Close())
	data, err := os.ReadFile(path)
	require.NoError(f, err)
	f.Add(data)
	f.Add(data[:len(data)-1])
	f.Fuzz(func(t *testing.T, data []byte) {
		read := func() (all []string, end int64) {
			end, err := readRecords(bytes.NewReader(data), int64(len(data)), func(r []byte) bool { all = append(all, string(r)); return true })
			require.NoError(t, err)
			return all, end
		}
		first, end := read()
		require.LessOrEqual(t, end, int64(len(data)))
		data = data[:end]
		second, again := read()
		require.Equal(t, end, again)
		require.True(t, reflect.DeepEqual(first, second))
	})
}
