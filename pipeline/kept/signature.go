package kept

import (
	"fmt"
	"reflect"
	"strings"
	"time"

	"gonum.org/v1/gonum/mat"
)

var (
	timeType      = reflect.TypeFor[time.Time]()
	symmetricType = reflect.TypeFor[mat.SymDense]()
)

// signature describes a type as far as its bytes depend on it. The error names a type that
// cannot be kept: interfaces, maps, functions, channels, structs with unexported fields.
func signature(t reflect.Type) (string, error) {
	switch t {
	case timeType, symmetricType:
		return t.String(), nil
	}
	switch t.Kind() {
	case reflect.Bool, reflect.String,
		reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64,
		reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64,
		reflect.Float32, reflect.Float64:
		return t.Kind().String(), nil
	case reflect.Pointer, reflect.Slice, reflect.Array:
		inner, err := signature(t.Elem())
		switch t.Kind() {
		case reflect.Pointer:
			inner = "*" + inner
		case reflect.Slice:
			inner = "[]" + inner
		default:
			inner = fmt.Sprintf("[%d]%s", t.Len(), inner)
		}
		return inner, err
	case reflect.Struct:
		var b strings.Builder
		b.WriteString("{")
		for i := range t.NumField() {
			f := t.Field(i)
			if !f.IsExported() {
				return "", fmt.Errorf("internal error: %v has the unexported field %s, which cannot be kept", t, f.Name)
			}
			inner, err := signature(f.Type)
			if err != nil {
				return "", err
			}
			b.WriteString(f.Name + " " + inner + ";")
		}
		b.WriteString("}")
		return b.String(), nil
	}
	return "", fmt.Errorf("internal error: a %v cannot be kept", t)
}
