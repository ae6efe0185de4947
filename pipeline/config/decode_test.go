package config

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

// colour is a type that reads its own text.
type colour int

func (c *colour) UnmarshalText(text []byte) error {
	switch string(text) {
	case "red":
		*c = 1
	case "green":
		*c = 2
	default:
		return &Error{What: "no colour; write red or green"}
	}
	return nil
}

func (c colour) MarshalText() ([]byte, error) {
	return []byte([]string{"none", "red", "green"}[c]), nil
}

type common struct {
	Use string `yaml:"use"`
}

type point struct {
	X float64 `yaml:"x_mm"`
	N int     `yaml:"n" config:"optional"`
}

func (p *point) SetDefaults() { p.N = 7 }

// sample has a field of every kind that the package supports.
type sample struct {
	common `yaml:",inline"`
	Name   string             `yaml:"name"`
	Count  int                `yaml:"count"`
	Seed   uint64             `yaml:"seed" config:"optional"`
	Width  float64            `yaml:"width_mm"`
	Deep   bool               `yaml:"deep" config:"optional"`
	Three  [3]float64         `yaml:"three,flow"`
	Points []point            `yaml:"points" config:"optional"`
	One    point              `yaml:"one" config:"optional"`
	Maybe  *point             `yaml:"maybe" config:"optional"`
	Table  map[string]float64 `yaml:"table" config:"optional"`
	Colour colour             `yaml:"colour" config:"optional"`
	hidden int
}

// SetDefaults gives colour a default: its zero value has no text.
func (s *sample) SetDefaults() { s.Colour = 1 }

const good = `use: auto
name: loom
count: 4
seed: 18446744073709551615
width_mm: 1.5e-3
deep: true
three: [1, -2.5, +.5]
points:
  - {x_mm: 1, n: 2}
  - x_mm: -3
maybe:
  x_mm: 0
table: {b: 1, a-1: 2}
colour: green
`

func TestDecodeGood(t *testing.T) {
	var s sample
	s.hidden = 3
	require.NoError(t, Decode("s.yaml", []byte(good), &s))
	require.Equal(t, sample{
		common: common{Use: "auto"}, Name: "loom", Count: 4, Seed: 18446744073709551615, Width: 1.5e-3, Deep: true,
		Three: [3]float64{1, -2.5, 0.5}, Points: []point{{1, 2}, {-3, 7}}, One: point{0, 7}, Maybe: &point{0, 7},
		Table: map[string]float64{"a-1": 2, "b": 1}, Colour: 2, hidden: 3,
	}, s)
}

// swap replaces one line of the good document, by its key.
func swap(t *testing.T, key, line string) string {
	t.Helper()
	lines := strings.Split(good, "\n")
	for i, l := range lines {
		if strings.HasPrefix(l, key+":") {
			lines[i] = line
			return strings.Join(lines, "\n")
		}
	}
	t.Fatalf("the good document has no key %s", key)
	return ""
}

