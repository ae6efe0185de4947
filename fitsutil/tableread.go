package fitsutil

import (
	"errors"
	"fmt"
	"strings"
)

// Table reads the binary table whose EXTNAME is name (case does not count)
// into memory. Errors are an *Error: ErrMissingHDU; ErrType when the HDU is no
// binary table; ErrStructure when its cards contradict each other. A column
// that cannot be given does not keep the others from being read: its error
// comes from Table.Column.
func (f *File) Table(name string) (*Table, error) {
	names := []string{}
	for _, u := range f.hdus {
		if strings.EqualFold(u.Name, name) {
			return f.TableAt(u.Index)
		}
		if u.Kind == BinTableHDU {
			names = append(names, u.Name)
		}
	}
	cure := "it has no tables"
	if len(names) > 0 {
		cure = "it has the tables " + strings.Join(names, ", ")
	}
	return nil, fileError(f.path, ErrMissingHDU, fmt.Sprintf("there is no table %s", name), cure)
}

// TableAt is Table for the HDU of an index.
func (f *File) TableAt(index int) (*Table, error) {
	if index < 0 || index >= len(f.hdus) {
		return nil, fileError(f.path, ErrMissingHDU, fmt.Sprintf("there is no HDU %d", index), "")
	}
	u := f.hdus[index]
	if u.Kind != BinTableHDU {
		return nil, place{f.path, index}.error(ErrType, "XTENSION", fmt.Sprintf("HDU %s is no binary table but %s", u.Name, u.Kind), "")
	}
	return readTable(u, place{f.path, index}, f.readAt)
}

// readTable reads the table of an HDU whose data are all present, as scan has
// made sure. Of the stored values v it gives (section 7.3.2):
//
//   - B, I, J, K with TSCAL 1 and the TZERO of the convention for unsigned (for
//     B signed) integers, Table 19: the next wider signed integers (I with
//     32768 gives []int32), K the same, where a value beyond int64 is refused;
//   - B, I, J, K, E, D with any other TSCAL and TZERO: TZERO + TSCAL v as
//     float64, NaN for TNULL;
//   - everything else as it is stored.
func readTable(u *HDU, at place, read func(p []byte, offset int64) error) (*Table, error) {
	t := &Table{Name: u.Name, Header: extraCards(u.Header), place: at, rows: u.Axes[1]}
	fields, err := readLayout(u, at)
	if err != nil {
		return nil, err
	}
	rowBytes := u.Axes[0]
	for i := range fields {
		if fields[i].err == nil {
			fields[i].cells = newCells(fields[i].format, t.rows)
		}
	}
	if err := readRows(fields, t.rows, rowBytes, u.dataOffset, read); err != nil {
		return nil, err
	}
	for i := range fields {
		t.Columns = append(t.Columns, fields[i].finish(u.Header, at))
	}
	return t, nil
}

// readRows hands every row's fields to their cells, a buffer at a time.
func readRows(fields []readField, rows, rowBytes int, offset int64, read func(p []byte, offset int64) error) error {
	if rowBytes == 0 || rows == 0 {
		return nil
	}
	chunk := min(max(1, chunkBytes/rowBytes), rows)
	buffer := make([]byte, chunk*rowBytes)
	for row := 0; row < rows; row += chunk {
		part := buffer[:min(chunk, rows-row)*rowBytes]
		if err := read(part, offset+int64(row)*int64(rowBytes)); err != nil {
			return err
		}
		for i := range fields {
			fields[i].take(part, rowBytes, row)
		}
	}
	return nil
}

// readField is a column being read.
type readField struct {
	number int // of the column, from 1
	name   string
	format columnFormat
	offset int // in the row
	cells  cells
	err    error // why the column cannot be given
}

