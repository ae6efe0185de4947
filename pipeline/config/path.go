package config

import (
	"fmt"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v4"
)

// join appends a key to a key path.
func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}

// index appends a list index, from 0, to a key path.
func index(path string, i int) string { return fmt.Sprintf("%s[%d]", path, i) }

// Has reports whether the document itself contains the key path, as opposed to
// a default. A nil Doc contains nothing.
func (d *Doc) Has(path string) bool {
	_, whole := d.find(path)
	return whole
}

// Line returns the line, from 1, of a key path, or of its nearest ancestor that
// the document contains; 0 for a nil Doc.
func (d *Doc) Line(path string) int {
	line, _ := d.find(path)
	return line
}

// Errorf returns an *Error for a key path with its line; the text says what is
// wrong and, after a semicolon, the cure.
func (d *Doc) Errorf(path, format string, args ...any) error {
	return d.at(d.Line(path), path, format, args...)
}

// find walks the path as far as it exists: the line reached, and whether that
// is the whole path. A key's line is that of the key, an item's its own.
func (d *Doc) find(path string) (line int, whole bool) {
	if d == nil {
		return 0, false
	}
	n := d.root
	line = n.Line
	for _, step := range steps(path) {
		next, at := child(n, step)
		if next == nil {
			return line, false
		}
		n, line = next, at
	}
	return line, true
}

// steps splits "a.b[2].c" into "a", "b", "[2]", "c".
func steps(path string) []string {
	return strings.FieldsFunc(strings.ReplaceAll(path, "[", ".["), func(r rune) bool { return r == '.' })
}

func child(n *yaml.Node, step string) (*yaml.Node, int) {
	if number, ok := strings.CutPrefix(step, "["); ok {
		i, err := strconv.Atoi(strings.TrimSuffix(number, "]"))
		if err != nil || n.Kind != yaml.SequenceNode || i < 0 || i >= len(n.Content) {
			return nil, 0
		}
		return n.Content[i], n.Content[i].Line
	}
	if n.Kind != yaml.MappingNode {
		return nil, 0
	}
	for i := 0; i+1 < len(n.Content); i += 2 {
		if n.Content[i].Value == step {
			return n.Content[i+1], n.Content[i].Line
		}
	}
	return nil, 0
}
