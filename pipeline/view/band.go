package view

import "context"

// quickPlanes are read of a wide band where a quick picture will do.
const quickPlanes = 16

// band adds up channels from..to. Where quick, and sums of groups are not there yet, some
// planes stand for all. It gives the number of planes that were added.
func (v *Viewer) band(ctx context.Context, from, to int, scaled, quick bool) (*bandSums, int, error) {
	s := newBandSums(v.schema.Elements * v.schema.Rows)
	reader := v.images.newReader(scaled)
	n := to - from + 1
	sums := v.sums.Load()
	if sums == nil && quick && n > quickPlanes {
		for i := range quickPlanes {
			if _, _, err := reader.add(ctx, s, from+(2*i+1)*n/(2*quickPlanes)); err != nil {
				return nil, 0, err
			}
		}
		return s, quickPlanes, nil
	}
	for l := from; l <= to; {
		if sums != nil && l%groupPlanes == 0 && min(l+groupPlanes, v.schema.Grid.Count) <= to+1 {
			if err := ctx.Err(); err != nil {
				return nil, 0, err
			}
			if err := v.addGroup(sums, s, l/groupPlanes, scaled); err != nil {
				return nil, 0, err
			}
			l += groupPlanes
			continue
		}
		if _, _, err := reader.add(ctx, s, l); err != nil {
			return nil, 0, err
		}
		l++
	}
	return s, n, nil
}
