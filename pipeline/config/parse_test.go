package config

import (
	"strings"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestParseRefusesForms(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", "f:1: the document is empty; write its keys"},
		{"comment only", "# nothing\n", "f:1: the document is empty; write its keys"},
		{"marker only", "---\n", "f:2: the document is empty; write its keys"},
		{"null", "~\n", "f:1: the document is empty; write its keys"},
		{"no keys", "{}\n", "f:1: the document is empty; write its keys"},
		{"list", "- 1\n- 2\n", "f:1: the document is a list; write keys and values, one `key: value` a line"},
		{"scalar", "\nhello\n", "f:2: the document is hello; write keys and values, one `key: value` a line"},
		{"quoted", "'hello'\n", "f:1: the document is the text \"hello\"; write keys and values, one `key: value` a line"},
		{"second document", "a: 1\n---\nb: 2\n", "f:2: a second document starts here; keep one document in a file"},
		{"empty second document", "a: 1\n---\n", "f:2: a second document starts here; keep one document in a file"},
		{"anchor", "a: &x 1\nb: 2\n", "f:1: a: an anchor (&x) is not allowed; write the value out where it is needed"},
		{"alias", "a: &x {c: 1}\nb: *x\n", "f:1: a: an anchor (&x) is not allowed; write the value out where it is needed"},
		{"anchored key", "&x a: 1\n", "f:1: a key with an anchor, an alias or a tag is not allowed; write the plain key"},
		{"merge", "a:\n  <<: {b: 1}\n", "f:2: a: a merge key (<<) is not allowed; write the keys out"},
		{"tag", "a: !!float 1\n", "f:1: a: an explicit tag (!!float) is not allowed; write the plain value"},
		{"own tag", "a:\n  - !thing x\n", "f:2: a[0]: an explicit tag (!thing) is not allowed; write the plain value"},
		{"tagged key", "!!str a: 1\n", "f:1: a key with an anchor, an alias or a tag is not allowed; write the plain key"},
		{"key of two words", "a b: 1\n", `f:1: the key "a b" is no plain word; write letters, digits, _ and - only`},
		{"number as key", "a: {1: 2}\n", `f:1: a: the key "1" is no plain word; write letters, digits, _ and - only`},
		{"list as key", "? [a]\n: 1\n", "f:1: a key is a list; write a plain word"},
		{"empty key", "a:\n  : 1\n", `f:2: a: the key "" is no plain word; write letters, digits, _ and - only`},
		{"duplicate", "a: 1\nb: 2\na: 3\n", "f:3: a: the key stands here a second time, first on line 1; delete one of them"},
		{"duplicate within", "a:\n  - b: 1\n    c: 1\n    b: 2\n", "f:4: a[0].b: the key stands here a second time, first on line 2; delete one of them"},
		{"null in a list", "a: [1, ~]\n", "f:1: a[1]: no value; give one or delete the key"},
		{"not UTF-8", "a: 1\nb: \xff\n", "f:2: the text is not UTF-8; save the file as UTF-8"},
		{"control character", "a: 1\nb: \x01\n", "f:2: the text holds the control character U+0001; delete it"},
		{"UTF-16", "\xfe\xff\x00a", "f:1: the text is not UTF-8; save the file as UTF-8"},
	} {
		d, err := Parse("f", []byte(c.text))
		require.EqualError(t, err, c.want, c.name)
		require.Nil(t, d, c.name)
	}
}

// TestParseSyntax: the words are the library's, the line and the form ours.
func TestParseSyntax(t *testing.T) {
	for _, c := range []struct{ name, text, prefix string }{
		{"open bracket", "a: 1\nb: [1, 2\n", "f:"},
		{"tab", "a:\n\tb: 1\n", "f:2: not YAML ("},
		{"indentation", "a: 1\n  b: 2\n", "f:2: not YAML ("},
		{"unknown alias", "a: 1\nb: *x\n", "f:2: not YAML ("},
		{"second document broken", "a: 1\n---\nb: [\n", "f:"},
		{"open quote", "a: 1\nb: \"x\n", "f:"},
		{"deep", "a: " + strings.Repeat("[", 100) + strings.Repeat("]", 100), "f:1: not YAML ("},
	} {
		_, err := Parse("f", []byte(c.text))
		require.Error(t, err, c.name)
		text := err.Error()
		require.True(t, strings.HasPrefix(text, c.prefix), "%s: %s", c.name, text)
		require.Contains(t, text, ": not YAML (", c.name)
		require.True(t, strings.HasSuffix(text, "); mend the syntax there"), "%s: %s", c.name, text)
		require.NotContains(t, text, "\n", c.name)
		t.Logf("%s: %s", c.name, text)
	}
}

// TestParseBombs: texts made to cost time or memory are refused at once.
func TestParseBombs(t *testing.T) {
	big := "a: " + strings.Repeat("x", maxBytes)
	_, err := Parse("f", []byte(big))
	require.EqualError(t, err, "f: the file has 1048579 bytes, more than a configuration may have (1048576); give a smaller file")

	// Nine levels of nine aliases each would expand to 3.9e8 values.
	var laughs strings.Builder
	laughs.WriteString("a0: &a0 [x, x, x, x, x, x, x, x, x]\n")
	for level := 'b'; level < 'j'; level++ {
		previous := string(level - 1)
		laughs.WriteString(string(level) + "0: &" + string(level) + "0 [" + strings.TrimSuffix(strings.Repeat("*"+previous+"0, ", 9), ", ") + "]\n")
	}
	_, err = Parse("f", []byte(laughs.String()))
	require.EqualError(t, err, "f:1: a0: an anchor (&a0) is not allowed; write the value out where it is needed")
}

func TestDocFindsLines(t *testing.T) {
	d, err := Parse("f.yaml", []byte("# head\na: 1\nb:\n  c: [1,\n    2]\n  d:\n    - e: 1\n    - e: 2\n      f: 3\n"))
	require.NoError(t, err)
	require.Equal(t, "f.yaml", d.Name())
	for _, c := range []struct {
		path string
		line int
		has  bool
	}{
		{"", 2, true}, {"a", 2, true}, {"b", 3, true}, {"b.c", 4, true}, {"b.c[1]", 5, true}, {"b.d[1]", 8, true},
		{"b.d[1].f", 9, true}, {"b.d[1].g", 8, false}, {"b.d[7].g", 6, false}, {"b.d[x]", 6, false}, {"b.x.y", 3, false},
		{"x", 2, false}, {"a.b", 2, false}, {"a[0]", 2, false},
	} {
		require.Equal(t, c.line, d.Line(c.path), c.path)
		require.Equal(t, c.has, d.Has(c.path), c.path)
	}
	require.EqualError(t, d.Errorf("b.d[1].f", "%d is odd; give an even one", 3), "f.yaml:9: b.d[1].f: 3 is odd; give an even one")
	var none *Doc
	require.EqualError(t, none.Errorf("b.f", "odd; give an even one"), "b.f: odd; give an even one")
	require.False(t, none.Has("a"))
	require.Empty(t, none.Name())
}
