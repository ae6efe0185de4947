package config

import (
	"errors"
	"reflect"
	"strings"
	"testing"
)

// FuzzDecode: any text decodes to a struct that encodes and decodes back equal,
// or is refused by an *Error in one line that names the file. It never panics.
func FuzzDecode(f *testing.F) {
	for _, seed := range []string{
		good, "", "---\n", "a: 1\n---\nb: 2\n", "a: &x 1\nb: *x\n", "a:\n  <<: {b: 1}\n", "a: !!float 1\n", "? [a]\n: 1\n",
		"use: auto\nname: 'a\n\n b'\ncount: -0\nwidth_mm: -0\nthree: [0, 1e-320, 1.]\n",
		"{use: \"\\u2028\\x85\", name: \"\\0\", count: +5, width_mm: .5e+3, three: [0, 1, 2], table: {a: 1}}",
		"use: |\n  block\n  text\nname: >-\n  folded\n  text\ncount: 1\nwidth_mm: 1\nthree:\n- 1\n- 2\n- 3\n",
		"%YAML 1.2\n---\nuse: a\n...\n", "\ufeffuse: a\n", "use: a\r\nname: b\r\n", "a: [" + strings.Repeat("[", 30), "a: \"\\xff\"",
	} {
		f.Add([]byte(seed))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		var s sample
		err := Decode("f.yaml", data, &s)
		if err != nil {
			var refusal *Error
			if !errors.As(err, &refusal) || refusal.File != "f.yaml" || strings.ContainsAny(err.Error(), "\n\r") || !strings.Contains(refusal.What, ";") && refusal.Path != "colour" {
				t.Fatalf("no sentence of ours: %q", err)
			}
			return
		}
		text, err := Encode(s)
		if err != nil {
			t.Fatalf("decoded, but does not encode: %v", err)
		}
		var back sample
		if err := Decode("f.yaml", text, &back); err != nil {
			t.Fatalf("encoded, but does not decode: %v\n%s", err, text)
		}
		if !reflect.DeepEqual(s, back) {
			t.Fatalf("came back changed: %+v, was %+v\n%s", back, s, text)
		}
	})
}
