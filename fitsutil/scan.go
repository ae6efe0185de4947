package fitsutil

import (
	"errors"
	"fmt"
	"strings"
)

// maxHeader bounds a header (147456 cards): a file whose END is lost must not be read whole into
// memory in search of it.
const maxHeader = 4096 * blockSize

// firstRead is how much of a header is asked for at once; most fit and cost one system call.
const firstRead = 4 * blockSize

// scan reads every header of the file.
func (f *File) scan() error {
	if f.size == 0 {
		return fileError(f.path, ErrNotFITS, "the file is empty", "copy it again from its source")
	}
	at := int64(0)
	for index := 0; ; index++ {
		if index > 0 {
			if done, err := f.atEnd(index, at); done || err != nil {
				return err
			}
		}
		u, err := f.scanHDU(index, at)
		if err != nil {
			return err
		}
		f.hdus = append(f.hdus, u)
		at = u.dataOffset + u.dataSize + padding(u.dataSize)
	}
}

// scanHDU reads the header at an offset and checks that its data are there.
func (f *File) scanHDU(index int, at int64) (*HDU, error) {
	block, err := f.readHeader(index, at)
	if err != nil {
		return nil, err
	}
	h, n, err := parseHeader(block, f.path, index, at)
	if err != nil {
		return nil, err
	}
	u, err := newHDU(index, h)
	if err != nil {
		return nil, err
	}
	u.headerOffset, u.dataOffset = at, at+int64(n)
	if left := f.size - u.dataOffset; u.dataSize > max(left, 0) {
		return nil, &Error{File: f.path, HDU: index, Offset: f.size,
			What: fmt.Sprintf("the file ends %d bytes before its data do (%d bytes from byte %d)",
				u.dataSize-left, u.dataSize, u.dataOffset),
			Cure: "copy the file again from its source, or leave it out", Err: ErrTruncated}
	}
	return u, nil
}

// atEnd tells whether the file holds no further HDU at this offset.
func (f *File) atEnd(index int, at int64) (bool, error) {
	left := f.size - at
	if left <= 0 {
		return true, nil
	}
	start := make([]byte, min(left, keySize))
	if err := f.readAt(start, at); err != nil {
		return false, err
	}
	switch {
	case string(start) == "XTENSION":
		return false, nil
	case left < blockSize:
		return true, nil
	}
	junk, err := f.firstNonZero(at)
	if err != nil || junk < 0 {
		return true, err
	}
	return false, &Error{File: f.path, HDU: index - 1, Offset: at,
		What: fmt.Sprintf("%d bytes behind the last HDU do not start with XTENSION", left),
		Cure: "the file is damaged or not whole: copy it again, or cut it there", Err: ErrStructure}
}

// firstNonZero finds the first byte that is not zero at or behind an offset, -1 if all are.
func (f *File) firstNonZero(at int64) (int64, error) {
	buffer := getBuffer()
	defer putBuffer(buffer)
	for at < f.size {
		part := (*buffer)[:min(f.size-at, chunkBytes)]
		if err := f.readAt(part, at); err != nil {
			return 0, err
		}
		for i, c := range part {
			if c != 0 {
				return at + int64(i), nil
			}
		}
		at += int64(len(part))
	}
	return -1, nil
}

// readHeader reads the whole blocks of a header: up to END, or the end of the file or the
// bound, whichever comes first. A header that has no END is for parseHeader to refuse.
func (f *File) readHeader(index int, at int64) ([]byte, error) {
	var block []byte
	for searched := 0; ; {
		n := min(f.size-at-int64(len(block)), max(firstRead, int64(len(block))), maxHeader-int64(len(block)))
		if n <= 0 {
			return block, nil
		}
		old := len(block)
		block = append(block, make([]byte, n)...)
		if err := f.readAt(block[old:], at+int64(old)); err != nil {
			return nil, err
		}
		if searched == 0 && !startsHDU(block, index) {
			return block, nil
		}
		for ; searched+cardSize <= len(block); searched += cardSize {
			if isEnd(block[searched : searched+cardSize]) {
				return block, nil
			}
		}
	}
}

// startsHDU tells whether the first card is the one that every HDU must open with.
func startsHDU(block []byte, index int) bool {
	key := "SIMPLE  = "
	if index > 0 {
		key = "XTENSION= "
	}
	return len(block) >= valueStart && string(block[:valueStart]) == key
}

func isEnd(card []byte) bool {
	return string(card[:keySize]) == "END     " && strings.Trim(string(card), " ") == "END"
}

