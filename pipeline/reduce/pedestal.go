package reduce

// pedestalWidth is over how many columns of a row the mean of the dark decodes is
// averaged where it stands for the light of all-off frames: leaking light has the
// smoothness of a spectrum, and the mean's own variance falls to 1/(width g) of an
// element's. Where the light of mirrors stuck on lands, which may have lines, it is not.
const pedestalWidth = 7

// takePedestal subtracts from a row's elements, and its planes of the element cube if
// there are any, the mean of the dark decodes: light that is the same in all frames
// decodes to 1/k of itself in every column.
func (d *decoder) takePedestal(row *decodedRow, s *strip) {
	if d.repair == nil || !d.repair.pedestal || len(d.scale.lost) > 0 && !d.repair.restores() {
		return
	}
	reach := pedestalWidth / 2
	if d.shines != nil && d.shines(row.y) {
		reach = 0 // it has lines
	}
	level := row.level
	for x := range level {
		sum, n := float32(0), 0
		for near := max(0, x-reach); near <= min(len(level)-1, x+reach); near++ {
			if row.measured[near] != unmeasured {
				sum += row.pedestal[near]
				n++
			}
		}
		level[x] = sum / float32(max(1, n))
		if n > 0 {
			added := row.expected[x] / float32(n*len(d.darkColumns))
			row.common[x] += added
			for _, v := range row.variance {
				v[x] += added
			}
		}
	}
	for _, signal := range row.signal {
		for x, v := range level {
			signal[x] -= v
		}
	}
	if s.planes == nil {
		return
	}
	at := (row.y - s.y0) * s.columns
	for _, plane := range s.planes.signal {
		for x, v := range level {
			plane[at+x] -= v
		}
	}
	if len(s.planes.variance) == len(row.variance) {
		for i, plane := range s.planes.variance {
			copy(plane[at:at+s.columns], row.variance[i])
		}
	}
}
