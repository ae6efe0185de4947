package plan

import (
	"cmp"
	"slices"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// withFieldRows is the target with field.rows turned into closed rows: all rows of the device
// that they leave out and the target has no other use for.
func withFieldRows(target *sequence.Target, p *instrument.Profile) (*sequence.Target, error) {
	if target.Field == nil || len(target.Field.Rows) == 0 {
		return target, nil
	}
	rows := target.Field.Rows
	wFirst, wLast := p.WRange()
	if rows[0] < wFirst || rows[1] > wLast {
		return nil, refuse("field.rows", "the rows %d to %d reach beyond the device's w of %d to %d; stay within", rows[0], rows[1], wFirst, wLast)
	}
	t, field := *target, *target.Field
	field.Rows = nil
	t.Field, t.Closed = &field, slices.Clone(target.Closed)
	used := [][2]int{{rows[0], rows[1]}, {wLast + 1, wLast + 1}}
	for _, r := range t.SentinelRows {
		used = append(used, [2]int{r.First, r.Last})
	}
	for _, r := range t.Closed {
		if r.Element == nil {
			used = append(used, [2]int{r.First, r.Last})
		}
	}
	slices.SortFunc(used, func(a, b [2]int) int { return cmp.Compare(a[0], b[0]) })
	next := wFirst
	for _, u := range used {
		if u[0] > next {
			t.Closed = append(t.Closed, sequence.ClosedRow{First: next, Last: u[0] - 1})
		}
		next = max(next, u[1]+1)
	}
	return &t, nil
}
