package fitsutil

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"strings"
)

// Header is the cards of an HDU, in order. The zero value is not usable: see NewHeader.
// Keywords are looked up without regard to case; of several equal ones the first counts. A
// HIERARCH keyword is found with or without the word HIERARCH.
type Header struct {
	entries []entry
	index   map[string]int // folded keyword -> first entry that has a value
	err     error          // first card that NewHeader could not take
	file    string         // where the header was read, for errors
	hdu     int
	offset  int64 // of its first byte; -1 for a header that was not read
}

// NewHeader makes a header of cards, in their order, doubled ones included. A card that cannot
// be written is an error of Err and of everything that writes the header.
func NewHeader(cards ...Card) *Header {
	h := &Header{index: map[string]int{}, hdu: none, offset: none}
	for _, c := range cards {
		if err := h.append(c); err != nil && h.err == nil {
			h.err = err
		}
	}
	return h
}

// Err gives the error of the first card that NewHeader could not take (ErrBadCard), or nil.
func (h *Header) Err() error { return h.err }

// Set replaces the first card of this keyword, or appends one. Value is nil (undefined), a
// string (printable ASCII, any length, trailing spaces dropped), a bool, any integer within
// int64, float32 or float64 (finite; the text reads back as exactly this value). Comments are
// cut where the card ends. Errors unwrap to ErrBadCard and leave the header as it was.
func (h *Header) Set(key string, value any, comment string) error {
	if commentary(key) {
		return h.badCard(key, "it takes no value", "use AddComment or AddHistory")
	}
	e, err := h.newEntry(Card{Key: key, Value: value, Comment: comment})
	if err != nil {
		return err
	}
	if i, found := h.index[foldKey(key)]; found {
		h.entries[i] = e
		return nil
	}
	h.push(e)
	return nil
}

// AddComment appends COMMENT cards with a text of any length. Errors unwrap to ErrBadCard.
func (h *Header) AddComment(text string) error {
	return h.append(Card{Key: "COMMENT", Comment: text})
}

// AddHistory appends HISTORY cards with a text of any length. Errors unwrap to ErrBadCard.
func (h *Header) AddHistory(text string) error {
	return h.append(Card{Key: "HISTORY", Comment: text})
}

// Delete removes every card of this keyword.
func (h *Header) Delete(key string) {
	folded := foldKey(key)
	h.entries = slices.DeleteFunc(h.entries, func(e entry) bool { return foldKey(e.card.Key) == folded })
	clear(h.index)
	for i := range h.entries {
		h.note(i)
	}
}

// Clone gives a header of its own with the same cards.
func (h *Header) Clone() *Header {
	c := *h
	c.entries = slices.Clone(h.entries)
	c.index = make(map[string]int, len(h.index))
	for k, i := range h.index {
		c.index[k] = i
	}
	return &c
}

// Cards gives a copy of the cards in order, commentary included, END left out. A card that
// cannot be understood has a nil Value.
func (h *Header) Cards() []Card {
	cards := make([]Card, len(h.entries))
	for i := range h.entries {
		cards[i] = h.entries[i].card
	}
	return cards
}

// Has tells whether there is a card of this keyword with a value or with one left undefined.
func (h *Header) Has(key string) bool {
	_, found := h.index[foldKey(key)]
	return found
}

// Str gives a string. Errors: ErrMissingCard, ErrBadCard, ErrType (of another type, or
// undefined).
func (h *Header) Str(key string) (string, error) {
	v, err := h.value(key)
	if err != nil {
		return "", err
	}
	s, ok := v.(string)
	if !ok {
		return "", h.typeError(key, v, "string")
	}
	return s, nil
}

// Bool gives a logical. Errors as for Str.
func (h *Header) Bool(key string) (bool, error) {
	v, err := h.value(key)
	if err != nil {
		return false, err
	}
	b, ok := v.(bool)
	if !ok {
		return false, h.typeError(key, v, "logical")
	}
	return b, nil
}

// Int gives an integer; a float without fraction below 2^53 is taken, since some writers know
// only floats. Errors as for Str.
func (h *Header) Int(key string) (int64, error) {
	v, err := h.value(key)
	if err != nil {
		return 0, err
	}
	switch n := v.(type) {
	case int64:
		return n, nil
	case float64:
		if n == math.Trunc(n) && math.Abs(n) < 1<<53 {
			return int64(n), nil
		}
	}
	return 0, h.typeError(key, v, "integer")
}

