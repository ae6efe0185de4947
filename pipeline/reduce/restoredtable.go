package reduce

import (
	"cmp"
	"fmt"
	"slices"

	"mirrorloom/pipeline/product"
)

// mostRestored bounds the list of restored samples, 12 bytes each.
const mostRestored = 2 << 20

// restoredSamples lists samples that were restored, in order of detector rows, as many as
// fit.
type restoredSamples struct {
	list []restoredSample
	left int // out of the list
}

func (r *restoredSamples) add(more []restoredSample) {
	n := min(len(more), mostRestored-len(r.list))
	r.list = append(r.list, more[:n]...)
	r.left += len(more) - n
}

// finishRestored writes the table of restored samples, if there are any.
func (r *reduction) finishRestored() error {
	if r.samples.left > 0 {
		r.warn("%d restored samples are not in the table %s, which holds %d: errors of sums over voxels do not know them", r.samples.left, product.RestoredTable, mostRestored)
	}
	list := r.samples.list
	if len(list) == 0 {
		return nil
	}
	slices.SortFunc(list, func(a, b restoredSample) int {
		return cmp.Or(cmp.Compare(a.line, b.line), cmp.Compare(a.column, b.column), cmp.Compare(a.row, b.row))
	})
	s := product.Restored{X: make([]int32, len(list)), Y: make([]int32, len(list)), CodeRow: make([]int32, len(list))}
	for i, one := range list {
		s.X[i], s.Y[i], s.CodeRow[i] = int32(one.column), int32(one.line), int32(one.row)
	}
	if err := r.cube.AppendTable(s.Table()); err != nil {
		return fmt.Errorf("table %s: %w", product.RestoredTable, err)
	}
	return nil
}
