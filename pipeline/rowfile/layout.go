package rowfile

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"hash/crc32"
	"slices"
)

// ErrOther marks a file that was made of something else, or by another version.
var ErrOther = errors.New("it was made of something else")

// ErrDamaged marks a file that is not as it was written.
var ErrDamaged = errors.New("it is damaged")

// Section is a kind of record: Records a row, of Bytes each.
type Section struct {
	Name    string `json:"name"`
	Records int    `json:"records"`
	Bytes   int    `json:"bytes"`
}

// Layout says what a file holds. Identity names what it was made of.
type Layout struct {
	Identity string    `json:"identity"`
	Rows     int       `json:"rows"`
	Sections []Section `json:"sections"`
}

// headBytes hold magic and layout; magic changes with the form of the file.
const (
	headBytes = 4096
	magic     = "mirrows1"
)

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// records of a row, of all sections.
func (l Layout) records() int {
	n := 0
	for _, s := range l.Sections {
		n += s.Records
	}
	return n
}

// sumBytes are those of a row's checksums.
func (l Layout) sumBytes() int { return 4 * (l.records() + 1) }

// rowBytes are those of a row.
func (l Layout) rowBytes() int64 {
	n := int64(l.sumBytes())
	for _, s := range l.Sections {
		n += int64(s.Records) * int64(s.Bytes)
	}
	return n
}

// Size is that of the file.
func (l Layout) Size() int64 { return headBytes + int64(l.Rows)*l.rowBytes() }

// place of a section in a row: the number of its first record, and the offset of its bytes.
func (l Layout) place(section int) (record int, offset int64) {
	offset = int64(l.sumBytes())
	for _, s := range l.Sections[:section] {
		record += s.Records
		offset += int64(s.Records) * int64(s.Bytes)
	}
	return record, offset
}

func (l Layout) equal(o Layout) bool {
	return l.Identity == o.Identity && l.Rows == o.Rows && slices.Equal(l.Sections, o.Sections)
}

// head gives the bytes of the head.
func (l Layout) head() ([]byte, error) {
	text, err := json.Marshal(l)
	if err != nil {
		return nil, err
	}
	head := make([]byte, headBytes)
	if len(magic)+4+len(text) > headBytes {
		return nil, fmt.Errorf("a layout of %d bytes does not fit its head", len(text))
	}
	copy(head, magic)
	binary.LittleEndian.PutUint32(head[len(magic):], uint32(len(text)))
	copy(head[len(magic)+4:], text)
	return head, nil
}

// parseHead is the inverse of head.
func parseHead(head []byte) (l Layout, err error) {
	if len(head) < headBytes || !bytes.HasPrefix(head, []byte(magic)) {
		return l, ErrOther
	}
	n := binary.LittleEndian.Uint32(head[len(magic):])
	text := head[len(magic)+4:]
	if int64(n) > int64(len(text)) {
		return l, ErrDamaged
	}
	if err := json.Unmarshal(text[:n], &l); err != nil {
		return l, fmt.Errorf("%w: %w", ErrDamaged, err)
	}
	return l, nil
}
