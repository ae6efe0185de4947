package config

import (
	"encoding"
	"fmt"
	"reflect"
	"strings"
)

// Defaulter is implemented by a pointer to a struct whose absent optional keys
// are not the zero value. SetDefaults is called on a struct before a document
// fills it, inner structs first, so that an outer struct has the last word.
type Defaulter interface {
	SetDefaults()
}

var (
	defaulterType = reflect.TypeFor[Defaulter]()
	textType      = reflect.TypeFor[encoding.TextUnmarshaler]()
)

// field is one key of a struct.
type field struct {
	key      string
	optional bool
	flow     bool
	index    []int
}

// fields lists the keys of a struct in the order of its fields. A tag that
// makes no sense is a fault of the program, found by the first test.
func fields(t reflect.Type) []field {
	var list []field
	for i := range t.NumField() {
		f := t.Field(i)
		tag, ok := f.Tag.Lookup("yaml")
		if !ok || tag == "-" {
			continue
		}
		key, options, _ := strings.Cut(tag, ",")
		if options == "inline" && f.Type.Kind() == reflect.Struct {
			for _, inner := range fields(f.Type) {
				inner.index = append([]int{i}, inner.index...)
				list = append(list, inner)
			}
			continue
		}
		if !word.MatchString(key) || (options != "" && options != "flow") || !f.IsExported() {
			panic(fmt.Sprintf("internal error: config: field %s.%s has an unusable tag %q", t, f.Name, tag))
		}
		list = append(list, field{key: key, flow: options == "flow", optional: f.Tag.Get("config") == "optional", index: []int{i}})
	}
	return list
}

// setDefaults calls SetDefaults over a struct and the structs in it.
func setDefaults(v reflect.Value) {
	if v.Kind() != reflect.Struct {
		return
	}
	for _, f := range fields(v.Type()) {
		setDefaults(v.FieldByIndex(f.index))
	}
	if v.CanAddr() && v.Addr().Type().Implements(defaulterType) {
		v.Addr().Interface().(Defaulter).SetDefaults()
	}
}
