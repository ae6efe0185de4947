package view

import (
	"context"
	"encoding/binary"
	"math"
	"net/http"

	"mirrorloom/pipeline/rowfile"
)

// fieldAnswer is /api/field: the mean of the good voxels of every plane. Until the planes
// are added up it is that of some rows in the middle, and Whole is false.
type fieldAnswer struct {
	Unit         string  `json:"unit"`
	WavelengthNM numbers `json:"wavelength_nm"`
	Signal       numbers `json:"signal"`
	Good         numbers `json:"good"` // part of the voxels
	Whole        bool    `json:"whole"`
	FirstRow     int     `json:"first_row"`
	EndRow       int     `json:"end_row"`
}

func (v *Viewer) getField(w http.ResponseWriter, r *http.Request, q *query) error {
	if err := q.done(); err != nil {
		return badQuery{err}
	}
	channels := v.schema.Grid.Count
	a := fieldAnswer{Unit: v.unit, WavelengthNM: v.wavelengths(), Signal: make(numbers, channels), Good: make(numbers, channels)}
	err := v.compute(r.Context(), func() error {
		if sums := v.sums.Load(); sums != nil {
			return v.wholeField(&a, sums)
		}
		return v.someField(r.Context(), &a)
	})
	if err != nil {
		return err
	}
	return reply(w, a)
}

// wholeField reads the sums.
func (v *Viewer) wholeField(a *fieldAnswer, sums *rowfile.File) error {
	a.Whole, a.FirstRow, a.EndRow = true, 0, v.schema.Rows
	places := float64(v.schema.Elements * v.schema.Rows)
	raw := make([]byte, 16*groupPlanes)
	for l := range a.Signal {
		if l%groupPlanes == 0 {
			if err := sums.ReadRecords(raw, l/groupPlanes, sumField, 0, 1); err != nil {
				return err
			}
		}
		at := raw[16*(l%groupPlanes):]
		sum, good := math.Float64frombits(binary.LittleEndian.Uint64(at)), math.Float64frombits(binary.LittleEndian.Uint64(at[8:]))
		a.Signal[l], a.Good[l] = meanSignal(sum, int(good)), good/places
	}
	return nil
}

// fieldRows stand for the field.
const fieldRows = 24

// someField reads rows in the middle.
func (v *Viewer) someField(ctx context.Context, a *fieldAnswer) error {
	n := min(fieldRows, v.schema.Rows)
	a.FirstRow = (v.schema.Rows - n) / 2
	a.EndRow = a.FirstRow + n
	size := n * v.schema.Elements
	signal, variance, flags := make([]float32, size), make([]float32, size), make([]float32, size)
	for l := range a.Signal {
		if err := ctx.Err(); err != nil {
			return err
		}
		for _, err := range []error{
			v.images.signal.ReadPlaneRows(signal, l, a.FirstRow, a.EndRow),
			v.images.variance.ReadPlaneRows(variance, l, a.FirstRow, a.EndRow),
			v.images.flags.ReadPlaneRows(flags, l, a.FirstRow, a.EndRow),
		} {
			if err != nil {
				return err
			}
		}
		sum, good := 0.0, 0
		for i, x := range signal {
			if isGood(int16(flags[i]), x, variance[i]) {
				sum += float64(x)
				good++
			}
		}
		a.Signal[l], a.Good[l] = meanSignal(sum, good), float64(good)/float64(size)
	}
	return nil
}
