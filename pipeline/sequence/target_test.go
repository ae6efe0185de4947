package sequence_test

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/configs"
	"mirrorloom/pipeline/config"
	"mirrorloom/pipeline/sequence"
)

func TestEmbeddedTargets(t *testing.T) {
	names := configs.Names(configs.Targets)
	require.Contains(t, names, "demo")
	require.Contains(t, names, "demo-infrared")
	for _, name := range names {
		target, err := sequence.LoadTarget(name)
		require.NoError(t, err)
		_, err = target.Start()
		require.NoError(t, err)
	}
}

func TestTargetDefaults(t *testing.T) {
	const text = `
name: bare
ra_deg: 0
dec_deg: 0
start_utc: "2031-03-14T02:30:00"
code: {family: legendre, element_mirrors: 1}
dwell_s: 10
`
	got, err := sequence.ParseTarget("bare.yaml", []byte(text))
	require.NoError(t, err)
	require.Equal(t, &sequence.Target{
		Name: "bare", StartUTC: "2031-03-14T02:30:00", DwellSeconds: 10,
		Code:        sequence.CodeChoice{Family: "legendre", ElementMirrors: 1, Order: "shuffled", Cycles: 1},
		Calibration: sequence.Calibration{Arc: sequence.ArcFrames{Every: 1}},
	}, got)
	start, err := got.Start()
	require.NoError(t, err)
	require.Equal(t, "2031-03-14T02:30:00Z", start.Format("2006-01-02T15:04:05Z07:00"))
}

// The resolved text reads back as the same target and as the same text.
func TestTargetRoundTrip(t *testing.T) {
	for _, text := range []string{smallTarget, string(embedded(t, "demo")), string(embedded(t, "demo-infrared"))} {
		first, err := sequence.ParseTarget("target.yaml", []byte(text))
		require.NoError(t, err)
		written, err := first.YAML()
		require.NoError(t, err)
		second, err := sequence.ParseTarget("target.yaml", written)
		require.NoError(t, err)
		require.Equal(t, first, second)
		again, err := second.YAML()
		require.NoError(t, err)
		require.Equal(t, string(written), string(again))
	}
}

func embedded(t testing.TB, name string) []byte {
	text, err := configs.Read(configs.Targets, name)
	require.NoError(t, err)
	return text
}

// Every edit of smallTarget is refused with file, line, key path, and one
// sentence of what and cure.
func TestTargetRefuses(t *testing.T) {
	for _, c := range []struct{ name, from, to, want string }{
		{"unknown key", "dwell_s: 30\nall", "exposure_s: 30\nall", "small.yaml:7: exposure_s: unknown key"},
		{"missing key", "dwell_s: 30\nall_off", "all_off", "dwell_s: the key is missing"},
		{"key without its unit", "ra_deg:", "ra:", "small.yaml:3: ra: unknown key; write ra_deg"},
		{"unknown key inside", "v: 31", "vee: 31", "small.yaml:6: code.vee: unknown key"},
		{"unknown key of a list", "element: 20", "elements: 20", "small.yaml:10: sentinel_rows[0].elements: unknown key"},
		{"unknown calibration", "  bias:", "  zero:", "calibration.zero: unknown key"},
		{"duplicate key", "dec_deg: -3", "dec_deg: -3\ndec_deg: -4", "dec_deg"},
		{"NaN", "ra_deg: 10.5", "ra_deg: .nan", "small.yaml:3: ra_deg: .nan is no finite number"},
		{"infinity", "dwell_s: 30\nall", "dwell_s: .inf\nall", "small.yaml:7: dwell_s"},
		{"text for a number", "dec_deg: -3", "dec_deg: -3d", "small.yaml:4: dec_deg"},
		{"second document", "name: small field", "name: small field\n---\nname: other", "document"},
		{"empty name", "name: small field", "name: \"\"", "small.yaml:2: name: \"\" is no name"},
		{"name beyond ASCII", "small field", "schönes Feld", "small.yaml:2: name:"},
		{"right ascension", "ra_deg: 10.5", "ra_deg: 360", "small.yaml:3: ra_deg: 360 is outside"},
		{"declination", "dec_deg: -3", "dec_deg: -90.5", "small.yaml:4: dec_deg"},
		{"time of nowhere", "2031-02-11T04:00:00Z", "2031-02-30T04:00:00Z", "small.yaml:5: start_utc:"},
		{"time with a zone", "2031-02-11T04:00:00Z", "2031-02-11T04:00:00+02:00", "small.yaml:5: start_utc:"},
		{"date alone", "2031-02-11T04:00:00Z", "2031-02-11", "small.yaml:5: start_utc:"},
		{"family", "m-sequence", "walsh", "small.yaml:6: code.family: \"walsh\" is no code family"},
		{"size of no code", "v: 31", "v: 32", "code.v: the family m-sequence has no code of 32 columns; the nearest sizes are 31 and 63"},
		{"size beyond", "v: 31", "v: 8191", "code.v: the family m-sequence has no code of 8191 columns; the nearest sizes are 4095"},
		{"size negative", "v: 31", "v: -31", "code.v:"},
		{"all dark", "dark: 7", "dark: 31", "code.dark: 31 dark columns leave no element"},
		{"dark negative", "dark: 7", "dark: -1", "code.dark:"},
		{"dark slit scan", "m-sequence", "slit-scan", "code.dark: a slit scan has no dark columns"},
		{"no width", "element_mirrors: 2", "element_mirrors: 0", "code.element_mirrors:"},
		{"order", "seed: 5", "order: random, seed: 5", "code.order: \"random\" is unknown; write natural, shuffled, nested or drift"},
		{"seed negative", "seed: 5", "seed: -5", "code.seed: -5 is below 0"},
		{"seed fraction", "seed: 5", "seed: 5.5", "code.seed:"},
		{"no cycle", "cycles: 2", "cycles: 0", "code.cycles:"},
		{"dwell", "dwell_s: 30\nall", "dwell_s: 0\nall", "small.yaml:7: dwell_s: 0 is not above 0"},
		{"dwell of days", "dwell_s: 30\nall", "dwell_s: 1e6\nall", "small.yaml:7: dwell_s"},
		{"all-off negative", "all_off_every: 10", "all_off_every: -1", "small.yaml:8: all_off_every"},
		{"rows backwards", "first: 3, last: 5", "first: 5, last: 3", "small.yaml:10: sentinel_rows[0].last: 3 lies before first 5"},
		{"closed backwards", "first: 8, last: 9", "first: 9, last: 8", "small.yaml:13: closed[0].last:"},
		{"sentinel of nothing", "element: 20", "element: -1", "sentinel_rows[0].element:"},
		{"closed of nothing", "element: 4}", "element: -1}", "closed[1].element:"},
		{"dark without dwell", "dark: {count: 1, dwell_s: 30}", "dark: {count: 1}", "calibration.dark.dwell_s: 0 is not above 0"},
		{"flat without lamp", "lamp: halogen, ", "", "calibration.flat.lamp: \"\" is no lamp"},
		{"coded flat without dwell", "flat: {count: 1, dwell_s: 5, ", "flat: {count: 0, ", "calibration.flat.dwell_s:"},
		{"lamp too long", "NeAr", "NeonArgon", "calibration.arc.lamp: \"NeonArgon\" is no lamp"},
		{"arc of none", "every: 5", "every: 0", "calibration.arc.every:"},
		{"count negative", "bias: {count: 2}", "bias: {count: -2}", "calibration.bias.count:"},
		{"count of frames beyond", "bias: {count: 2}", "bias: {count: 20000}", "calibration.bias.count:"},
		{"bias dwell", "bias: {count: 2}", "bias: {count: 2, dwell_s: 1}", "calibration.bias.dwell_s: unknown key"},
	} {
		t.Run(c.name, func(t *testing.T) {
			require.Contains(t, smallTarget, c.from)
			target, err := sequence.ParseTarget("small.yaml", []byte(strings.Replace(smallTarget, c.from, c.to, 1)))
			require.Error(t, err)
			require.Nil(t, target)
			require.Contains(t, err.Error(), c.want)
			require.Contains(t, err.Error(), "; ", "the cure")
			require.NotContains(t, err.Error(), "\n")
			var e *config.Error
			require.True(t, errors.As(err, &e))
			require.Equal(t, "small.yaml", e.File)
			require.Positive(t, e.Line)
		})
	}
}

