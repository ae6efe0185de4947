package sequence

import (
	"reflect"
	"regexp"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/configs"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/scene"
)

// keysOf are the YAML keys that a reader knows of a type, at any depth.
func keysOf(of reflect.Type, keys map[string]bool) map[string]bool {
	switch of.Kind() {
	case reflect.Pointer, reflect.Slice, reflect.Array:
		return keysOf(of.Elem(), keys)
	case reflect.Struct:
		for i := range of.NumField() {
			f := of.Field(i)
			name, _, _ := strings.Cut(f.Tag.Get("yaml"), ",")
			if name == "" || name == "-" {
				continue
			}
			keys[name] = true
			keysOf(f.Type, keys)
		}
	}
	return keys
}

// embedded is the text of files one after the other.
func embedded(t *testing.T, folder string, names ...string) string {
	t.Helper()
	var b strings.Builder
	for _, name := range names {
		text, err := configs.Read(folder, name)
		require.NoError(t, err)
		b.Write(text)
	}
	return b.String()
}

// The embedded files explain every key: whatever a reader knows is set or named in a comment
// of the file that says it explains all.
func TestEveryKeyIsExplained(t *testing.T) {
	scenes := embedded(t, configs.Scenes, "demo")
	for _, c := range []struct {
		of   reflect.Type
		text string
	}{
		{reflect.TypeFor[instrument.Profile](), embedded(t, configs.Profiles, "optical")},
		{reflect.TypeFor[scene.Scene](), scenes},
		{reflect.TypeFor[Target](), embedded(t, configs.Targets, "demo", "proposal") + scenes},
	} {
		keys := keysOf(c.of, map[string]bool{})
		require.Greater(t, len(keys), 15, c.of)
		for key := range keys {
			require.Regexp(t, regexp.MustCompile(`(?m)(^|[^a-z_0-9.-])`+regexp.QuoteMeta(key)+`([^a-z_0-9]|$)`), c.text, "%v: no word of %s", c.of, key)
		}
	}
}

// uncommented makes keys of the comments that show optional ones: a line such as "# key: value",
// and lines behind it that are further in.
func uncommented(text string) string {
	first, more := regexp.MustCompile(`^ *# [a-z_]+: .*$|^ *# [a-z_]+:$`), regexp.MustCompile(`^ *#   `)
	shown := regexp.MustCompile(`# (incidence_deg|stuck_csv|load_s|read_mode|keywords|kinds|atmosphere|refstar|field|sentinel_rows|closed|from_sources|cycle_s|flexure_px_h|seeing_change_per_h|sky_change_per_h):`)
	lines := strings.Split(text, "\n")
	inside := false
	for i, line := range lines {
		inside = first.MatchString(line) && shown.MatchString(line) || inside && more.MatchString(line)
		if inside {
			lines[i] = strings.Replace(line, "# ", "", 1)
		}
	}
	return strings.Join(lines, "\n")
}

// What the comments show can be written: with all of it the files are still read.
func TestShownKeysAreRead(t *testing.T) {
	beside := func(string) ([]byte, error) { return []byte("column,row,state\n17,93,on\n"), nil }
	text := uncommented(embedded(t, configs.Profiles, "optical"))
	p, err := instrument.Parse("optical", []byte(text), beside)
	require.NoError(t, err)
	require.Len(t, p.Stuck(), 1)
	require.NotNil(t, p.DMD.LoadS)
	require.NotNil(t, p.Detector.ReadMode)
	require.Contains(t, text, "\nkeywords: {step: STEP")
	require.Contains(t, text, "\nkinds: {bias: bias")

	s, err := scene.Parse("demo", []byte(uncommented(embedded(t, configs.Scenes, "demo"))), nil)
	require.NoError(t, err)
	require.True(t, s.Atmosphere.Refraction)
	require.Len(t, s.Atmosphere.Extinction, 2)
	require.NotNil(t, s.RefStar)

	text = uncommented(embedded(t, configs.Targets, "demo")) + "forecast: {sources: [{kind: star, east_arcsec: 0, north_arcsec: 0, ab_mag: 15, at_nm: 550}]}\n"
	target, err := ParseTarget("demo", []byte(text))
	require.NoError(t, err)
	require.Equal(t, []int{10, 149}, target.Field.Rows)
	require.Len(t, target.SentinelRows, 1)
	require.Len(t, target.Closed, 1)
	require.Equal(t, 2, target.FromSources.Patches)
	require.NotNil(t, target.Calibration.RefStar)

	target, err = ParseTarget("proposal", []byte(uncommented(embedded(t, configs.Targets, "proposal"))))
	require.NoError(t, err)
	require.InDelta(t, 0.05, target.Forecast.Limits.SkyChangePerHour, 0)
	require.True(t, target.Forecast.Atmosphere.Refraction)
}
