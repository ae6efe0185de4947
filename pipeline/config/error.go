package config

import (
	"fmt"
	"strings"
)

// Error is a refusal of a document or of a value in it.
type Error struct {
	// File is the name of the document as given to Parse; empty for a struct
	// checked without a document.
	File string
	// Line counts from 1; 0 when there is none to name.
	Line int
	// Path is the key path, empty for the document as a whole.
	Path string
	// What says what is wrong and, after a semicolon, the cure.
	What string
	// Err is the cause, such as a syntax error of the library, or nil.
	Err error
}

// Error is the sentence "FILE:LINE: KEY.PATH: what is wrong; the cure".
func (e *Error) Error() string {
	var b strings.Builder
	if e.File != "" {
		b.WriteString(e.File)
		if e.Line > 0 {
			fmt.Fprintf(&b, ":%d", e.Line)
		}
		b.WriteString(": ")
	}
	if e.Path != "" {
		b.WriteString(e.Path + ": ")
	}
	b.WriteString(e.What)
	return b.String()
}

// Unwrap returns the cause, if there is one.
func (e *Error) Unwrap() error { return e.Err }
