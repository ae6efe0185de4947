package fitsutil

import (
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"
)

const (
	blockSize = 2880 // Standard 3.1
	cardSize  = 80   // Standard 4.1
	keySize   = 8    // Standard 4.1.2.1
	// valueStart is the first byte of a value: after the keyword and the indicator "= ".
	valueStart = 10
	// fixedEnd is the byte behind a fixed-format number, logical (Standard 4.2: column 30).
	fixedEnd = 30
	// stringRoom is the longest quoted text of one card: 80 bytes less indicator and two quotes.
	stringRoom = cardSize - valueStart - 2
	// hierarch opens the cards of a common convention for keywords longer than 8 bytes.
	hierarch = "HIERARCH"
	// continueKey opens the records that carry on a long string (Standard 4.2.1.2).
	continueKey = "CONTINUE"
)

// Card is one keyword with its value and comment.
//
// Value is nil (commentary, or a value left undefined), string, int64, float64, bool or
// complex128 (read only). Strings have no trailing spaces: the Standard (4.2.1) gives them no
// meaning. For commentary (COMMENT, HISTORY, blank keyword) Comment holds the text. A key longer
// than 8 bytes is written "HIERARCH LONG NAME".
type Card struct {
	Key     string
	Value   any
	Comment string
}

// commentary tells whether cards of this keyword never have a value (Standard 4.4.2.4).
func commentary(key string) bool {
	return key == "" || key == "COMMENT" || key == "HISTORY"
}

// format writes the card as one or more records of 80 bytes. Comments are cut where a record
// ends; values never are. Errors unwrap to ErrBadCard.
func (c Card) format() ([]byte, error) {
	if !printable(c.Comment) {
		return nil, errors.New("the comment holds bytes outside printable ASCII")
	}
	if commentary(c.Key) && c.Value == nil {
		return formatCommentary(c.Key, c.Comment), nil
	}
	lead, err := formatKey(c.Key)
	if err != nil {
		return nil, err
	}
	switch v := c.Value.(type) {
	case nil:
		return record(lead, c.Comment), nil
	case bool:
		text := "F"
		if v {
			text = "T"
		}
		return formatFixed(lead, text, c.Comment)
	case int64:
		return formatFixed(lead, strconv.FormatInt(v, 10), c.Comment)
	case float64:
		text, err := formatFloat(v)
		if err != nil {
			return nil, err
		}
		return formatFixed(lead, text, c.Comment)
	case string:
		return formatString(lead, v, c.Comment)
	}
	return nil, fmt.Errorf("a value of type %T cannot be written", c.Value)
}

// formatKey gives the record up to the value: "KEY     = ".
func formatKey(key string) (string, error) {
	if name, long := strings.CutPrefix(key, hierarch+" "); long {
		name = strings.Join(strings.Fields(name), " ")
		if name == "" || !printable(name) || strings.ContainsAny(name, "=/'") {
			return "", fmt.Errorf("%q is no HIERARCH keyword", key)
		}
		return hierarch + " " + name + " = ", nil
	}
	if len(key) > keySize {
		return "", fmt.Errorf("keyword %q is longer than %d bytes", key, keySize)
	}
	for i := 0; i < len(key); i++ {
		if c := key[i]; (c < 'A' || c > 'Z') && (c < '0' || c > '9') && c != '-' && c != '_' {
			return "", fmt.Errorf("keyword %q may hold only A-Z, 0-9, hyphen and underscore", key)
		}
	}
	switch key {
	case "", "END", "COMMENT", "HISTORY", continueKey, hierarch:
		return "", fmt.Errorf("keyword %q takes no value", key)
	}
	return fmt.Sprintf("%-8s= ", key), nil
}

// formatFixed puts a number or logical at the right of column 30, farther if it needs room.
func formatFixed(lead, text, comment string) ([]byte, error) {
	if pad := fixedEnd - len(lead) - len(text); pad > 0 {
		text = strings.Repeat(" ", pad) + text
	}
	if len(lead)+len(text) > cardSize {
		return nil, fmt.Errorf("keyword and value need more than %d bytes", cardSize)
	}
	return record(lead+text, comment), nil
}

// formatFloat gives the shortest text that reads back as exactly v, with a decimal point and
// an uppercase E (Standard 4.2.4).
func formatFloat(v float64) (string, error) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "", fmt.Errorf("%v has no form in a FITS card", v)
	}
	text := strconv.FormatFloat(v, 'G', -1, 64)
	if strings.Contains(text, ".") {
		return text, nil
	}
	if mantissa, exponent, found := strings.Cut(text, "E"); found {
		return mantissa + ".0E" + exponent, nil
	}
	return text + ".0", nil
}

// formatString quotes a string, with quotes doubled, and continues it where it is too long.
func formatString(lead, value, comment string) ([]byte, error) {
	if !printable(value) {
		return nil, errors.New("the string holds bytes outside printable ASCII")
	}
	value = strings.TrimRight(value, " ")
	room := cardSize - len(lead) - 2
	if room < keySize {
		return nil, errors.New("the keyword leaves no room for a string")
	}
	quoted := strings.ReplaceAll(value, "'", "''")
	if len(quoted) <= room {
		return record(lead+"'"+fmt.Sprintf("%-8s", quoted)+"'", comment), nil
	}
	var out []byte
	for len(quoted) > room {
		n := splitQuoted(quoted, room-1) // one byte for the ampersand
		out = append(out, record(lead+"'"+quoted[:n]+"&'", "")...)
		quoted = quoted[n:]
		lead, room = continueKey+"  ", stringRoom
	}
	if comment != "" && len(quoted)+len(" / ")+len(comment) > room {
		// A comment gets a record of its own, so that no more of it is cut than must be.
		if len(quoted) == room {
			n := splitQuoted(quoted, room-1)
			out = append(out, record(lead+"'"+quoted[:n]+"&'", "")...)
			quoted = quoted[n:]
		}
		out = append(out, record(lead+"'"+quoted+"&'", "")...)
		quoted = ""
	}
	return append(out, record(lead+"'"+quoted+"'", comment)...), nil
}

// splitQuoted finds where a text with doubled quotes can be cut at or before n bytes: never
// between the two of a pair.
func splitQuoted(quoted string, n int) int {
	run := 0
	for run < n && quoted[n-1-run] == '\'' {
		run++
	}
	return n - run%2
}

// formatCommentary spreads a text over as many records as it needs.
func formatCommentary(key, text string) []byte {
	const room = cardSize - keySize
	var out []byte
	for {
		n := min(len(text), room)
		out = append(out, fmt.Sprintf("%-8s%-72s", key, text[:n])...)
		if text = text[n:]; text == "" {
			return out
		}
	}
}

// record pads or cuts a record to 80 bytes, with the comment behind " / ".
func record(text, comment string) []byte {
	if comment != "" {
		text += " / " + comment
	}
	return fmt.Appendf(nil, "%-80.80s", text)
}

// printable tells whether all bytes are the ASCII characters that headers may hold.
func printable(text string) bool {
	for i := 0; i < len(text); i++ {
		if text[i] < ' ' || text[i] > '~' {
			return false
		}
	}
	return true
}
