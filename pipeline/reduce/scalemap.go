package reduce

import "mirrorloom/pipeline/product"

// scaleColumns and scaleRows are the size of the map of the error scale in run.json.
const (
	scaleColumns = 24
	scaleRows    = 16
)

// rowScale is what a row adds to the figures of the error scale, over the columns where
// it is measured.
type rowScale struct {
	all     scaleSum
	most    float64
	applied int
	coarse  [scaleColumns]scaleSum
}

type scaleSum struct {
	sum float64
	n   int
}

func (s *scaleSum) add(o scaleSum) {
	s.sum += o.sum
	s.n += o.n
}

func newRowScale(row *decodedRow) rowScale {
	var r rowScale
	for x, q := range row.scale {
		if row.measured[x] == unmeasured {
			continue
		}
		one := scaleSum{float64(q), 1}
		r.all.add(one)
		r.coarse[x*scaleColumns/len(row.scale)].add(one)
		r.most = max(r.most, one.sum)
		if row.applied[x] != 1 || row.coherent[x] != 0 {
			r.applied++
		}
	}
	return r
}

// errorScale sums up the rows in order; nil where nothing was measured.
func errorScale(rows []rowQuality) *product.ErrorScale {
	var all rowScale
	var coarse [scaleRows][scaleColumns]scaleSum
	for y, r := range rows {
		all.all.add(r.scale.all)
		all.applied += r.scale.applied
		all.most = max(all.most, r.scale.most)
		for i, c := range r.scale.coarse {
			coarse[y*scaleRows/len(rows)][i].add(c)
		}
	}
	if all.all.n == 0 {
		return nil
	}
	n := float64(all.all.n)
	out := &product.ErrorScale{Mean: all.all.sum / n, Max: all.most, Applied: float64(all.applied) / n}
	for _, row := range coarse {
		line := make([]*float64, scaleColumns)
		for i, c := range row {
			if c.n > 0 {
				mean := c.sum / float64(c.n)
				line[i] = &mean
			}
		}
		out.Map = append(out.Map, line)
	}
	return out
}
