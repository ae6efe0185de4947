package fitsutil

import (
	"strconv"
	"strings"
)

// entry is a card of a header together with its bytes.
type entry struct {
	card Card
	raw  []byte // whole records: 80 bytes each
	bad  string // why the value cannot be understood; empty if it can, or there is none
}

// hasValue tells whether the card is looked up by its keyword.
func (e *entry) hasValue() bool { return !commentary(e.card.Key) && e.card.Key != continueKey }

// parseCard reads one record. It never fails: what it cannot understand is told in entry.bad,
// to be reported when the card is asked for.
func parseCard(raw []byte) entry {
	key := strings.TrimRight(string(raw[:keySize]), " ")
	e := entry{card: Card{Key: key}, raw: raw}
	switch {
	case commentary(key):
		e.card.Comment = clean(string(raw[keySize:]))
	case key == hierarch:
		parseHierarch(&e)
	case string(raw[keySize:valueStart]) == "= ":
		e.parseValue(string(raw[valueStart:]))
	case key == continueKey:
		// Without a string to continue it counts as commentary (Standard 4.2.1.2).
		e.card.Comment = clean(string(raw[keySize:]))
	default:
		e.bad = "it has no value indicator (\"= \" in columns 9 and 10)"
		e.card.Comment = clean(string(raw[keySize:]))
	}
	return e
}

// parseHierarch reads "HIERARCH LONG NAME = value / comment".
func parseHierarch(e *entry) {
	text := string(e.raw[keySize:])
	name, value, found := strings.Cut(text, "=")
	words := strings.Fields(name)
	if !found || len(words) == 0 || strings.ContainsAny(name, "'/") {
		e.bad = "it has no value"
		e.card.Comment = clean(text)
		return
	}
	e.card.Key = hierarch + " " + strings.Join(words, " ")
	e.parseValue(value)
}

// parseValue reads value and comment of the text behind the value indicator.
func (e *entry) parseValue(text string) {
	value, comment, bad := parseValue(text)
	e.card.Value, e.card.Comment, e.bad = value, clean(comment), bad
}

// parseValue understands strings, logicals, integers, floats and complex numbers (Standard
// 4.2), fixed or free format, and the value left undefined. An integer beyond int64, as in the
// BZERO of unsigned 64-bit pixels, becomes a float64.
func parseValue(text string) (value any, comment, bad string) {
	text = strings.TrimLeft(text, " ")
	if strings.HasPrefix(text, "'") {
		return parseQuoted(text)
	}
	token, comment, _ := strings.Cut(text, "/")
	token = strings.TrimRight(token, " ")
	comment = strings.TrimPrefix(comment, " ")
	switch {
	case token == "":
		return nil, comment, ""
	case token == "T":
		return true, comment, ""
	case token == "F":
		return false, comment, ""
	}
	if n, ok := parseInteger(token); ok {
		return n, comment, ""
	}
	if x, ok := parseFloat(token); ok {
		return x, comment, ""
	}
	if z, ok := parseComplex(token); ok {
		return z, comment, ""
	}
	return nil, comment, "its value " + strconv.Quote(token) + " is no string, logical or number"
}

// parseQuoted reads a string in quotes, doubled quotes standing for one.
func parseQuoted(text string) (value any, comment, bad string) {
	var out strings.Builder
	for i := 1; i < len(text); i++ {
		if text[i] != '\'' {
			out.WriteByte(text[i])
			continue
		}
		if i+1 < len(text) && text[i+1] == '\'' {
			out.WriteByte('\'')
			i++
			continue
		}
		rest := strings.TrimLeft(text[i+1:], " ")
		if rest != "" && rest[0] != '/' {
			return nil, "", "text follows the closing quote of its string"
		}
		comment = strings.TrimPrefix(strings.TrimPrefix(rest, "/"), " ")
		if !printable(out.String()) {
			return nil, comment, "its string holds bytes outside printable ASCII"
		}
		return strings.TrimRight(out.String(), " "), comment, ""
	}
	return nil, "", "its string has no closing quote"
}

// parseInteger reads [+-]digits within int64.
func parseInteger(token string) (int64, bool) {
	if !onlyBytes(token, "+-0123456789") {
		return 0, false
	}
	n, err := strconv.ParseInt(token, 10, 64)
	return n, err == nil
}

// parseFloat reads a decimal number with an optional exponent E or D (Standard 4.2.4); a
// lowercase letter is tolerated. Numbers beyond float64 are refused.
func parseFloat(token string) (float64, bool) {
	// The set keeps out what Go would take and FITS does not: hexadecimal, Inf, NaN, 1_000.
	if !onlyBytes(token, "+-.0123456789EeDd") {
		return 0, false
	}
	token = strings.Map(func(r rune) rune {
		if r == 'D' || r == 'd' {
			return 'E'
		}
		return r
	}, token)
	x, err := strconv.ParseFloat(token, 64)
	return x, err == nil
}

// parseComplex reads "(real, imaginary)" (Standard 4.2.5 and 4.2.6).
func parseComplex(token string) (complex128, bool) {
	inner, opened := strings.CutPrefix(token, "(")
	inner, closed := strings.CutSuffix(inner, ")")
	first, second, comma := strings.Cut(inner, ",")
	if !opened || !closed || !comma {
		return 0, false
	}
	re, ok1 := parseFloat(strings.Trim(first, " "))
	im, ok2 := parseFloat(strings.Trim(second, " "))
	return complex(re, im), ok1 && ok2
}

func onlyBytes(token, set string) bool {
	return strings.Trim(token, set) == ""
}

// clean makes a comment of foreign bytes printable and drops its trailing spaces.
func clean(text string) string {
	text = strings.TrimRight(text, " ")
	if printable(text) {
		return text
	}
	out := []byte(text)
	for i, c := range out {
		if c < ' ' || c > '~' {
			out[i] = '?'
		}
	}
	return string(out)
}
