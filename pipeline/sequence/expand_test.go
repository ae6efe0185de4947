package sequence

import (
	"testing"

	"pgregory.net/rapid"
)

// The device's geometry by hand (section "mirror coordinates" of the contract):
// 3 columns x 2 rows, element 0 the u of 1 and 2, element 1 those of 3 and 4.
func TestExpandByHand(t *testing.T) {
	elements := []Element{
		{Column: 0, Element: 0, First: 1, Last: 2},
		{Column: 1, Element: -1, First: -1, Last: -1, Dark: true},
		{Column: 2, Element: 1, First: 3, Last: 4},
	}
	square := device{columns: 5, rows: 2}
	diagonal := device{columns: 4, rows: 3, diagonal: true}
	for _, c := range []struct {
		name    string
		device  device
		bits    []uint8
		ranges  []RowRange
		science bool
		want    []uint8
	}{
		{"square", square, []uint8{1, 1, 0}, nil, false, []uint8{0, 1, 1, 0, 0, 0, 1, 1, 0, 0}},
		{"dark bit alone", square, []uint8{0, 1, 0}, nil, false, make([]uint8, 10)},
		{"square, closed row", square, []uint8{1, 1, 1}, []RowRange{{1, 1, UseClosed, -1}}, false, []uint8{0, 1, 1, 1, 1, 0, 0, 0, 0, 0}},
		{"square, row closed for one", square, []uint8{1, 1, 1}, []RowRange{{1, 1, UseClosed, 0}}, false, []uint8{0, 1, 1, 1, 1, 0, 0, 0, 1, 1}},
		{"square, sentinel in science", square, []uint8{1, 1, 0}, []RowRange{{0, 0, UseSentinel, 1}}, true, []uint8{0, 0, 0, 1, 1, 0, 1, 1, 0, 0}},
		{"square, sentinel on a lamp", square, []uint8{1, 1, 0}, []RowRange{{0, 0, UseSentinel, 1}}, false, []uint8{0, 1, 1, 0, 0, 0, 1, 1, 0, 0}},
		// u = column + row.
		{"diagonal", diagonal, []uint8{1, 0, 0}, nil, false, []uint8{
			0, 1, 1, 0,
			1, 1, 0, 0,
			1, 0, 0, 0,
		}},
		// w = row - column: -1 is (1,0), (2,1), (3,2).
		{"diagonal, negative closed row", diagonal, []uint8{1, 0, 1}, []RowRange{{-1, -1, UseClosed, -1}}, false, []uint8{
			0, 0, 1, 1,
			1, 1, 0, 1,
			1, 1, 1, 0,
		}},
	} {
		x := newExpander(c.device, elements, c.ranges)
		got := make([]uint8, c.device.columns*c.device.rows)
		x.expand(got, c.bits, c.science)
		for i := range got {
			if got[i] != c.want[i] {
				t.Errorf("%s: mirror (%d,%d) is %d, not %d", c.name, i%c.device.columns, i/c.device.columns, got[i], c.want[i])
			}
		}
	}
}

// Laws of expansion on any device: the complement of the bits is the
// complement of the mirrors that any element has; bits add up; what a buffer
// held before does not matter.
func TestExpandLaws(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		d := device{
			columns:  rapid.IntRange(1, 40).Draw(t, "columns"),
			rows:     rapid.IntRange(1, 40).Draw(t, "rows"),
			diagonal: rapid.Bool().Draw(t, "diagonal"),
		}
		u, w := d.u(), d.w()
		width := rapid.IntRange(1, u.last+1).Draw(t, "width")
		n := rapid.IntRange(1, (u.last+1)/width).Draw(t, "n")
		start := rapid.IntRange(0, u.last+1-n*width).Draw(t, "start")
		elements := make([]Element, n)
		for j := range elements {
			elements[j] = Element{Column: j, Element: j, First: start + j*width, Last: start + (j+1)*width - 1}
		}
		bits := rapid.SliceOfN(rapid.Uint8Range(0, 1), n, n).Draw(t, "bits")
		not, all := make([]uint8, n), make([]uint8, n)
		for j, b := range bits {
			not[j], all[j] = 1-b, 1
		}
		closed := rapid.IntRange(w.first, w.last).Draw(t, "closed")
		x := newExpander(d, elements, []RowRange{{closed, w.last, UseClosed, rapid.IntRange(-1, n-1).Draw(t, "of")}})
		states := func(bits []uint8) []uint8 {
			on := make([]uint8, d.columns*d.rows)
			for i := range on {
				on[i] = 9
			}
			x.expand(on, bits, false)
			return on
		}
		a, b, sum := states(bits), states(not), states(all)
		for i := range sum {
			if a[i]+b[i] != sum[i] || sum[i] > 1 {
				t.Fatalf("mirror %d: %d + %d is not %d", i, a[i], b[i], sum[i])
			}
		}
	})
}
