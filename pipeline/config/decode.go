package config

import (
	"fmt"
	"reflect"
	"slices"
	"strings"

	"go.yaml.in/yaml/v4"
)

// Decode is Parse and Doc.Decode in one, for a reader without further checks.
func Decode(name string, data []byte, into any) error {
	d, err := Parse(name, data)
	if err != nil {
		return err
	}
	return d.Decode(into)
}

// Decode fills the struct that into points to. Defaults are set first; every
// key that is not optional must be there, and no other key may be. Errors are
// of type *Error, the first fault in the order of the document, missing keys
// last; the struct is then not to be used.
func (d *Doc) Decode(into any) error {
	v := reflect.ValueOf(into)
	if v.Kind() != reflect.Pointer || v.IsNil() || v.Elem().Kind() != reflect.Struct {
		panic(fmt.Sprintf("internal error: config: Decode wants a pointer to a struct, not %T", into))
	}
	setDefaults(v.Elem())
	return d.decode(d.root, "", v.Elem())
}

func (d *Doc) decode(n *yaml.Node, path string, v reflect.Value) error {
	if v.CanAddr() && v.Addr().Type().Implements(textType) {
		return d.decodeText(n, path, v)
	}
	switch v.Kind() {
	case reflect.Struct:
		return d.decodeStruct(n, path, v)
	case reflect.Map:
		return d.decodeMap(n, path, v)
	case reflect.Slice, reflect.Array:
		return d.decodeList(n, path, v)
	case reflect.Pointer:
		fresh := reflect.New(v.Type().Elem())
		setDefaults(fresh.Elem())
		if err := d.decode(n, path, fresh.Elem()); err != nil {
			return err
		}
		v.Set(fresh)
		return nil
	}
	return d.decodeScalar(n, path, v)
}

func (d *Doc) decodeStruct(n *yaml.Node, path string, v reflect.Value) error {
	if n.Kind != yaml.MappingNode {
		return d.wrong(n, path, "a mapping", "write its keys below it")
	}
	known := fields(v.Type())
	found := make(map[string]bool, len(known))
	for i := 0; i+1 < len(n.Content); i += 2 {
		key, value := n.Content[i], n.Content[i+1]
		at := slices.IndexFunc(known, func(f field) bool { return f.key == key.Value })
		if at < 0 {
			return d.at(key.Line, join(path, key.Value), "unknown key; %s", suggestion(key.Value, known))
		}
		found[key.Value] = true
		if err := d.decode(value, join(path, key.Value), v.FieldByIndex(known[at].index)); err != nil {
			return err
		}
	}
	for _, f := range known {
		if !f.optional && !found[f.key] {
			full := join(path, f.key)
			return d.at(d.Line(path), full, "the key is missing; add it")
		}
	}
	return nil
}

func (d *Doc) decodeMap(n *yaml.Node, path string, v reflect.Value) error {
	if n.Kind != yaml.MappingNode {
		return d.wrong(n, path, "a mapping", "write its keys below it")
	}
	if v.Type().Key().Kind() != reflect.String {
		panic(fmt.Sprintf("internal error: config: %s is no map from strings", v.Type()))
	}
	m := reflect.MakeMapWithSize(v.Type(), len(n.Content)/2)
	for i := 0; i+1 < len(n.Content); i += 2 {
		key := n.Content[i].Value
		value := reflect.New(v.Type().Elem()).Elem()
		setDefaults(value)
		if err := d.decode(n.Content[i+1], join(path, key), value); err != nil {
			return err
		}
		m.SetMapIndex(reflect.ValueOf(key).Convert(v.Type().Key()), value)
	}
	v.Set(m)
	return nil
}

func (d *Doc) decodeList(n *yaml.Node, path string, v reflect.Value) error {
	if n.Kind != yaml.SequenceNode {
		return d.wrong(n, path, "a list", "write its items in [ ] or one a line behind a dash")
	}
	if v.Kind() == reflect.Array && len(n.Content) != v.Len() {
		return d.at(n.Line, path, "the list has %d items where %d are wanted; give exactly %d", len(n.Content), v.Len(), v.Len())
	}
	if v.Kind() == reflect.Slice {
		v.Set(reflect.MakeSlice(v.Type(), len(n.Content), len(n.Content)))
	}
	for i, item := range n.Content {
		setDefaults(v.Index(i))
		if err := d.decode(item, index(path, i), v.Index(i)); err != nil {
			return err
		}
	}
	return nil
}

func (d *Doc) wrong(n *yaml.Node, path, wanted, cure string) error {
	return d.at(n.Line, path, "%s is wanted, not %s; %s", wanted, describe(n), cure)
}

// suggestion is the cure for an unknown key: the key with its unit if only the
// unit was left out, a key one or two letters away, or the list of all.
func suggestion(key string, known []field) string {
	best, bestDistance := "", 3
	for _, f := range known {
		distance := EditDistance(strings.ToLower(key), f.key)
		if strings.HasPrefix(f.key, key+"_") {
			distance = 0
		}
		if distance < bestDistance {
			best, bestDistance = f.key, distance
		}
	}
	if best != "" {
		return "write " + best
	}
	keys := make([]string, len(known))
	for i, f := range known {
		keys[i] = f.key
	}
	return "the keys here are " + strings.Join(keys, ", ")
}

// EditDistance is the Levenshtein distance of two words in bytes, counted no
// further than words of 64 bytes, beyond which nothing is alike.
func EditDistance(a, b string) int {
	if len(a) > 64 || len(b) > 64 {
		return 64
	}
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			cost := diagonal
			if a[i] != b[j] {
				cost++
			}
			diagonal = row[j+1]
			row[j+1] = min(cost, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}
