// Package kept writes and reads the files by which an interrupted run goes on: a state,
// written once and whole, and a journal of what was done since. It knows no meaning.
//
// # Values
//
// Encode writes a Go value as it is, field by field, little-endian, so that Decode gives
// an equal one: not-a-numbers, nil apart from empty, pointers to zero apart from nil
// pointers. (JSON knows no not-a-number, and gob no pointer to zero.) A checksum of the type's
// description stands before the value: what another version wrote is refused, not misread.
//
// # Files
//
// A state is a magic word, values, and the SHA-256 of all before it; it appears by
// rename. A journal is a run of records, each its length, its CRC-32C and its bytes; a
// record that is torn or changed ends the journal, and is cut off with all after it.
//
// # Invariants
//
//   - Whatever the bytes, reading ends with a value or an error: no panic, and no memory
//     beyond a multiple of the bytes that are there.
package kept
