// Package config reads and writes the YAML of mirrorloom strictly.
//
// A document is one YAML mapping in one file; Parse checks its form and keeps
// the line of every key. Decode fills a Go struct from it; a Doc then lets the
// reader of a profile, a target, a scene or a recipe report what is wrong with
// a value by key path, and the line is found. Every refusal is one sentence,
//
//	FILE:LINE: KEY.PATH: what is wrong; the cure
//
// where a key path reads like "detector.amplifiers[0].gain_e_per_adu".
//
// Refused: syntax errors, an empty document, a second document, text that is
// not UTF-8 or larger than a mebibyte, anchors, aliases, merge keys, explicit
// tags, keys that are not plain words, duplicate keys, unknown keys, missing
// keys, keys without a value (null), and values of another type than the field:
// a number with a fraction for an integer, octal, hexadecimal and underscored
// numbers, NaN and infinities, a quoted number for a number, a number for a
// string, yes/no for true/false. Nothing is converted in silence.
//
// A struct describes its mapping with tags:
//
//	PitchUM float64 `yaml:"pitch_um"`                    // must be there
//	StuckCSV string `yaml:"stuck_csv" config:"optional"` // may be absent
//	Data [4]int     `yaml:"data,flow"`                   // written in one line
//	Common          `yaml:",inline"`                     // keys of an embedded struct
//	cache []byte                                         // untagged: no key
//
// An absent optional key keeps the field's default: the zero value, or what a
// SetDefaults method puts there (see Defaulter). Fields may be bool, integers,
// floats, strings, types whose pointer implements encoding.TextUnmarshaler,
// structs, pointers, slices, arrays (of exactly their length) and maps from
// strings. Encode writes the same structs as text that decodes back equal.
//
// Invariants: nothing here panics on input; the library's panics are recovered
// and become errors; a target that was not filled whole is not to be used.
package config
