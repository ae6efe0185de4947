package register

import "slices"

// PictureRow is a row of a Picture before Finish: the sums over the good voxels of each
// element's place, and their number.
type PictureRow struct {
	Light, Variance []float64
	Count           []int
}

// Row copies a row.
func (p *Picture) Row(row int) PictureRow {
	from, to := row*p.Elements, (row+1)*p.Elements
	return PictureRow{
		Light: slices.Clone(p.Light[from:to]), Variance: slices.Clone(p.Variance[from:to]), Count: slices.Clone(p.count[from:to]),
	}
}

// Fits tells a row of so many elements.
func (r *PictureRow) Fits(elements int) bool {
	return len(r.Light) == elements && len(r.Variance) == elements && len(r.Count) == elements
}

// SetRow puts a row that fits in the place of what is there.
func (p *Picture) SetRow(row int, r PictureRow) {
	from := row * p.Elements
	copy(p.Light[from:], r.Light)
	copy(p.Variance[from:], r.Variance)
	copy(p.count[from:], r.Count)
}