// Float gives a number, integer or float. Errors as for Str.
func (h *Header) Float(key string) (float64, error) {
	v, err := h.value(key)
	if err != nil {
		return 0, err
	}
	switch x := v.(type) {
	case int64:
		return float64(x), nil
	case float64:
		return x, nil
	}
	return 0, h.typeError(key, v, "number")
}

// value looks a card up.
func (h *Header) value(key string) (any, error) {
	i, found := h.index[foldKey(key)]
	if !found {
		return nil, &Error{File: h.file, HDU: h.hdu, Card: key, Offset: none,
			What: "the header has no such card", Err: ErrMissingCard}
	}
	if bad := h.entries[i].bad; bad != "" {
		return nil, &Error{File: h.file, HDU: h.hdu, Card: key, Offset: h.place(i),
			What: "the card cannot be understood: " + bad, Cure: "correct the card", Err: ErrBadCard}
	}
	return h.entries[i].card.Value, nil
}

func (h *Header) typeError(key string, value any, want string) error {
	what := fmt.Sprintf("the value is %s, not a %s", describe(value), want)
	if want == "integer" {
		what = fmt.Sprintf("the value is %s, not an integer", describe(value))
	}
	return &Error{File: h.file, HDU: h.hdu, Card: key, Offset: h.place(h.index[foldKey(key)]),
		What: what, Cure: "correct the card", Err: ErrType}
}

func (h *Header) badCard(key, what, cure string) error {
	return &Error{File: h.file, HDU: h.hdu, Card: key, Offset: none,
		What: "the card cannot be written: " + what, Cure: cure, Err: ErrBadCard}
}

// place is the offset in the file of a card that was read there.
func (h *Header) place(i int) int64 {
	if h.offset < 0 {
		return none
	}
	at := h.offset
	for _, e := range h.entries[:i] {
		at += int64(len(e.raw))
	}
	return at
}

// append adds a card behind the others.
func (h *Header) append(c Card) error {
	e, err := h.newEntry(c)
	if err != nil {
		return err
	}
	h.push(e)
	return nil
}

func (h *Header) push(e entry) {
	h.entries = append(h.entries, e)
	h.note(len(h.entries) - 1)
}

// note enters a card into the index unless an earlier one has its keyword.
func (h *Header) note(i int) {
	e := &h.entries[i]
	folded := foldKey(e.card.Key)
	if _, found := h.index[folded]; !found && e.hasValue() {
		h.index[folded] = i
	}
}

func (h *Header) newEntry(c Card) (entry, error) {
	value, ok := normal(c.Value)
	if !ok {
		return entry{}, h.badCard(c.Key, fmt.Sprintf("%v of type %T has no form in a card", c.Value, c.Value),
			"give a string, bool, integer or float")
	}
	c.Value = value
	raw, err := c.format()
	if err != nil {
		return entry{}, h.badCard(c.Key, err.Error(), "")
	}
	return entry{card: c, raw: raw}, nil
}

// encode gives the header's bytes: cards, END, spaces up to a whole block.
func (h *Header) encode() ([]byte, error) {
	if h.err != nil {
		return nil, h.err
	}
	var out bytes.Buffer
	for i := range h.entries {
		out.Write(h.entries[i].raw)
	}
	out.WriteString("END")
	out.Write(bytes.Repeat([]byte{' '}, int(padding(int64(out.Len())))))
	return out.Bytes(), nil
}

// padding is the number of bytes from n up to a whole block.
func padding(n int64) int64 { return (blockSize - n%blockSize) % blockSize }

// foldKey is the form under which a keyword is indexed.
func foldKey(key string) string {
	return strings.ToUpper(strings.TrimPrefix(key, hierarch+" "))
}

// normal brings a value to the types of Card.
func normal(value any) (any, bool) {
	switch v := value.(type) {
	case nil, string, bool, int64, float64:
		if s, ok := v.(string); ok {
			return strings.TrimRight(s, " "), true
		}
		return v, true
	case int:
		return int64(v), true
	case int8:
		return int64(v), true
	case int16:
		return int64(v), true
	case int32:
		return int64(v), true
	case uint8:
		return int64(v), true
	case uint16:
		return int64(v), true
	case uint32:
		return int64(v), true
	case uint:
		return int64(v), uint64(v) <= math.MaxInt64
	case uint64:
		return int64(v), v <= math.MaxInt64
	case float32:
		return float64(v), true
	}
	return nil, false
}

// describe names a value for an error.
func describe(value any) string {
	switch v := value.(type) {
	case nil:
		return "undefined"
	case string:
		return fmt.Sprintf("the string %q", v)
	case bool:
		return fmt.Sprintf("the logical %t", v)
	}
	return fmt.Sprint(value)
}
