package sequence

import (
	"errors"
	"math"

	"mirrorloom/fitsutil"
)

// readFITS fills a sequence from sequence.fits without looking at what it
// means: check does that.
func (s *Sequence) readFITS(path string) (err error) {
	f, err := fitsutil.Open(path)
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	if err := s.readPrimary(f.HDUs()[0].Header); err != nil {
		return err
	}
	for _, read := range []func(*fitsutil.File) error{s.readSteps, s.readCode, s.readElements, s.readRows} {
		if err := read(f); err != nil {
			return err
		}
	}
	return nil
}

// cards reads header cards until the first that fails.
type cards struct {
	header *fitsutil.Header
	err    error
}

func (c *cards) text(key string) string {
	if c.err != nil {
		return ""
	}
	value, err := c.header.Str(key)
	c.err = err
	return value
}

func (c *cards) number(key string, least, most int64) int64 {
	if c.err != nil {
		return 0
	}
	value, err := c.header.Int(key)
	if err == nil && (value < least || value > most) {
		err = fault("%s %d is outside %d to %d", key, value, least, most)
	}
	c.err = err
	return value
}

func (s *Sequence) readPrimary(h *fitsutil.Header) error {
	c := &cards{header: h}
	s.Family = c.text("FAMILY")
	s.V = int(c.number("CODEV", 1, maxV))
	s.K = int(c.number("CODEK", 1, maxV))
	s.L = int(c.number("CODEL", 0, maxV))
	s.Poly = uint32(c.number("CODEPOLY", 0, math.MaxUint32))
	s.OrderSeed = uint64(c.number("ORDSEED", 0, math.MaxInt64))
	s.ProfileName = c.text("PROFNAME")
	s.ProfileSHA = c.text("PROFSHA")
	s.TargetSHA = c.text("TARGSHA")
	return c.err
}

// columns reads the columns of a table until the first that fails.
type columns struct {
	table *fitsutil.Table
	err   error
}

func openColumns(f *fitsutil.File, name string) *columns {
	t, err := f.Table(name)
	return &columns{table: t, err: err}
}

func column[T any](c *columns, get func(*fitsutil.Table, string) ([]T, error), name string) []T {
	if c.err != nil {
		return nil
	}
	values, err := get(c.table, name)
	if err == nil && len(values) != c.table.Rows() {
		err = fault("column %s of %s holds more than one value a row", name, c.table.Name)
	}
	c.err = err
	return values
}

func (c *columns) ints(name string) []int32 { return column(c, (*fitsutil.Table).Int32s, name) }
func (c *columns) texts(name string) []string {
	return column(c, (*fitsutil.Table).Strings, name)
}

func (s *Sequence) readSteps(f *fitsutil.File) error {
	c := openColumns(f, "STEPS")
	step, row, cycle := c.ints("STEP"), c.ints("ROW"), c.ints("CYCLE")
	kind, lamp, maskID := c.texts("KIND"), c.texts("LAMP"), c.texts("MASKID")
	exptime := column(c, (*fitsutil.Table).Float64s, "EXPTIME")
	if c.err != nil {
		return c.err
	}
	s.Steps = make([]Step, len(step))
	for i := range s.Steps {
		s.Steps[i] = Step{
			Step: int(step[i]), Kind: Kind(kind[i]), Lamp: lamp[i], ExptimeSeconds: exptime[i],
			MaskID: maskID[i], Row: int(row[i]), Cycle: int(cycle[i]),
		}
	}
	return nil
}

// readCode reads CODE, whose size must be that of the code and of STEPS.
func (s *Sequence) readCode(f *fitsutil.File) error {
	img, err := f.ImageNamed("CODE")
	if err != nil {
		return err
	}
	if img.BITPIX != 8 || len(img.Axes) != 2 || img.Axes[0] != s.V || img.Axes[1] != len(s.Steps) {
		return fault("CODE has BITPIX %d and axes %v where bytes of %d columns by %d steps are due", img.BITPIX, img.Axes, s.V, len(s.Steps))
	}
	bits := make([]uint8, s.V*len(s.Steps))
	line := make([]float32, s.V)
	s.Code = make([][]uint8, len(s.Steps))
	for i := range s.Code {
		if err := img.ReadRows(line, i, i+1); err != nil {
			return err
		}
		s.Code[i] = bits[i*s.V : (i+1)*s.V : (i+1)*s.V]
		for k, value := range line {
			if value != 0 && value != 1 {
				return fault("CODE row %d holds %v, which is no bit", i+1, value)
			}
			s.Code[i][k] = uint8(value)
		}
	}
	return nil
}

func (s *Sequence) readElements(f *fitsutil.File) error {
	c := openColumns(f, "ELEMENTS")
	col, element, first, last := c.ints("COLUMN"), c.ints("ELEMENT"), c.ints("FIRST"), c.ints("LAST")
	dark := column(c, (*fitsutil.Table).Bools, "DARK")
	if c.err != nil {
		return c.err
	}
	s.Elements = make([]Element, len(col))
	for i := range s.Elements {
		s.Elements[i] = Element{Column: int(col[i]), Element: int(element[i]), First: int(first[i]), Last: int(last[i]), Dark: dark[i]}
	}
	return nil
}

func (s *Sequence) readRows(f *fitsutil.File) error {
	c := openColumns(f, "ROWS")
	first, last, element := c.ints("FIRST"), c.ints("LAST"), c.ints("ELEMENT")
	use := c.texts("USE")
	if c.err != nil {
		return c.err
	}
	s.Rows = make([]RowRange, len(first))
	for i := range s.Rows {
		s.Rows[i] = RowRange{First: int(first[i]), Last: int(last[i]), Use: use[i], Element: int(element[i])}
	}
	return nil
}
