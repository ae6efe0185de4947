package reduce

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/exposure"
)

// monitorColumns are those of a monitor's table, in this order in a CSV file and in
// any in a FITS table: the step of the sequence, the flux on any scale, and its
// standard error on the same.
var monitorColumns = []string{"step", "flux", "error"}

// monitorRow is what a monitor saw during a step: a comparison star, say, or the light
// that the mirrors send away.
type monitorRow struct {
	step        int
	flux, error float64
}

// readMonitor reads a table of relative fluxes by step: CSV, or the first binary table
// of a FITS file. Errors name file, line or row, and column.
func readMonitor(path string) ([]monitorRow, error) {
	if isFITS(path) {
		return readMonitorTable(path)
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("open the monitor's table: %w", err)
	}
	defer f.Close() // only read from
	rows, err := parseMonitor(f)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return rows, nil
}

func isFITS(path string) bool {
	return strings.HasSuffix(path, ".fits") || strings.HasSuffix(path, ".fits.gz")
}

// isTable tells whether a recipe's `use` names a monitor's table.
func isTable(use string) bool { return isFITS(use) || strings.HasSuffix(use, ".csv") }

func parseMonitor(in io.Reader) ([]monitorRow, error) {
	r := csv.NewReader(in)
	r.FieldsPerRecord = len(monitorColumns)
	names, err := r.Read()
	if err != nil {
		return nil, fmt.Errorf("no line of column names (%s): %w", strings.Join(monitorColumns, ","), err)
	}
	if !slices.Equal(names, monitorColumns) {
		return nil, fmt.Errorf("line 1: the columns are %q, want %s", strings.Join(names, ","), strings.Join(monitorColumns, ","))
	}
	var rows []monitorRow
	for {
		record, err := r.Read()
		if err == io.EOF {
			return rows, checkMonitor(rows)
		}
		if err != nil {
			return nil, err
		}
		line, _ := r.FieldPos(0)
		row, err := parseMonitorRow(record)
		if err != nil {
			return nil, fmt.Errorf("line %d, %w", line, err)
		}
		rows = append(rows, row)
	}
}

func parseMonitorRow(record []string) (row monitorRow, err error) {
	if row.step, err = strconv.Atoi(record[0]); err != nil {
		return row, fmt.Errorf("column step: %q is no whole number", record[0])
	}
	for i, to := range []*float64{&row.flux, &row.error} {
		if *to, err = strconv.ParseFloat(record[1+i], 64); err != nil {
			return row, fmt.Errorf("column %s: %q is no number", monitorColumns[1+i], record[1+i])
		}
	}
	return row, row.check()
}

// check refuses what is no measurement.
func (r monitorRow) check() error {
	switch {
	case r.step < 1:
		return fmt.Errorf("column step: %d is no step; they count from 1", r.step)
	case !(r.flux > 0) || math.IsInf(r.flux, 1):
		return fmt.Errorf("column flux: %v is no flux; leave out the step", r.flux)
	case !(r.error > 0) || math.IsInf(r.error, 1):
		return fmt.Errorf("column error: %v is no standard error; leave out the step", r.error)
	}
	return nil
}

// checkMonitor looks at the rows together.
func checkMonitor(rows []monitorRow) error {
	seen := map[int]bool{}
	for _, r := range rows {
		if seen[r.step] {
			return fmt.Errorf("step %d comes twice; leave one row", r.step)
		}
		seen[r.step] = true
	}
	if len(rows) < 2 {
		return fmt.Errorf("%d rows tell no change; two steps are the least", len(rows))
	}
	return nil
}

// readMonitorTable reads the first binary table of a FITS file.
func readMonitorTable(path string) (rows []monitorRow, err error) {
	f, err := fitsutil.Open(path)
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	at := slices.IndexFunc(f.HDUs(), func(u *fitsutil.HDU) bool { return u.Kind == fitsutil.BinTableHDU })
	if at < 0 {
		return nil, fmt.Errorf("%s: it has no binary table; write one with the columns %s", path, strings.ToUpper(strings.Join(monitorColumns, ", ")))
	}
	table, err := f.TableAt(at)
	if err != nil {
		return nil, err
	}
	var values [3][]float64
	for i, name := range monitorColumns {
		column, err := table.Column(name)
		if err != nil {
			return nil, err
		}
		if values[i], err = numbers(column.Data); err != nil || len(values[i]) != table.Rows() {
			return nil, fmt.Errorf("%s: column %s holds no single number a row", path, strings.ToUpper(name))
		}
	}
	for i, step := range values[0] {
		row := monitorRow{flux: values[1][i], error: values[2][i]}
		if step != math.Trunc(step) || !(math.Abs(step) < math.MaxInt32) {
			return nil, fmt.Errorf("%s: row %d, column step: %v is no whole number", path, i+1, step)
		}
		row.step = int(step)
		if err := row.check(); err != nil {
			return nil, fmt.Errorf("%s: row %d, %w", path, i+1, err)
		}
		rows = append(rows, row)
	}
	if err := checkMonitor(rows); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return rows, nil
}

// numbers are a column's values.
func numbers(data any) ([]float64, error) {
	switch d := data.(type) {
	case []int16:
		return floats(d), nil
	case []int32:
		return floats(d), nil
	case []int64:
		return floats(d), nil
	case []float32:
		return floats(d), nil
	case []float64:
		return d, nil
	}
	return nil, errors.New("no numbers")
}

func floats[T int16 | int32 | int64 | float32](from []T) []float64 {
	all := make([]float64, len(from))
	for i, v := range from {
		all[i] = float64(v)
	}
	return all
}

// monitor reads the recipe's table and gives what it says of the frames.
func (r *reduction) monitor(frames []*exposure.Frame) (*relative, error) {
	path := r.opts.Recipe.Throughput.Use
	rows, err := readMonitor(path)
	if err != nil {
		return nil, err
	}
	m := newRelative(len(frames))
	byStep := map[int]monitorRow{}
	for _, row := range rows {
		if row.step > len(r.seq.Steps) {
			return nil, fmt.Errorf("%s: step %d where the sequence has %d; is it the monitor of this night?", path, row.step, len(r.seq.Steps))
		}
		byStep[row.step] = row
	}
	there := 0
	for k, f := range frames {
		if row, seen := byStep[f.Step+1]; seen {
			m.c[k], m.err[k] = row.flux, row.error
			there++
		}
	}
	if there < 2 {
		return nil, fmt.Errorf("%s: it has %d of the %d science steps; is it the monitor of this night?", path, there, len(frames))
	}
	if there < len(frames) {
		r.warn("%s has no row for %d of %d science steps", path, len(frames)-there, len(frames))
	}
	return m, nil
}
