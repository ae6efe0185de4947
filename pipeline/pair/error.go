package pair

import "fmt"

// Error says in one sentence why a night cannot be paired.
type Error struct {
	// File is the folder or file at fault.
	File string
	What string
	Cure string
	// Err is the cause, or nil.
	Err error
}

// Error is the sentence "FILE: what; cure".
func (e *Error) Error() string { return fmt.Sprintf("%s: %s; %s", e.File, e.What, e.Cure) }

// Unwrap gives the cause, so that errors.Is and errors.As see through.
func (e *Error) Unwrap() error { return e.Err }