func TestLoadTarget(t *testing.T) {
	path := filepath.Join(t.TempDir(), "mine.yaml")
	require.NoError(t, os.WriteFile(path, []byte(smallTarget), 0o644))
	target, err := sequence.LoadTarget(path)
	require.NoError(t, err)
	require.Equal(t, "small field", target.Name)
	_, err = sequence.LoadTarget("nowhere")
	require.ErrorIs(t, err, os.ErrNotExist)
	require.ErrorContains(t, err, "demo")
}

func TestRowRanges(t *testing.T) {
	four := 4
	target := &sequence.Target{
		SentinelRows: []sequence.SentinelRow{{First: 10, Last: 12, Element: 3}, {First: 0, Last: 0, Element: 1}},
		Closed:       []sequence.ClosedRow{{First: 13, Last: 13}, {First: 2, Last: 3, Element: &four}},
	}
	require.Equal(t, []sequence.RowRange{
		{First: 0, Last: 0, Use: "sentinel", Element: 1},
		{First: 1, Last: 9, Use: "coded", Element: -1},
		{First: 10, Last: 12, Use: "sentinel", Element: 3},
		{First: 13, Last: 13, Use: "closed", Element: -1},
		{First: 14, Last: 19, Use: "coded", Element: -1},
		{First: 2, Last: 3, Use: "closed", Element: 4},
	}, target.RowRanges(0, 19))
	require.Equal(t, []sequence.RowRange{{First: -7, Last: 9, Use: "coded", Element: -1}}, new(sequence.Target).RowRanges(-7, 9))
}

// FuzzTarget: no text makes the reader panic, and what it takes is written and
// read back unchanged.
func FuzzTarget(f *testing.F) {
	f.Add([]byte(smallTarget))
	f.Add(embedded(f, "demo"))
	f.Add(embedded(f, "demo-infrared"))
	f.Add([]byte("name: x\nra_deg: 0\ndec_deg: 0\nstart_utc: 2031-01-01T00:00:00\ncode: {family: slit-scan, v: 7, element_mirrors: 1}\ndwell_s: 1\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		target, err := sequence.ParseTarget("fuzz.yaml", text)
		if err != nil {
			require.Nil(t, target)
			return
		}
		written, err := target.YAML()
		require.NoError(t, err)
		again, err := sequence.ParseTarget("fuzz.yaml", written)
		require.NoError(t, err, string(written))
		require.Equal(t, target, again)
		_, err = target.Start()
		require.NoError(t, err)
	})
}
