package product

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"mirrorloom/fitsutil"
)

// Verdict says what became of a step or a frame.
type Verdict string

// The verdicts. Only OK and Relabelled frames are used.
const (
	OK            Verdict = "ok"
	Missing       Verdict = "missing"        // no frame for this step
	Duplicate     Verdict = "duplicate"      // a second frame of a step that has one
	WrongMask     Verdict = "wrong-mask"     // STEP and MASKID contradict each other
	WrongExposure Verdict = "wrong-exposure" // exposed longer or shorter than commanded
	WrongSize     Verdict = "wrong-size"     // not the detector's size
	Unreadable    Verdict = "unreadable"     // not a whole FITS image
	Extra         Verdict = "extra"          // of no step of the sequence
	Relabelled    Verdict = "relabelled"     // used for another step than its header says
)

// Verdicts lists the verdicts in the order in which tables count them.
func Verdicts() []Verdict {
	return []Verdict{OK, Relabelled, Missing, Duplicate, WrongMask, WrongExposure, WrongSize, Unreadable, Extra}
}

// Used tells whether frames of this verdict enter the reduction.
func (v Verdict) Used() bool { return v == OK || v == Relabelled }

// How a frame found its step.
const (
	ByKeyword = "keyword" // the STEP keyword
	ByMaskID  = "maskid"  // the MASKID keyword alone
	ByTime    = "time"    // the order of DATE-OBS
	ByAudit   = "audit"   // the dark columns
)

// Entry is one line of the ledger. Every step has one; frames that serve no
// step come behind them with Step 0.
type Entry struct {
	Step      int     `json:"step"`
	File      string  `json:"file"` // in the night folder; empty for a missing frame
	Kind      string  `json:"kind"`
	MaskID    string  `json:"maskid"`
	MatchedBy string  `json:"matched_by"`
	DateObs   string  `json:"date_obs"`
	ExptimeS  float64 `json:"exptime_s"`
	Verdict   Verdict `json:"verdict"`
	// SaturatedFraction is the part of the active pixels at or above
	// saturation; NaN where it was not measured, as are the next three.
	SaturatedFraction float64 `json:"saturated_fraction"`
	Throughput        float64 `json:"throughput"`     // c_k, mean 1
	ThroughputErr     float64 `json:"throughput_err"` // its standard error
	OffsetE           float64 `json:"offset_e"`       // electrons taken off as this frame's own level
	Note              string  `json:"note"`
}

// NewEntry gives an entry whose measured figures are still NaN.
func NewEntry(step int) Entry {
	nan := math.NaN()
	return Entry{Step: step, ExptimeS: nan, SaturatedFraction: nan, Throughput: nan, ThroughputErr: nan, OffsetE: nan}
}

// Ledger is the table that pairs frames with steps.
type Ledger []Entry

// Count gives the number of entries of a verdict.
func (l Ledger) Count(v Verdict) int {
	n := 0
	for _, e := range l {
		if e.Verdict == v {
			n++
		}
	}
	return n
}

// field is one column of the ledger, in CSV and in FITS.
type field struct {
	name, unit string
	get        func(*Entry) any // int, string or float64
	set        func(*Entry, string) error
}

func text(name string, at func(*Entry) *string) field {
	return field{name, "", func(e *Entry) any { return *at(e) },
		func(e *Entry, s string) error { *at(e) = s; return checkText(s) }}
}

// checkText keeps a line a line: CSV cannot carry every sequence of carriage
// returns, and FITS none.
func checkText(s string) error {
	if !utf8.ValidString(s) || strings.ContainsFunc(s, unicode.IsControl) {
		return fmt.Errorf("%q holds control characters or is no UTF-8", s)
	}
	return nil
}

func setVerdict(e *Entry, s string) error {
	e.Verdict = Verdict(s)
	if !slices.Contains(Verdicts(), e.Verdict) {
		return fmt.Errorf("%q is no verdict", s)
	}
	return nil
}

func setStep(e *Entry, s string) (err error) {
	if e.Step, err = strconv.Atoi(s); err == nil && (e.Step < 0 || e.Step > math.MaxInt32) {
		err = fmt.Errorf("%d is no step", e.Step)
	}
	return err
}

func number(name, unit string, at func(*Entry) *float64) field {
	return field{name, unit, func(e *Entry) any { return *at(e) },
		func(e *Entry, s string) (err error) {
			if s == "" {
				*at(e) = math.NaN()
				return nil
			}
			*at(e), err = strconv.ParseFloat(s, 64)
			return err
		}}
}

func fields() []field {
	return []field{
		{"step", "", func(e *Entry) any { return e.Step }, setStep},
		text("file", func(e *Entry) *string { return &e.File }),
		text("kind", func(e *Entry) *string { return &e.Kind }),
		text("maskid", func(e *Entry) *string { return &e.MaskID }),
		text("matched_by", func(e *Entry) *string { return &e.MatchedBy }),
		text("date_obs", func(e *Entry) *string { return &e.DateObs }),
		number("exptime_s", "s", func(e *Entry) *float64 { return &e.ExptimeS }),
		{"verdict", "", func(e *Entry) any { return string(e.Verdict) }, setVerdict},
		number("saturated_fraction", "", func(e *Entry) *float64 { return &e.SaturatedFraction }),
		number("throughput", "", func(e *Entry) *float64 { return &e.Throughput }),
		number("throughput_err", "", func(e *Entry) *float64 { return &e.ThroughputErr }),
		number("offset_e", "ct", func(e *Entry) *float64 { return &e.OffsetE }),
		text("note", func(e *Entry) *string { return &e.Note }),
	}
}

