package extract

import (
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
)

// Weights of samples and covariances of elements in a pixel with restored samples are
// those of the restoring decode itself, A + A_K L, with L from hadamard's restorer.
func TestErasure(t *testing.T) {
	code, err := hadamard.New(hadamard.MSequence, 63)
	require.NoError(t, err)
	dark := []int{1, 5, 6, 14, 20, 27, 33, 34, 40, 45, 51, 52, 55, 57, 60, 61}
	checks, err := hadamard.NewChecks(code, dark)
	require.NoError(t, err)
	v := code.V()
	lost := []int{50}
	e := &erasures{projector: checks.Projector(), table: &product.Restored{X: []int32{4, 7, 7, 9}, Y: []int32{2, 2, 2, 3}, CodeRow: []int32{8, 3, 17, 1}}}
	e.lost = e.of(lost)
	row := e.row(2, 5, 4)
	require.Equal(t, lost, row[0].rows)
	require.Equal(t, []int{3, 17, 50}, row[2].rows)
	require.Equal(t, []int{8, 50}, e.row(2, 0, 5)[4].rows)
	require.Equal(t, []*erasure{nil, nil}, (*erasures)(nil).row(2, 0, 2))

	// The restoring decode, column by column of readings.
	open, closed := code.InverseEntries()
	a := mat.NewDense(v, v, nil)
	for j := range v {
		for k := range v {
			a.Set(j, k, closed)
			if code.Bit(k, j) == 1 {
				a.Set(j, k, open)
			}
		}
	}
	rows := row[2].rows
	restorer, repair := checks.NewRestorer(), hadamard.Repair{}
	whole := mat.DenseCopyOf(a)
	for k := range v {
		var residual []float64
		for _, d := range restorer.Columns() {
			residual = append(residual, a.At(d, k))
		}
		require.True(t, restorer.Solve(&repair, rows, residual))
		for j := range v {
			for i, lostRow := range rows {
				whole.Set(j, k, whole.At(j, k)+a.At(j, lostRow)*repair.Missing[i])
			}
		}
	}
	columns := []int{0, 2, 30, 62}
	for _, j := range columns {
		u := make([]float32, v)
		for k := range u {
			u[k] = float32(a.At(j, k))
		}
		row[2].reweigh(e.projector, u, 1)
		for k := range u {
			require.InDelta(t, whole.At(j, k), u[k], 1e-6)
		}
		for _, k := range rows {
			require.InDelta(t, 0, u[k], 1e-7)
		}
	}
	const white = 7.0
	pairs := table[float64](len(columns), len(columns))
	for i := range columns {
		for o := range columns {
			pairs[i][o] = white * mat.Dot(a.RowView(columns[i]), a.RowView(columns[o]))
		}
	}
	row[2].couple(pairs, code, columns, white)
	scale := white * mat.Dot(whole.RowView(0), whole.RowView(0))
	for i := range columns {
		for o := range i {
			want := white * mat.Dot(whole.RowView(columns[i]), whole.RowView(columns[o]))
			require.InDelta(t, want, pairs[i][o], 2*scale/float64(v))
			require.Equal(t, pairs[i][o], pairs[o][i])
		}
	}
}
