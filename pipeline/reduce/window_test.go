package reduce

import (
	"testing"

	"github.com/stretchr/testify/require"
)

// Rows stay in order, and the memory of dropped ones serves again.
func TestWindow(t *testing.T) {
	w := newWindow(shape{elements: 3, columns: 5, uniform: true})
	first := w.extend(0, 4)
	require.Len(t, first, 4)
	for i, r := range first {
		require.Equal(t, i, r.y)
		require.Len(t, r.signal, 3)
		require.Len(t, r.variance, 1)
		require.Len(t, r.flags, 5)
		r.signal[2][4] = float32(100 + i)
	}
	require.Equal(t, 0, w.first())
	require.Equal(t, 4, w.next())
	dropped := map[*decodedRow]bool{first[0]: true, first[1]: true, first[2]: true}
	w.dropBefore(3)
	require.Equal(t, 3, w.first())
	require.Equal(t, float32(103), w.rows[0].signal[2][4], "a kept row keeps its values")
	for i, r := range w.extend(4, 7) {
		require.Equal(t, 4+i, r.y)
		require.True(t, dropped[r], "row %d has new memory", r.y)
		delete(dropped, r)
	}
	require.Len(t, w.extend(7, 8), 1)
	require.Equal(t, 8, w.next())
	w.dropBefore(100)
	require.Empty(t, w.rows)
	own := newWindow(shape{elements: 3, columns: 5})
	require.Len(t, own.extend(0, 1)[0].variance, 3)
}

// The rows of planes do not reach into each other.
func TestPlanes(t *testing.T) {
	p := planes(2, 3)
	p[0] = append(p[0], 7)
	require.Equal(t, []float32{0, 0, 0}, p[1])
}
