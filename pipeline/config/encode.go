package config

import (
	"encoding"
	"fmt"
	"math"
	"reflect"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"go.yaml.in/yaml/v4"
)

// Encode writes a struct as YAML: every key in the order of the fields, map
// keys sorted, numbers with the fewest digits that read back exactly. The text
// depends on the values alone, and Decode of it gives an equal struct. Left out
// are only nil pointers, nil slices and nil maps of optional keys. An error
// says which value no document can hold (NaN, infinity, text that is not
// UTF-8).
func Encode(from any) (text []byte, err error) {
	v := reflect.Indirect(reflect.ValueOf(from))
	if v.Kind() != reflect.Struct {
		panic(fmt.Sprintf("internal error: config: Encode wants a struct, not %T", from))
	}
	n, err := encode(v, "")
	if err != nil {
		return nil, err
	}
	defer func() {
		if p := recover(); p != nil {
			text, err = nil, fmt.Errorf("write YAML: the library gave up: %v", p)
		}
	}()
	text, err = yaml.Dump(n, yaml.WithLineWidth(-1), yaml.WithIndent(2))
	if err != nil {
		return nil, fmt.Errorf("write YAML: %w", err)
	}
	return text, nil
}

func encode(v reflect.Value, path string) (*yaml.Node, error) {
	if m, ok := v.Interface().(encoding.TextMarshaler); ok {
		text, err := m.MarshalText()
		if err != nil {
			return nil, &Error{Path: path, What: err.Error(), Err: err}
		}
		return encodeText(string(text), path)
	}
	switch v.Kind() {
	case reflect.Struct:
		return encodeStruct(v, path)
	case reflect.Map:
		return encodeMap(v, path)
	case reflect.Slice, reflect.Array:
		return encodeList(v, path)
	case reflect.Pointer:
		if v.IsNil() {
			return nil, &Error{Path: path, What: "no value; give one"}
		}
		return encode(v.Elem(), path)
	case reflect.String:
		return encodeText(v.String(), path)
	case reflect.Bool:
		return scalar("!!bool", strconv.FormatBool(v.Bool())), nil
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64:
		return scalar("!!int", strconv.FormatInt(v.Int(), 10)), nil
	case reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		return scalar("!!int", strconv.FormatUint(v.Uint(), 10)), nil
	case reflect.Float64, reflect.Float32:
		return encodeFloat(v, path)
	}
	panic(fmt.Sprintf("internal error: config: fields of type %s are not supported", v.Type()))
}

func scalar(tag, value string) *yaml.Node {
	return &yaml.Node{Kind: yaml.ScalarNode, Tag: tag, Value: value}
}

func encodeFloat(v reflect.Value, path string) (*yaml.Node, error) {
	f := v.Float()
	if math.IsNaN(f) || math.IsInf(f, 0) {
		return nil, &Error{Path: path, What: fmt.Sprintf("%v is no finite number; give one", f)}
	}
	text := strconv.FormatFloat(f, 'g', -1, v.Type().Bits())
	if integer.MatchString(text) && text != "-0" { // the tag has to be what a reader resolves
		return scalar("!!int", text), nil
	}
	// YAML 1.1 reads 4e-07 as text: it wants a point.
	if mantissa, exponent, found := strings.Cut(text, "e"); found && !strings.Contains(mantissa, ".") {
		text = mantissa + ".0e" + exponent
	}
	return scalar("!!float", text), nil
}

// safe is text that no YAML reader, of version 1.1 or 1.2, takes for anything
// but itself, save the words below; everything else is quoted.
var safe = regexp.MustCompile(`^[A-Za-z][A-Za-z0-9_./-]*$`)

var reserved = []string{"true", "false", "yes", "no", "on", "off", "y", "n", "null"}

func encodeText(text, path string) (*yaml.Node, error) {
	if !utf8.ValidString(text) {
		return nil, &Error{Path: path, What: "the text is not UTF-8; give UTF-8"}
	}
	n := scalar("!!str", text)
	if !safe.MatchString(text) || slices.Contains(reserved, strings.ToLower(text)) {
		n.Style = yaml.DoubleQuotedStyle
	}
	return n, nil
}

func encodeStruct(v reflect.Value, path string) (*yaml.Node, error) {
	n := &yaml.Node{Kind: yaml.MappingNode}
	for _, f := range fields(v.Type()) {
		value := v.FieldByIndex(f.index)
		if f.optional && isNil(value) {
			continue
		}
		item, err := encode(value, join(path, f.key))
		if err != nil {
			return nil, err
		}
		if f.flow && item.Kind != yaml.ScalarNode {
			item.Style = yaml.FlowStyle
		}
		n.Content = append(n.Content, scalar("!!str", f.key), item)
	}
	return n, nil
}

func isNil(v reflect.Value) bool {
	switch v.Kind() {
	case reflect.Pointer, reflect.Slice, reflect.Map:
		return v.IsNil()
	}
	return false
}

func encodeMap(v reflect.Value, path string) (*yaml.Node, error) {
	n := &yaml.Node{Kind: yaml.MappingNode}
	keys := v.MapKeys()
	slices.SortFunc(keys, func(a, b reflect.Value) int { return strings.Compare(a.String(), b.String()) })
	for _, key := range keys {
		if !word.MatchString(key.String()) {
			return nil, &Error{Path: path, What: fmt.Sprintf("the key %q is no plain word; write letters, digits, _ and - only", key.String())}
		}
		item, err := encode(v.MapIndex(key), join(path, key.String()))
		if err != nil {
			return nil, err
		}
		n.Content = append(n.Content, scalar("!!str", key.String()), item)
	}
	return n, nil
}

func encodeList(v reflect.Value, path string) (*yaml.Node, error) {
	n := &yaml.Node{Kind: yaml.SequenceNode}
	if v.Len() == 0 {
		n.Style = yaml.FlowStyle
	}
	for i := range v.Len() {
		item, err := encode(v.Index(i), index(path, i))
		if err != nil {
			return nil, err
		}
		if item.Kind == yaml.MappingNode && simple(item) {
			item.Style = yaml.FlowStyle
		}
		n.Content = append(n.Content, item)
	}
	return n, nil
}

// simple reports whether an item of a list reads best in one line, as
// the points of a table do: at most four keys, scalars all.
func simple(n *yaml.Node) bool {
	return len(n.Content) <= 8 && !slices.ContainsFunc(n.Content, func(c *yaml.Node) bool { return c.Kind != yaml.ScalarNode })
}
