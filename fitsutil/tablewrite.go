package fitsutil

import (
	"fmt"
	"strings"
)

// tableLayout is a table that was checked and can be written.
type tableLayout struct {
	rows     int
	rowBytes int
	fields   []tableField
}

// tableField is a column's place in a row.
type tableField struct {
	column *Column
	format columnFormat
	offset int
}

// maxFields is the largest TFIELDS (section 7.3.1).
const maxFields = 999

// addTable places a table and returns what writes its rows.
func addTable(out *layout, t *Table) (write func() error, err error) {
	if len(out.hdus) == 0 {
		if err := addEmptyPrimary(out, nil); err != nil {
			return nil, err
		}
	}
	plan, err := t.layOut()
	if err != nil {
		return nil, err
	}
	header, err := t.makeHeader(plan)
	if err != nil {
		return nil, err
	}
	hdu, err := out.add(header, int64(plan.rows)*int64(plan.rowBytes))
	if err != nil {
		return nil, err
	}
	return func() error { return plan.write(out, hdu) }, nil
}

// layOut checks the columns and finds their places.
func (t *Table) layOut() (*tableLayout, error) {
	if strings.TrimSpace(t.Name) == "" {
		return nil, writeFault(ErrStructure, "", "a table has no name", "set Name")
	}
	if len(t.Columns) > maxFields {
		return nil, writeFault(ErrStructure, t.Name, fmt.Sprintf("it has %d columns", len(t.Columns)), fmt.Sprintf("FITS allows %d", maxFields))
	}
	plan := &tableLayout{rows: t.Rows()}
	seen := map[string]bool{}
	for i := range t.Columns {
		column := &t.Columns[i]
		folded := strings.ToUpper(column.Name)
		if folded == "" || seen[folded] {
			return nil, writeFault(ErrStructure, t.Name, fmt.Sprintf("the name %q of column %d is empty or taken", column.Name, i+1), "give every column its own name")
		}
		seen[folded] = true
		format, err := column.check(plan.rows)
		if err != nil {
			return nil, writeFault(ErrType, t.Name, fmt.Sprintf("column %s: %v", column.Name, err), "")
		}
		plan.fields = append(plan.fields, tableField{column, format, plan.rowBytes})
		if plan.rowBytes += format.bytes(); plan.rowBytes > maxRowBytes {
			return nil, writeFault(ErrTooLarge, t.Name, "its rows are too long", "")
		}
	}
	return plan, nil
}

// check compares a column's data with its format and the number of rows.
func (c *Column) check(rows int) (columnFormat, error) {
	if c.err != nil {
		return columnFormat{}, fmt.Errorf("it was read without its data: %w", c.err)
	}
	format, err := parseFormat(c.Format)
	if err != nil {
		return columnFormat{}, err
	}
	if code, ok := codeOf(c.Data); !ok || code != format.code {
		return columnFormat{}, fmt.Errorf("data of type %T do not go with format %s", c.Data, c.Format)
	}
	if n := dataLength(c.Data); n != rows*format.elements() {
		return columnFormat{}, fmt.Errorf("format %s and %d rows need %d values, not %d", c.Format, rows, rows*format.elements(), n)
	}
	if c.Null != nil && !holds(format.code, *c.Null) {
		return columnFormat{}, fmt.Errorf("format %s cannot hold Null = %d", c.Format, *c.Null)
	}
	texts, _ := c.Data.([]string)
	for i, text := range texts {
		if len(text) > format.repeat || !printable(text) {
			return columnFormat{}, fmt.Errorf("row %d, %q, is longer than format %s or not printable ASCII", i+1, text, c.Format)
		}
	}
	return format, nil
}

// codeOf is the type letter of a column's data.
func codeOf(data any) (code byte, ok bool) {
	switch data.(type) {
	case []bool:
		return 'L', true
	case []uint8:
		return 'B', true
	case []int16:
		return 'I', true
	case []int32:
		return 'J', true
	case []int64:
		return 'K', true
	case []float32:
		return 'E', true
	case []float64:
		return 'D', true
	case []string:
		return 'A', true
	}
	return 0, false
}

// makeHeader makes the whole header, with placeholders for the sums.
func (t *Table) makeHeader(plan *tableLayout) (*Header, error) {
	h := NewHeader(
		Card{"XTENSION", "BINTABLE", "binary table extension"},
		Card{"BITPIX", 8, "array data type"},
		Card{"NAXIS", 2, "number of array dimensions"},
		Card{"NAXIS1", plan.rowBytes, "bytes of a row"},
		Card{"NAXIS2", plan.rows, "number of rows"},
		Card{"PCOUNT", 0, ""},
		Card{"GCOUNT", 1, ""},
		Card{"TFIELDS", len(plan.fields), "number of columns"})
	var err error
	set := func(stem string, number int, value any) {
		if err == nil {
			err = h.Set(fmt.Sprintf("%s%d", stem, number), value, "")
		}
	}
	for i, field := range plan.fields {
		set("TTYPE", i+1, field.column.Name)
		set("TFORM", i+1, strings.TrimSpace(field.column.Format))
		if field.column.Unit != "" {
			set("TUNIT", i+1, field.column.Unit)
		}
		if field.column.Null != nil {
			set("TNULL", i+1, *field.column.Null)
		}
	}
	if err == nil {
		err = h.Set("EXTNAME", t.Name, "")
	}
	if err != nil {
		return nil, err
	}
	if err := addExtra(h, t.Header, keepsInTable); err != nil {
		return nil, err
	}
	addSumCards(h)
	return h, nil
}

// keepsInTable tells which cards of a header are those that Table.Header
// holds: neither structure nor the description of a column.
func keepsInTable(key string) bool {
	if key == "EXTNAME" || structural(key) {
		return false
	}
	for _, stem := range []string{"TTYPE", "TFORM", "TUNIT", "TNULL", "TSCAL", "TZERO", "TDISP", "TDIM", "TBCOL", "TDMIN", "TDMAX", "TLMIN", "TLMAX"} {
		if numbered(key, stem) {
			return false
		}
	}
	return true
}

// write encodes the rows, a buffer at a time.
func (p *tableLayout) write(out *layout, hdu *pending) error {
	if p.rowBytes == 0 {
		return nil
	}
	chunk := max(1, chunkBytes/p.rowBytes)
	buffer := make([]byte, min(chunk, p.rows)*p.rowBytes)
	for row := 0; row < p.rows; row += chunk {
		n := min(chunk, p.rows-row)
		for _, field := range p.fields {
			field.put(buffer, p.rowBytes, row, n)
		}
		if err := out.writeData(hdu, int64(row)*int64(p.rowBytes), buffer[:n*p.rowBytes]); err != nil {
			return err
		}
	}
	return nil
}

// put stores a column's fields of n rows from row into their places.
func (f tableField) put(buffer []byte, rowBytes, row, n int) {
	elements := f.format.elements()
	for i := range n {
		cell := buffer[i*rowBytes+f.offset:][:f.format.bytes()]
		from := (row + i) * elements
		switch d := f.column.Data.(type) {
		case []bool:
			for j := range cell {
				cell[j] = 'F'
				if d[from+j] {
					cell[j] = 'T'
				}
			}
		case []string:
			if elements == 0 {
				continue
			}
			// NUL ends a string before its field does (section 7.3.3.1).
			clear(cell[copy(cell, d[from]):])
		default:
			putSamples(cell, f.column.Data, from, from+elements)
		}
	}
}
