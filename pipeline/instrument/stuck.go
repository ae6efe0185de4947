package instrument

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"

	"mirrorloom/pipeline/config"
)

// StuckMirror is a mirror that does not move, a row of the CSV file of the key
// dmd.stuck_csv. The file's first line is "column,row,state"; column and row
// count from 0 as in the device's own numbering, state is on or off.
type StuckMirror struct {
	Column, Row int
	On          bool
}

var stuckHeader = []string{"column", "row", "state"}

// Stuck lists the mirrors that do not move, in the order of the file; not to be
// changed.
func (p *Profile) Stuck() []StuckMirror { return p.stuck }

// SetStuck gives the profile a CSV file of that name that lists mirrors which do not
// move. The error says what is wrong with the list.
func (p *Profile) SetStuck(name string, list []StuckMirror) error {
	var text bytes.Buffer
	fmt.Fprintln(&text, strings.Join(stuckHeader, ","))
	for _, m := range list {
		state := "off"
		if m.On {
			state = "on"
		}
		fmt.Fprintf(&text, "%d,%d,%s\n", m.Column, m.Row, state)
	}
	stuck, err := parseStuck(name, text.Bytes(), p.DMD.Columns, p.DMD.Rows)
	if err != nil {
		return err
	}
	p.DMD.StuckCSV, p.stuck, p.files = name, stuck, map[string][]byte{name: text.Bytes()}
	return nil
}

func (p *Profile) readStuck(doc *config.Doc, beside func(string) ([]byte, error)) error {
	name := p.DMD.StuckCSV
	if name == "" {
		return nil
	}
	const path = "dmd.stuck_csv"
	if beside == nil {
		return doc.Errorf(path, "a profile read from memory can name no file; leave the key out")
	}
	data, err := beside(name)
	if err != nil {
		return &config.Error{File: doc.Name(), Line: doc.Line(path), Path: path, What: err.Error(), Err: err}
	}
	p.stuck, err = parseStuck(name, data, p.DMD.Columns, p.DMD.Rows)
	if err != nil {
		return err
	}
	p.files = map[string][]byte{name: data}
	return nil
}

// parseStuck reads the CSV; its errors are *config.Error with the CSV's line.
func parseStuck(name string, data []byte, columns, rows int) ([]StuckMirror, error) {
	refuse := func(line int, format string, args ...any) error {
		return &config.Error{File: name, Line: line, What: fmt.Sprintf(format, args...)}
	}
	reader := csv.NewReader(bytes.NewReader(data))
	reader.FieldsPerRecord = len(stuckHeader)
	reader.ReuseRecord = true
	var list []StuckMirror
	seen := make(map[[2]int]int)
	for first := true; ; first = false {
		record, err := reader.Read()
		if errors.Is(err, io.EOF) && first {
			return nil, refuse(1, "the file is empty; write the line column,row,state and a line a mirror")
		}
		if errors.Is(err, io.EOF) {
			return list, nil
		}
		var syntax *csv.ParseError
		if errors.As(err, &syntax) {
			return nil, refuse(syntax.Line, "not CSV of three fields (%v); write column,row,state", syntax.Err)
		}
		if err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		line, _ := reader.FieldPos(0)
		if first {
			if record[0] != stuckHeader[0] || record[1] != stuckHeader[1] || record[2] != stuckHeader[2] {
				return nil, refuse(line, "the first line is not column,row,state; write it")
			}
			continue
		}
		m, problem := stuckMirror(record, columns, rows)
		if problem != "" {
			return nil, refuse(line, "%s", problem)
		}
		at := [2]int{m.Column, m.Row}
		if before, ok := seen[at]; ok {
			return nil, refuse(line, "mirror %d,%d stands here a second time, first on line %d; delete one of them", m.Column, m.Row, before)
		}
		seen[at] = line
		list = append(list, m)
	}
}

func stuckMirror(record []string, columns, rows int) (m StuckMirror, problem string) {
	var err error
	if m.Column, err = strconv.Atoi(record[0]); err != nil || m.Column < 0 || m.Column >= columns {
		return m, fmt.Sprintf("column %q is no whole number from 0 to %d; give the device's own column", record[0], columns-1)
	}
	if m.Row, err = strconv.Atoi(record[1]); err != nil || m.Row < 0 || m.Row >= rows {
		return m, fmt.Sprintf("row %q is no whole number from 0 to %d; give the device's own row", record[1], rows-1)
	}
	switch record[2] {
	case "on":
		m.On = true
	case "off":
	default:
		return m, fmt.Sprintf("state %q is unknown; write on or off", record[2])
	}
	return m, ""
}