// WriteCSV writes the ledger with a line of column names. A figure that was not
// measured is an empty field; floats have the fewest digits that read back.
// Texts with control characters are an error.
func (l Ledger) WriteCSV(w io.Writer) error {
	out := csv.NewWriter(w)
	var names []string
	for _, f := range fields() {
		names = append(names, f.name)
	}
	if err := out.Write(names); err != nil {
		return fmt.Errorf("write the ledger: %w", err)
	}
	for i := range l {
		var record []string
		for _, f := range fields() {
			cell := format(f.get(&l[i]))
			if err := checkText(cell); err != nil {
				return fmt.Errorf("write the ledger, row %d, column %s: %w", i+1, f.name, err)
			}
			record = append(record, cell)
		}
		if err := out.Write(record); err != nil {
			return fmt.Errorf("write the ledger: %w", err)
		}
	}
	out.Flush()
	if err := out.Error(); err != nil {
		return fmt.Errorf("write the ledger: %w", err)
	}
	return nil
}

func format(v any) string {
	switch v := v.(type) {
	case float64:
		if math.IsNaN(v) {
			return ""
		}
		return strconv.FormatFloat(v, 'g', -1, 64)
	case int:
		return strconv.Itoa(v)
	case string:
		return v
	}
	panic("internal error: a ledger field of an unknown type")
}

// ReadLedger reads a ledger.csv. Errors name the file and the line.
func ReadLedger(path string) (Ledger, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("open the ledger: %w", err)
	}
	defer f.Close()
	l, err := parseLedger(f)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return l, nil
}

func parseLedger(r io.Reader) (Ledger, error) {
	in := csv.NewReader(r)
	names, err := in.Read()
	if err != nil {
		return nil, fmt.Errorf("no line of column names: %w", err)
	}
	all := fields()
	if len(names) != len(all) {
		return nil, fmt.Errorf("line 1: %d columns, want %d", len(names), len(all))
	}
	for i, f := range all {
		if names[i] != f.name {
			return nil, fmt.Errorf("line 1: column %d is %q, want %q", i+1, names[i], f.name)
		}
	}
	l := Ledger{}
	for {
		record, err := in.Read()
		if err == io.EOF {
			return l, nil
		}
		if err != nil {
			return nil, err
		}
		e := Entry{}
		for i, f := range all {
			if err := f.set(&e, record[i]); err != nil {
				line, _ := in.FieldPos(i)
				return nil, fmt.Errorf("line %d, column %s: %w", line, f.name, err)
			}
		}
		l = append(l, e)
	}
}

// Table gives the ledger as the FRAMES table of cube.fits: the same columns, their names
// in capitals. FITS holds ASCII alone: other characters of a file's name or a
// note are written as \u and their number.
func (l Ledger) Table() *fitsutil.Table {
	t := &fitsutil.Table{Name: Frames}
	for _, f := range fields() {
		col := fitsutil.Column{Name: strings.ToUpper(f.name), Unit: f.unit}
		switch f.get(&Entry{}).(type) {
		case int:
			col.Format, col.Data = "J", gather(l, func(e *Entry) int32 { return int32(f.get(e).(int)) })
		case float64:
			col.Format, col.Data = "D", gather(l, func(e *Entry) float64 { return f.get(e).(float64) })
		case string:
			data := gather(l, func(e *Entry) string { return ascii(f.get(e).(string)) })
			width := 1
			for _, s := range data {
				width = max(width, len(s))
			}
			col.Format, col.Data = strconv.Itoa(width)+"A", data
		}
		t.Columns = append(t.Columns, col)
	}
	return t
}

// ascii escapes what no FITS table may hold, and nothing in a plain text.
func ascii(s string) string {
	if strings.ContainsFunc(s, func(r rune) bool { return r < ' ' || r > '~' }) {
		quoted := strconv.QuoteToASCII(s)
		return quoted[1 : len(quoted)-1]
	}
	return s
}

func gather[T any](l Ledger, get func(*Entry) T) []T {
	all := make([]T, len(l))
	for i := range l {
		all[i] = get(&l[i])
	}
	return all
}

// MarshalJSON writes a figure that was not measured as null.
func (e Entry) MarshalJSON() ([]byte, error) {
	type plain Entry // without this method
	return json.Marshal(struct {
		plain
		ExptimeS          *float64 `json:"exptime_s"`
		SaturatedFraction *float64 `json:"saturated_fraction"`
		Throughput        *float64 `json:"throughput"`
		ThroughputErr     *float64 `json:"throughput_err"`
		OffsetE           *float64 `json:"offset_e"`
	}{plain(e), measured(e.ExptimeS), measured(e.SaturatedFraction), measured(e.Throughput), measured(e.ThroughputErr), measured(e.OffsetE)})
}

func measured(x float64) *float64 {
	if math.IsNaN(x) {
		return nil
	}
	return &x
}
