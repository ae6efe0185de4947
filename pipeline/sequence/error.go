package sequence

import "fmt"

// Error says what is wrong with a sequence in one sentence.
type Error struct {
	// File is the path of the file at fault; empty for a sequence in memory.
	File string
	What string
	Cure string
	// Err is the cause, or nil.
	Err error
}

// Error is the sentence "FILE: what; cure".
func (e *Error) Error() string {
	text := e.What + "; " + e.Cure
	if e.File != "" {
		text = e.File + ": " + text
	}
	return text
}

// Unwrap gives the cause, so that errors.Is and errors.As see through.
func (e *Error) Unwrap() error { return e.Err }

// planAgain is the cure of every inconsistency: a sequence is a product, not a
// file to edit.
const planAgain = "write the sequence again with mirrorloom plan"

func fault(format string, args ...any) *Error {
	return &Error{What: fmt.Sprintf(format, args...), Cure: planAgain}
}
