package config

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"mirrorloom/internal/outside"
)

func TestEncodeText(t *testing.T) {
	var s sample
	require.NoError(t, Decode("s.yaml", []byte(good), &s))
	text, err := Encode(&s)
	require.NoError(t, err)
	require.Equal(t, `use: auto
name: loom
count: 4
seed: 18446744073709551615
width_mm: 0.0015
deep: true
three: [1, -2.5, 0.5]
points:
- {x_mm: 1, n: 2}
- {x_mm: -3, n: 7}
one:
  x_mm: 0
  n: 7
maybe:
  x_mm: 0
  n: 7
table:
  a-1: 2
  b: 1
colour: green
`, string(text))
}

var (
	// tempting is text that a careless YAML writer leaves unquoted.
	tempting = []string{
		"", "yes", "off", "null", "~", "1e3", "0x1", "<<", "*a", "&a", "!a", "- a", "a: b", "#", "a #b", " a ", "\n", "\t", "\u0085", "\u2028",
		"\ufeff", "'", "\"", "\\", "%", "@", "`", "2031-04-05", "=", ".nan", "...", "---", "\x7f", "\U0001f300", "\x00", "a\r\nb",
	}
	extremes = []float64{0, math.Copysign(0, -1), 1, -1, 1e6, 1e21, 5e-324, math.MaxFloat64, 0.1, 1e-7, 123456789}
)

func anySample(t *rapid.T) sample {
	text := rapid.OneOf(rapid.String(), rapid.SampledFrom(tempting))
	number := rapid.OneOf(rapid.Float64(), rapid.SampledFrom(extremes))
	points := rapid.Custom(func(t *rapid.T) point { return point{number.Draw(t, "x"), rapid.Int().Draw(t, "n")} })
	s := sample{
		common: common{Use: text.Draw(t, "use")}, Name: text.Draw(t, "name"), Count: rapid.Int().Draw(t, "count"),
		Seed: rapid.Uint64().Draw(t, "seed"), Width: number.Draw(t, "width"), Deep: rapid.Bool().Draw(t, "deep"),
		One: points.Draw(t, "one"), Colour: colour(rapid.IntRange(1, 2).Draw(t, "colour")),
	}
	for i := range s.Three {
		s.Three[i] = number.Draw(t, "three")
	}
	if rapid.Bool().Draw(t, "some") {
		p := points.Draw(t, "maybe")
		s.Maybe = &p
		s.Points = rapid.SliceOfN(points, 0, 4).Draw(t, "points")
		s.Table = rapid.MapOfN(rapid.StringMatching(`[A-Za-z][A-Za-z0-9_-]{0,8}`), number, 0, 4).Draw(t, "table")
	}
	return s
}

// TestEncodeRoundTrip: the law of Encode, over every kind of field.
func TestEncodeRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := anySample(t)
		text, err := Encode(s)
		require.NoError(t, err)
		var back sample
		require.NoError(t, Decode("s", text, &back), "%s", text)
		require.Equal(t, s, back, "%s", text)
		require.Equal(t, math.Signbit(s.Width), math.Signbit(back.Width), "%s", text) // Equal takes -0 for 0
		again, err := Encode(back)
		require.NoError(t, err)
		require.Equal(t, string(text), string(again))
	})
}

func TestEncodeRefuses(t *testing.T) {
	type one struct {
		A float64           `yaml:"a"`
		B string            `yaml:"b"`
		C map[string]string `yaml:"c" config:"optional"`
		D *point            `yaml:"d"`
	}
	_, err := Encode(one{A: math.NaN()})
	require.EqualError(t, err, "a: NaN is no finite number; give one")
	_, err = Encode(one{A: math.Inf(-1)})
	require.EqualError(t, err, "a: -Inf is no finite number; give one")
	_, err = Encode(one{B: "\xff"})
	require.EqualError(t, err, "b: the text is not UTF-8; give UTF-8")
	_, err = Encode(one{C: map[string]string{"a b": ""}})
	require.EqualError(t, err, `c: the key "a b" is no plain word; write letters, digits, _ and - only`)
	_, err = Encode(one{})
	require.EqualError(t, err, "d: no value; give one")
}

// TestCrosscheckYAML: PyYAML, a reader of YAML 1.1 by other people, finds the
// same values in our text as we wrote, tempting words and exact floats included.
func TestCrosscheckYAML(t *testing.T) {
	type document struct {
		Texts   []string  `yaml:"texts"`
		Numbers []float64 `yaml:"numbers,flow"`
	}
	d := document{Texts: tempting, Numbers: []float64{0, 1, -1, 0.1, 123456789, 640.5, -2.5e-3, 4e-7, 1e21}}
	text, err := Encode(d)
	require.NoError(t, err)
	path := filepath.Join(t.TempDir(), "d.yaml")
	require.NoError(t, os.WriteFile(path, text, 0o644))
	var want strings.Builder
	for _, s := range d.Texts {
		for _, r := range s {
			want.WriteString(" " + hex(r))
		}
		want.WriteString("\n")
	}
	want.WriteString("0.0\n1.0\n-1.0\n0.1\n123456789.0\n640.5\n-0.0025\n4e-07\n1e+21\n")
	require.Equal(t, want.String(), outside.Python(t, "config_read.py", path))
}

func hex(r rune) string {
	const digits = "0123456789abcdef"
	if r < 16 {
		return string(digits[r])
	}
	return hex(r/16) + string(digits[r%16])
}
