package product

import (
	"errors"
	"fmt"

	"mirrorloom/fitsutil"
)

// RestoredTable is the name of the table of restored samples.
const RestoredTable = "RESTORED"

// Restored lists the single samples that were restored from the dark columns, struck by
// cosmic rays or saturated, in order of Y and X: detector pixel, both from 0, and code
// row. Rows that were lost in every pixel are not among them. A cube without any has no
// such table.
type Restored struct{ X, Y, CodeRow []int32 }

// Table is the table RESTORED.
func (r Restored) Table() *fitsutil.Table {
	return &fitsutil.Table{Name: RestoredTable, Columns: []fitsutil.Column{
		{Name: "X", Format: "J", Unit: "pix", Data: r.X},
		{Name: "Y", Format: "J", Unit: "pix", Data: r.Y},
		{Name: "CODEROW", Format: "J", Data: r.CodeRow},
	}}
}

// ReadRestored reads the table from a cube.fits; empty where there is none.
func ReadRestored(f *fitsutil.File) (*Restored, error) {
	r := new(Restored)
	t, err := f.Table(RestoredTable)
	if err != nil {
		if errors.Is(err, fitsutil.ErrMissingHDU) {
			return r, nil
		}
		return nil, err
	}
	for _, c := range []struct {
		name string
		to   *[]int32
	}{{"X", &r.X}, {"Y", &r.Y}, {"CODEROW", &r.CodeRow}} {
		if *c.to, err = t.Int32s(c.name); err != nil {
			return nil, fmt.Errorf("%w; make the cube again with reduce", err)
		}
	}
	return r, nil
}