// parseHeader reads the cards of a block of bytes up to END and gives the length of the
// header, filled up to a whole block (the fill is not looked at; it may be missing where a file
// ends). Errors unwrap to ErrNotFITS, ErrNoEnd, ErrTruncated or ErrStructure.
func parseHeader(block []byte, file string, hdu int, offset int64) (*Header, int, error) {
	if !startsHDU(block, hdu) {
		return nil, 0, notFITS(block, file, hdu, offset)
	}
	h := NewHeader()
	h.file, h.hdu, h.offset = file, hdu, offset
	var chain continuation
	for at := 0; at+cardSize <= len(block); at += cardSize {
		raw := block[at : at+cardSize : at+cardSize]
		if isEnd(raw) {
			chain.close(h)
			end := int64(at + cardSize)
			return h, int(end + padding(end)), nil
		}
		if !printable(string(raw[:keySize])) {
			return nil, 0, &Error{File: file, HDU: hdu, Offset: offset + int64(at),
				What: "bytes that no header may hold stand where a keyword should: END is lost or the header is damaged",
				Cure: "copy the file again from its source", Err: ErrNoEnd}
		}
		if chain.take(block, at) {
			continue
		}
		chain.close(h)
		e := parseCard(raw)
		h.push(e)
		chain.open(&e, at)
	}
	err := errors.Join(ErrNoEnd, ErrTruncated)
	what := "the file ends within a header that has no END card"
	if len(block) >= maxHeader {
		err, what = ErrNoEnd, fmt.Sprintf("%d bytes of header hold no END card", maxHeader)
	}
	return nil, 0, &Error{File: file, HDU: hdu, Offset: offset + int64(len(block)),
		What: what, Cure: "copy the file again from its source", Err: err}
}

func notFITS(block []byte, file string, hdu int, offset int64) error {
	e := &Error{File: file, HDU: hdu, Offset: offset, Err: ErrNotFITS,
		What: "this is no FITS file: it does not start with \"SIMPLE  = \"", Cure: "give a FITS file"}
	if strings.HasPrefix("SIMPLE  = ", string(block)) {
		e.What = fmt.Sprintf("the file ends after %d bytes of its first card", len(block))
		e.Cure, e.Err = "copy the file again from its source", ErrTruncated
	}
	if hdu > 0 {
		e.What = "the extension does not start with \"XTENSION= \""
		e.Cure, e.Err = "copy the file again from its source", ErrStructure
	}
	return e
}

// continuation gathers the CONTINUE records of a string (Standard 4.2.1.2). Its text is built
// once at the end of the chain: chains in damaged files may be very long.
type continuation struct {
	text    *strings.Builder // nil: no string waits for more
	comment string
	first   int // offset of the card that is continued
	block   []byte
	end     int // offset behind the last record taken
	waiting bool
}

// open starts a chain if a card is a string that ends in an ampersand.
func (c *continuation) open(e *entry, at int) {
	s, ok := e.card.Value.(string)
	if !ok || !strings.HasSuffix(s, "&") {
		return
	}
	c.text = &strings.Builder{}
	c.text.WriteString(strings.TrimSuffix(s, "&"))
	c.comment, c.first, c.end, c.waiting = e.card.Comment, at, at, true
}

// take adds the record at an offset, if the chain waits for one and this is one.
func (c *continuation) take(block []byte, at int) bool {
	raw := block[at : at+cardSize]
	if c.text == nil || !c.waiting || string(raw[:valueStart]) != continueKey+"  " {
		return false
	}
	value, comment, bad := parseValue(string(raw[valueStart:]))
	s, ok := value.(string)
	if !ok || bad != "" {
		return false
	}
	c.waiting = strings.HasSuffix(s, "&")
	c.text.WriteString(strings.TrimSuffix(s, "&"))
	if comment = clean(comment); comment != "" {
		c.comment = strings.TrimLeft(c.comment+" "+comment, " ")
	}
	c.block, c.end = block, at+cardSize
	return true
}

// close gives the last card of the header the whole string. An ampersand that nothing
// follows is part of the string.
func (c *continuation) close(h *Header) {
	if c.text != nil && c.end > c.first {
		e := &h.entries[len(h.entries)-1]
		if c.waiting {
			c.text.WriteByte('&')
		}
		e.card.Value = strings.TrimRight(c.text.String(), " ")
		e.card.Comment = c.comment
		e.raw = c.block[c.first:c.end:c.end]
	}
	*c = continuation{}
}