// take reads the field of every row of a part of the table.
func (f *readField) take(part []byte, rowBytes, firstRow int) {
	if f.err != nil || f.format.bytes() == 0 {
		return
	}
	for row := 0; len(part) > 0; row++ {
		if err := f.cells.take(part[f.offset : f.offset+f.format.bytes()]); err != nil {
			f.err = fmt.Errorf("row %d: %w", firstRow+row+1, err)
			return
		}
		part = part[rowBytes:]
	}
}

// readLayout finds the columns' places in a row. A format that cannot be
// understood hides its own column and those behind it, whose place nobody
// knows; if all are understood, their widths must add up to NAXIS1.
func readLayout(u *HDU, at place) ([]readField, error) {
	count, err := u.Header.mandatory("TFIELDS", 0, maxFields)
	if err != nil {
		return nil, err
	}
	fields := make([]readField, count)
	offset, lost := 0, error(nil)
	for i := range fields {
		f := &fields[i]
		f.number, f.offset = i+1, offset
		f.name = optionalText(u.Header, fmt.Sprintf("TTYPE%d", f.number))
		if lost != nil {
			f.err = fmt.Errorf("its place is not known, since %w", lost)
			continue
		}
		var text string
		if text, err = u.Header.Str(fmt.Sprintf("TFORM%d", f.number)); err == nil {
			f.format, err = parseFormat(text)
		}
		if err != nil {
			lost = fmt.Errorf("TFORM%d cannot be understood: %w", f.number, err)
			f.err = lost
			continue
		}
		if offset += f.format.bytes(); offset > u.Axes[0] {
			return nil, at.error(ErrStructure, "NAXIS1", fmt.Sprintf("the columns need more than the %d bytes of a row", u.Axes[0]), "the table is damaged or written wrongly")
		}
		if strings.ContainsRune("CMPQX", rune(f.format.code)) {
			f.err = unreadable(text, f.format.code)
		}
	}
	if lost == nil && offset != u.Axes[0] {
		return nil, at.error(ErrStructure, "NAXIS1", fmt.Sprintf("the columns fill %d of the %d bytes of a row", offset, u.Axes[0]), "the table is damaged or written wrongly")
	}
	return fields, nil
}

// unreadable is the error of a column of a type that is not read.
func unreadable(format string, code byte) error {
	kind := "complex numbers"
	switch code {
	case 'P', 'Q':
		kind = "arrays of variable length"
	case 'X':
		kind = "bits"
	}
	return fmt.Errorf("%w: format %s holds %s, which are not read", ErrType, format, kind)
}

// finish applies the column's scaling and makes it whole, or records why it
// cannot be given.
func (f *readField) finish(h *Header, at place) Column {
	column := Column{Name: f.name, Unit: optionalText(h, fmt.Sprintf("TUNIT%d", f.number))}
	if text, err := h.Str(fmt.Sprintf("TFORM%d", f.number)); err == nil {
		column.Format = strings.TrimSpace(text)
	}
	if f.err == nil {
		column.Data = f.cells.data()
		f.err = column.scale(h, f.number, f.format)
	}
	if f.err != nil {
		card := fmt.Sprintf("TFORM%d", f.number)
		sentinel := ErrBadCard
		for _, known := range []error{ErrType, ErrStructure, ErrRange} {
			if errors.Is(f.err, known) {
				sentinel = known
			}
		}
		what := fmt.Sprintf("column %s cannot be read: %v", f.name, f.err)
		column.Data, column.Null, column.err = nil, nil, at.error(sentinel, card, what, "do without it, or write it in another form")
	}
	return column
}

// extraCards is the header of a table without structure and columns.
func extraCards(h *Header) *Header {
	extra := NewHeader()
	extra.file, extra.hdu = h.file, h.hdu
	for _, e := range h.entries {
		if keepsInTable(foldKey(e.card.Key)) {
			extra.push(e)
		}
	}
	return extra
}

// optionalText is a string card, empty when it is missing or no string: it
// only names things.
func optionalText(h *Header, key string) string {
	text, err := h.Str(key)
	if err != nil {
		return ""
	}
	return text
}
