package fitsutil

import (
	"errors"
	"fmt"
	"strings"
)

// Sentinels: what kind of fault an *Error reports, for errors.Is.
var (
	// ErrNotFITS: the file is empty, a directory, or does not start as a FITS file.
	ErrNotFITS = errors.New("not a FITS file")
	// ErrTruncated: the file ends before its header or data do.
	ErrTruncated = errors.New("truncated")
	// ErrNoEnd: a header has no END card.
	ErrNoEnd = errors.New("no END card")
	// ErrStructure: a mandatory card is missing, of the wrong type or out of its limits,
	// or bytes that belong to no HDU follow the last one.
	ErrStructure = errors.New("broken structure")
	// ErrTooLarge: the axes multiply to more bytes than a file can have.
	ErrTooLarge = errors.New("too large")
	// ErrMissingCard: the header has no card of that name.
	ErrMissingCard = errors.New("no such card")
	// ErrType: a card, HDU or column is of another type than asked for.
	ErrType = errors.New("wrong type")
	// ErrBadCard: a card cannot be understood, or cannot be written.
	ErrBadCard = errors.New("bad card")
	// ErrMissingHDU: the file has no HDU of that index or name, or none with pixels.
	ErrMissingHDU = errors.New("no such HDU")
	// ErrCompressed: the image is tile-compressed (Standard 10.1).
	ErrCompressed = errors.New("tile-compressed image")
	// ErrRange: rows, columns, planes or a buffer do not fit the image.
	ErrRange = errors.New("out of range")
	// ErrGzip: a gzip stream is damaged.
	ErrGzip = errors.New("damaged gzip stream")
	// ErrNoRoom: the disk has no room for what must be written.
	ErrNoRoom = errors.New("no room on the disk")
	// ErrChanged: the file on disk is no longer the one that was opened.
	ErrChanged = errors.New("file changed")
	// ErrClosed: the File was closed.
	ErrClosed = errors.New("file is closed")
)

// none marks the fields HDU and Offset of an *Error that has no such place.
const none = -1

// Error says what is wrong with a file, where, and what to do about it.
type Error struct {
	File   string // path; empty for a header that comes from no file
	HDU    int    // 0 = primary; -1 when the fault belongs to no HDU
	Card   string // keyword, or empty
	Offset int64  // byte offset in the (unpacked) file; -1 when there is none
	What   string // what was found, in plain words
	Cure   string // what to do; may be empty
	Err    error  // sentinel or cause
}

// Error gives one line: "FILE, HDU 1, card NAXIS1, byte 5840: what; cure".
func (e *Error) Error() string {
	var place []string
	if e.File != "" {
		place = append(place, e.File)
	}
	if e.HDU >= 0 {
		place = append(place, fmt.Sprintf("HDU %d", e.HDU))
	}
	if e.Card != "" {
		place = append(place, "card "+e.Card)
	}
	if e.Offset >= 0 {
		place = append(place, fmt.Sprintf("byte %d", e.Offset))
	}
	text := e.What
	if len(place) > 0 {
		text = strings.Join(place, ", ") + ": " + text
	}
	if e.Cure != "" {
		text += "; " + e.Cure
	}
	return text
}

// Unwrap gives the sentinel or the cause, so that errors.Is and errors.As see through.
func (e *Error) Unwrap() error { return e.Err }

// fileError is a fault of a whole file: no HDU, card or offset.
func fileError(path string, sentinel error, what, cure string) *Error {
	return &Error{File: path, HDU: none, Offset: none, What: what, Cure: cure, Err: sentinel}
}

// systemError wraps an error of the operating system, whose text names the reason. With two
// causes (errors.Is sees both) the sentinel comes first.
func systemError(path string, sentinel, cause error, what, cure string) *Error {
	err := cause
	if sentinel != nil {
		err = errors.Join(sentinel, cause)
	}
	return &Error{File: path, HDU: none, Offset: none, What: what, Cure: cure, Err: err}
}