func TestDecodeRefusesValues(t *testing.T) {
	for _, c := range []struct{ key, line, want string }{
		{"count", "count: 4.5", "s.yaml:3: count: a whole number is wanted, not 4.5; write a plain decimal integer without quotes"},
		{"count", "count: 4.0", "s.yaml:3: count: a whole number is wanted, not 4.0; write a plain decimal integer without quotes"},
		{"count", "count: 1e3", "s.yaml:3: count: a whole number is wanted, not 1e3; write a plain decimal integer without quotes"},
		{"count", "count: 010", "s.yaml:3: count: a whole number is wanted, not 010; write a plain decimal integer without quotes"},
		{"count", "count: 0x10", "s.yaml:3: count: a whole number is wanted, not 0x10; write a plain decimal integer without quotes"},
		{"count", "count: 1_000", "s.yaml:3: count: a whole number is wanted, not 1_000; write a plain decimal integer without quotes"},
		{"count", "count: '4'", `s.yaml:3: count: a whole number is wanted, not the text "4"; write a plain decimal integer without quotes`},
		{"count", "count: 9223372036854775808", "s.yaml:3: count: 9223372036854775808 is too large for a whole number here; write a smaller one"},
		{"count", "count: [4]", "s.yaml:3: count: a whole number is wanted, not a list; write a plain decimal integer without quotes"},
		{"count", "count: true", "s.yaml:3: count: a whole number is wanted, not true; write a plain decimal integer without quotes"},
		{"count", "count:", "s.yaml:3: count: no value; give one or delete the key"},
		{"count", "count: ~", "s.yaml:3: count: no value; give one or delete the key"},
		{"seed", "seed: -1", "s.yaml:4: seed: a whole number not below 0 is wanted, not -1; write a plain decimal integer without quotes"},
		{"seed", "seed: 18446744073709551616", "s.yaml:4: seed: 18446744073709551616 is too large for a whole number here; write a smaller one"},
		{"width_mm", "width_mm: .nan", "s.yaml:5: width_mm: .nan is no finite number; write a plain decimal number"},
		{"width_mm", "width_mm: -.inf", "s.yaml:5: width_mm: -.inf is no finite number; write a plain decimal number"},
		{"width_mm", "width_mm: NaN", "s.yaml:5: width_mm: a number is wanted, not NaN; write a plain decimal number without unit or quotes"},
		{"width_mm", "width_mm: 1e999", "s.yaml:5: width_mm: 1e999 is no finite number; write a plain decimal number"},
		{"width_mm", "width_mm: 1.5 mm", "s.yaml:5: width_mm: a number is wanted, not 1.5 mm; write a plain decimal number without unit or quotes"},
		{"width_mm", "width_mm: 1,5", "s.yaml:5: width_mm: a number is wanted, not 1,5; write a plain decimal number without unit or quotes"},
		{"width_mm", "width_mm: \"1.5\"", `s.yaml:5: width_mm: a number is wanted, not the text "1.5"; write a plain decimal number without unit or quotes`},
		{"width_mm", "width_mm: {a: 1}", "s.yaml:5: width_mm: a number is wanted, not a mapping; write a plain decimal number without unit or quotes"},
		{"width_mm", "width_mm: 12:30:15", "s.yaml:5: width_mm: a number is wanted, not 12:30:15; write a plain decimal number without unit or quotes"},
		{"deep", "deep: yes", "s.yaml:6: deep: true or false is wanted, not yes; write true or false without quotes"},
		{"deep", "deep: 1", "s.yaml:6: deep: true or false is wanted, not 1; write true or false without quotes"},
		{"name", "name: 12", "s.yaml:2: name: text is wanted, not 12; put it in quotes if it is meant as text"},
		{"name", "name: true", "s.yaml:2: name: text is wanted, not true; put it in quotes if it is meant as text"},
		{"name", "name: [a]", "s.yaml:2: name: text is wanted, not a list; write one word or quoted text"},
		{"three", "three: [1, 2]", "s.yaml:7: three: the list has 2 items where 3 are wanted; give exactly 3"},
		{"three", "three: [1, 2, x]", "s.yaml:7: three[2]: a number is wanted, not x; write a plain decimal number without unit or quotes"},
		{"three", "three: 1", "s.yaml:7: three: a list is wanted, not 1; write its items in [ ] or one a line behind a dash"},
		{"colour", "colour: blue", "s.yaml:14: colour: no colour; write red or green"},
		{"colour", "colour: 3", "s.yaml:14: colour: text is wanted, not 3; put it in quotes if it is meant as text"},
		{"table", "table: 3", "s.yaml:13: table: a mapping is wanted, not 3; write its keys below it"},
		{"table", "table: {a: b}", "s.yaml:13: table.a: a number is wanted, not b; write a plain decimal number without unit or quotes"},
		{"points", "points: [{x_mm: 1}, {n: 2}]\none:", "s.yaml:8: points[1].x_mm: the key is missing; add it"},
		{"points", "points: [{x_mm: 1, n: 2.5}]\none:", "s.yaml:8: points[0].n: a whole number is wanted, not 2.5; write a plain decimal integer without quotes"},
		{"points", "points: [3]\none:", "s.yaml:8: points[0]: a mapping is wanted, not 3; write its keys below it"},
		{"width_mm", "width: 3", "s.yaml:5: width: unknown key; write width_mm"},
		{"width_mm", "Width_mm: 3", "s.yaml:5: Width_mm: unknown key; write width_mm"},
		{"width_mm", "wdth_mm: 3", "s.yaml:5: wdth_mm: unknown key; write width_mm"},
		{"width_mm", "something: 3", "s.yaml:5: something: unknown key; the keys here are use, name, count, seed, width_mm, deep, three, points, one, maybe, table, colour"},
		{"width_mm", "deep: false", "s.yaml:6: deep: the key stands here a second time, first on line 5; delete one of them"},
		{"width_mm", "# nothing", "s.yaml:1: width_mm: the key is missing; add it"},
		{"hidden", "", ""},
	} {
		if c.key == "hidden" { // an untagged field has no key
			c.key, c.line = "width_mm", "hidden: 3"
			c.want = "s.yaml:5: hidden: unknown key; the keys here are use, name, count, seed, width_mm, deep, three, points, one, maybe, table, colour"
		}
		text := swap(t, c.key, c.line)
		if strings.HasSuffix(c.line, "one:") {
			// The good document's block items follow; give them a key of their own.
			text = strings.Replace(text, "one:\n  - {x_mm: 1, n: 2}\n  - x_mm: -3\n", "one: {x_mm: 1}\n", 1)
		}
		var s sample
		err := Decode("s.yaml", []byte(text), &s)
		require.EqualError(t, err, c.want, "%s", c.line)
		var typed *Error
		require.ErrorAs(t, err, &typed, "%s", c.line)
	}
}

