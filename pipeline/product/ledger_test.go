package product

import (
	"bytes"
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/outside"
)

// sampleLedger holds a row of every verdict and the values that are easy to get
// wrong: commas, quotes, accents, NaN, extremes of float64.
func sampleLedger() Ledger {
	var l Ledger
	for i, v := range Verdicts() {
		e := NewEntry(i + 1)
		e.Verdict, e.Kind, e.MaskID = v, "science", "0123456789abcdef"
		if v != Missing {
			e.File, e.MatchedBy, e.DateObs, e.ExptimeS = "f00001.fits", ByKeyword, "2031-03-14T02:30:00.000", 90
		}
		l = append(l, e)
	}
	l[0].SaturatedFraction, l[0].Throughput, l[0].ThroughputErr, l[0].OffsetE = 0, 1.0/3, 5e-324, -math.MaxFloat64
	l[1].Note = `said "ok", then; not`
	l[2].Note = "Größe 😀"
	l[3].Step, l[3].File = 0, " a name, with \"quotes\".fits "
	l[4].OffsetE = math.Copysign(0, -1)
	return l
}

// same compares ledgers, NaN equal to NaN.
func same(t require.TestingT, want, got Ledger) {
	require.Len(t, got, len(want))
	for i := range want {
		for _, f := range fields() {
			require.Equal(t, format(f.get(&want[i])), format(f.get(&got[i])), "row %d, %s", i, f.name)
		}
	}
}

func TestLedgerRoundTrip(t *testing.T) {
	path := filepath.Join(t.TempDir(), LedgerFile)
	for _, l := range []Ledger{sampleLedger(), {}} {
		require.NoError(t, fitsutil.WriteAtomic(path, l.WriteCSV))
		got, err := ReadLedger(path)
		require.NoError(t, err)
		same(t, l, got)
	}
}

// Any text without control characters and any float64 come back as they were.
func TestLedgerRoundTripDrawn(t *testing.T) {
	word := rapid.StringOf(rapid.Rune().Filter(func(r rune) bool { return checkText(string(r)) == nil }))
	figure := rapid.OneOf(rapid.Float64(), rapid.Just(math.NaN()))
	rapid.Check(t, func(t *rapid.T) {
		l := Ledger{}
		for range rapid.IntRange(0, 5).Draw(t, "rows") {
			l = append(l, Entry{
				Step: rapid.IntRange(0, math.MaxInt32).Draw(t, "step"), File: word.Draw(t, "file"), Kind: word.Draw(t, "kind"),
				Note: word.Draw(t, "note"), Verdict: rapid.SampledFrom(Verdicts()).Draw(t, "verdict"),
				ExptimeS: figure.Draw(t, "exptime"), Throughput: figure.Draw(t, "throughput"),
			})
		}
		var b bytes.Buffer
		require.NoError(t, l.WriteCSV(&b))
		got, err := parseLedger(&b)
		require.NoError(t, err)
		same(t, l, got)
	})
}

func TestLedgerRefusals(t *testing.T) {
	var whole bytes.Buffer
	require.NoError(t, sampleLedger().WriteCSV(&whole))
	for _, c := range []struct{ name, old, with, want string }{
		{"empty", whole.String(), "", "no line of column names"},
		{"no header", "step,file", "file,step", `column 1 is "file", want "step"`},
		{"too few columns", ",note\n", "\n", "line 1: 12 columns, want 13"},
		{"step of no number", "\n1,", "\none,", "line 2, column step"},
		{"negative step", "\n1,", "\n-1,", "line 2, column step: -1 is no step"},
		{"figure of no number", ",90,", ",ninety,", "line 2, column exptime_s"},
		{"verdict that there is not", ",ok,", ",okay,", `line 2, column verdict: "okay" is no verdict`},
		{"control character", "f00001.fits", "f\a.fits", "line 2, column file"},
		{"a field too many", "\n2,", "\n2,2,", "wrong number of fields"},
		{"a quote within", "f00001.fits", `f"1.fits`, "bare"},
	} {
		t.Run(c.name, func(t *testing.T) {
			path := filepath.Join(t.TempDir(), "l.csv")
			require.NoError(t, os.WriteFile(path, []byte(strings.Replace(whole.String(), c.old, c.with, 1)), 0o644))
			l, err := ReadLedger(path)
			require.Nil(t, l)
			require.ErrorContains(t, err, c.want)
			require.ErrorContains(t, err, path)
		})
	}
	_, err := ReadLedger(filepath.Join(t.TempDir(), "gone"))
	require.ErrorIs(t, err, os.ErrNotExist)
	bad := Ledger{{File: "two\nlines", Verdict: OK}}
	require.ErrorContains(t, bad.WriteCSV(&bytes.Buffer{}), "row 1, column file")
}

// What is read at all is written and read again the same, byte for byte.
func FuzzLedger(f *testing.F) {
	var whole bytes.Buffer
	require.NoError(f, sampleLedger().WriteCSV(&whole))
	f.Add(whole.Bytes())
	head, _, _ := strings.Cut(whole.String(), "\n")
	for _, line := range []string{"", "1,,,,,,,missing,,,,,\n", "2,\"a\r\r\nb\",,,,,,ok,,,,,\n", "+3,,,,,,0x1p-2,ok,inf,-0,NaN,1_0,\"\"\n", "4,,,,,,,ok,,,,,\"\"\"\"\n\n\n"} {
		f.Add([]byte(head + "\n" + line))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		l, err := parseLedger(bytes.NewReader(data))
		if err != nil {
			require.Nil(t, l)
			return
		}
		var first, second bytes.Buffer
		require.NoError(t, l.WriteCSV(&first))
		again, err := parseLedger(bytes.NewReader(first.Bytes()))
		require.NoError(t, err)
		require.NoError(t, again.WriteCSV(&second))
		require.Equal(t, first.String(), second.String())
		same(t, l, again)
	})
}

// astropy reads from the FRAMES table what Python reads from ledger.csv.
func TestCrosscheckLedger(t *testing.T) {
	dir := t.TempDir()
	table, text := filepath.Join(dir, "frames.fits"), filepath.Join(dir, LedgerFile)
	require.NoError(t, fitsutil.WriteFile(table, nil, sampleLedger().Table()))
	require.NoError(t, fitsutil.WriteAtomic(text, sampleLedger().WriteCSV))
	require.Equal(t, "9 rows\n", outside.Python(t, "product_ledger.py", table, text))
}

func TestVerdicts(t *testing.T) {
	l := sampleLedger()
	for _, v := range Verdicts() {
		require.Equal(t, 1, l.Count(v), v)
		require.Equal(t, v == OK || v == Relabelled, v.Used(), v)
	}
}

// A figure that was not measured is null in JSON, which knows no NaN.
func TestEntryJSON(t *testing.T) {
	text, err := json.Marshal(sampleLedger())
	require.NoError(t, err)
	var back []map[string]any
	require.NoError(t, json.Unmarshal(text, &back))
	require.Equal(t, 1.0/3, back[0]["throughput"])
	require.Nil(t, back[1]["throughput"])
	require.Equal(t, "ok", back[0]["verdict"])
	require.Len(t, back[0], len(fields()))
}
