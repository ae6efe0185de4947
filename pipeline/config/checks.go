package config

import (
	"math"
	"slices"
	"strings"
)

// Checks gathers the semantic checks of a document; the first that fails is
// kept and the rest are passed over, so that a list of checks reads as a list.
// Conditions are written so that NaN fails them.
type Checks struct {
	doc *Doc
	err error
}

// Checks starts a list of checks. A nil Doc, for a struct that comes from no
// file, gives errors without file and line.
func (d *Doc) Checks() *Checks { return &Checks{doc: d} }

// Err is the first failure, an *Error, or nil.
func (c *Checks) Err() error { return c.err }

// That demands ok of a key path; the text says what is wrong and, after a
// semicolon, the cure. It reports whether all checks hold so far.
func (c *Checks) That(ok bool, path, format string, args ...any) bool {
	if c.err == nil && !ok {
		c.err = c.doc.Errorf(path, format, args...)
	}
	return c.err == nil
}

// Finite demands a number that is neither NaN nor infinite. Documents hold no
// others; structs built in Go may.
func (c *Checks) Finite(path string, value float64) {
	c.That(!math.IsNaN(value) && !math.IsInf(value, 0), path, "%v is no finite number; give one", value)
}

// Positive demands a finite number above 0.
func (c *Checks) Positive(path string, value float64) {
	c.That(value > 0 && !math.IsInf(value, 0), path, "%v is not above 0; give a positive number", value)
}

// NotNegative demands a finite number not below 0.
func (c *Checks) NotNegative(path string, value float64) {
	c.That(value >= 0 && !math.IsInf(value, 0), path, "%v is below 0; give a number not below 0", value)
}

// Within demands least <= value <= most.
func (c *Checks) Within(path string, value, least, most float64) {
	c.That(value >= least && value <= most, path, "%v is outside %v to %v; give a number in this range", value, least, most)
}

// Count demands least <= value <= most of a whole number.
func (c *Checks) Count(path string, value, least, most int) {
	c.That(value >= least && value <= most, path, "%d is outside %d to %d; give a whole number in this range", value, least, most)
}

// OneOf demands one of a few words.
func (c *Checks) OneOf(path, value string, allowed ...string) {
	c.That(slices.Contains(allowed, value), path, "%q is unknown; write %s", short(value), orList(allowed))
}

// Ascending demands at least `least` items, strictly ascending; key is the path
// of item i.
func (c *Checks) Ascending(path, key string, values []float64, least int) {
	c.That(len(values) >= least, path, "the table has %d rows; give at least %d", len(values), least)
	for i := 1; i < len(values); i++ {
		c.That(values[i] > values[i-1], join(index(path, i), key), "%v does not lie above %v before it; list the rows in ascending order", values[i], values[i-1])
	}
}

func orList(words []string) string {
	if len(words) < 2 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:len(words)-1], ", ") + " or " + words[len(words)-1]
}