// TestDecodeDates: a date is text as written, for fields that parse their own.
func TestDecodeDates(t *testing.T) {
	var s struct {
		Start string `yaml:"start_utc"`
	}
	for _, date := range []string{"2031-04-05T06:07:08Z", "2031-04-05", "'2031-04-05T06:07:08'"} {
		require.NoError(t, Decode("d.yaml", []byte("start_utc: "+date), &s))
		require.Equal(t, strings.Trim(date, "'"), s.Start)
	}
}

// TestDecodeSmallWidths: integers keep to the width of their field.
func TestDecodeSmallWidths(t *testing.T) {
	var s struct {
		A int8    `yaml:"a" config:"optional"`
		B uint16  `yaml:"b" config:"optional"`
		F float32 `yaml:"f" config:"optional"`
	}
	require.NoError(t, Decode("w", []byte("{a: -128, b: 65535, f: 1e38}"), &s))
	require.Equal(t, int8(-128), s.A)
	require.Equal(t, uint16(65535), s.B)
	require.EqualError(t, Decode("w", []byte("a: 128"), &s), "w:1: a: 128 is too large for a whole number here; write a smaller one")
	require.EqualError(t, Decode("w", []byte("b: 65536"), &s), "w:1: b: 65536 is too large for a whole number here; write a smaller one")
	require.EqualError(t, Decode("w", []byte("f: 1e39"), &s), "w:1: f: 1e39 is no finite number; write a plain decimal number")
}

// TestProgrammingFaults: what no input can cause panics as an internal error.
func TestProgrammingFaults(t *testing.T) {
	d, err := Parse("p", []byte("a: 1"))
	require.NoError(t, err)
	var number int
	require.PanicsWithValue(t, "internal error: config: Decode wants a pointer to a struct, not *int", func() { _ = d.Decode(&number) })
	var bad struct {
		A chan int `yaml:"a"`
	}
	require.PanicsWithValue(t, "internal error: config: fields of type chan int are not supported", func() { _ = d.Decode(&bad) })
	var tag struct {
		A int `yaml:"a,omitempty"`
	}
	require.Panics(t, func() { _ = d.Decode(&tag) })
}

func TestEditDistance(t *testing.T) {
	// Levenshtein's textbook pair, and the edges.
	require.Equal(t, 3, EditDistance("kitten", "sitting"))
	require.Equal(t, 0, EditDistance("pitch_um", "pitch_um"))
	require.Equal(t, 4, EditDistance("", "abcd"))
	require.Equal(t, 64, EditDistance(strings.Repeat("a", 65), "a"))
}
