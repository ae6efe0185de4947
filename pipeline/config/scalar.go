package config

import (
	"encoding"
	"fmt"
	"math"
	"reflect"
	"regexp"
	"strconv"

	"go.yaml.in/yaml/v4"
)

// The numbers of a configuration are plain decimals. YAML's octal (010 is 8),
// hexadecimal and underscored numbers are traps in a file written by hand.
var (
	integer = regexp.MustCompile(`^[-+]?(0|[1-9][0-9]*)$`)
	decimal = regexp.MustCompile(`^[-+]?(\.[0-9]+|(0|[1-9][0-9]*)(\.[0-9]*)?)([eE][-+]?[0-9]+)?$`)
)

const (
	integerCure = "write a plain decimal integer without quotes"
	decimalCure = "write a plain decimal number without unit or quotes"
)

// plain reports whether a node is a scalar without quotes.
func plain(n *yaml.Node) bool {
	return n.Kind == yaml.ScalarNode && n.Style&(yaml.SingleQuotedStyle|yaml.DoubleQuotedStyle|yaml.LiteralStyle|yaml.FoldedStyle) == 0
}

func (d *Doc) decodeScalar(n *yaml.Node, path string, v reflect.Value) error {
	switch v.Kind() {
	case reflect.Bool:
		if !plain(n) || (n.Value != "true" && n.Value != "false") {
			return d.wrong(n, path, "true or false", "write true or false without quotes")
		}
		v.SetBool(n.Value == "true")
		return nil
	case reflect.Int, reflect.Int8, reflect.Int16, reflect.Int32, reflect.Int64:
		return d.decodeInt(n, path, v)
	case reflect.Uint, reflect.Uint8, reflect.Uint16, reflect.Uint32, reflect.Uint64:
		return d.decodeUint(n, path, v)
	case reflect.Float64, reflect.Float32:
		return d.decodeFloat(n, path, v)
	case reflect.String:
		text, err := d.text(n, path)
		if err != nil {
			return err
		}
		v.SetString(text)
		return nil
	}
	panic(fmt.Sprintf("internal error: config: fields of type %s are not supported", v.Type()))
}

func (d *Doc) decodeInt(n *yaml.Node, path string, v reflect.Value) error {
	if !plain(n) || !integer.MatchString(n.Value) {
		return d.wrong(n, path, "a whole number", integerCure)
	}
	i, err := strconv.ParseInt(n.Value, 10, v.Type().Bits())
	if err != nil {
		return d.at(n.Line, path, "%s is too large for a whole number here; write a smaller one", short(n.Value))
	}
	v.SetInt(i)
	return nil
}

func (d *Doc) decodeUint(n *yaml.Node, path string, v reflect.Value) error {
	if !plain(n) || !integer.MatchString(n.Value) || n.Value[0] == '-' {
		return d.wrong(n, path, "a whole number not below 0", integerCure)
	}
	text := n.Value
	if text[0] == '+' { // ParseUint takes no sign
		text = text[1:]
	}
	u, err := strconv.ParseUint(text, 10, v.Type().Bits())
	if err != nil {
		return d.at(n.Line, path, "%s is too large for a whole number here; write a smaller one", short(n.Value))
	}
	v.SetUint(u)
	return nil
}

func (d *Doc) decodeFloat(n *yaml.Node, path string, v reflect.Value) error {
	if n.Kind == yaml.ScalarNode && n.Tag == "!!float" && !decimal.MatchString(n.Value) {
		return d.at(n.Line, path, "%s is no finite number; write a plain decimal number", short(n.Value))
	}
	if !plain(n) || !decimal.MatchString(n.Value) {
		return d.wrong(n, path, "a number", decimalCure)
	}
	f, err := strconv.ParseFloat(n.Value, v.Type().Bits())
	if err != nil || math.IsInf(f, 0) || math.IsNaN(f) {
		return d.at(n.Line, path, "%s is no finite number; write a plain decimal number", short(n.Value))
	}
	v.SetFloat(f)
	return nil
}

// text returns the string of a node. Plain text that YAML takes for a number
// or a truth value is refused, so that 007 or 1e3 keeps its spelling only when
// it is quoted on purpose; a date is taken as written.
func (d *Doc) text(n *yaml.Node, path string) (string, error) {
	if n.Kind != yaml.ScalarNode {
		return "", d.wrong(n, path, "text", "write one word or quoted text")
	}
	if plain(n) && n.Tag != "!!str" && n.Tag != "!!timestamp" {
		return "", d.wrong(n, path, "text", "put it in quotes if it is meant as text")
	}
	return n.Value, nil
}

// decodeText fills a type that reads its own text; its error says what is
// wrong and, after a semicolon, the cure.
func (d *Doc) decodeText(n *yaml.Node, path string, v reflect.Value) error {
	text, err := d.text(n, path)
	if err != nil {
		return err
	}
	if err := v.Addr().Interface().(encoding.TextUnmarshaler).UnmarshalText([]byte(text)); err != nil {
		return &Error{File: d.Name(), Line: n.Line, Path: path, What: err.Error(), Err: err}
	}
	return nil
}
