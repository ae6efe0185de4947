package rehearse

import (
	"math"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
)

// field maps the sky on the mirrors and knows which mirrors there are.
type field struct {
	columns, rows int
	diagonal      bool
	// arcsecPerMirror is the side of a mirror, arcsecPerU the distance of
	// neighbouring u or w.
	arcsecPerMirror, arcsecPerU float64
	uMiddle, wMiddle            float64
	// sin and cos are those of ROTANG; parity is 1 or -1.
	sin, cos, parity float64
}

func newField(seq *sequence.Sequence) *field {
	p := seq.Profile
	sin, cos := math.Sincos(seq.Target.RotangDeg * math.Pi / 180)
	return &field{
		columns: p.DMD.Columns, rows: p.DMD.Rows, diagonal: p.DMD.Mounting == instrument.Diagonal,
		arcsecPerMirror: p.DMD.ArcsecPerMirror, arcsecPerU: p.ArcsecPerU(),
		uMiddle: seq.FieldCenterU(), wMiddle: p.WCenter(),
		sin: sin, cos: cos, parity: float64(p.DMD.Parity),
	}
}

// mirror gives the device's column and row of (u, w); ok is false where there
// is no mirror.
func (f *field) mirror(u, w int) (column, row int, ok bool) {
	column, row = u, w
	if f.diagonal {
		if (u-w)&1 != 0 {
			return 0, 0, false
		}
		column, row = (u-w)/2, (u+w)/2
	}
	return column, row, column >= 0 && column < f.columns && row >= 0 && row < f.rows
}

// along gives the arc seconds along +u and +w, from the field's centre, of an
// offset on the sky: +w lies at the position angle ROTANG, and +u a quarter turn
// from it, to the west of north where parity is 1 and ROTANG 0.
func (f *field) along(east, north float64) (u, w float64) {
	u = f.parity * (-east*f.cos + north*f.sin)
	w = east*f.sin + north*f.cos
	return u, w
}

// sky inverts along.
func (f *field) sky(u, w float64) (east, north float64) {
	u *= f.parity
	return -u*f.cos + w*f.sin, u*f.sin + w*f.cos
}

// device turns arc seconds along +u and +w into the device's columns and rows,
// mirror centres whole numbers.
func (f *field) device(u, w float64) (column, row float64) {
	u = f.uMiddle + u/f.arcsecPerU
	w = f.wMiddle + w/f.arcsecPerU
	if f.diagonal {
		return (u - w) / 2, (u + w) / 2
	}
	return u, w
}

// mirrorsAlong is how many of the device's columns and rows an arc second towards a
// direction on the sky is.
func (f *field) mirrorsAlong(east, north float64) (columns, rows float64) {
	u, w := f.along(east, north)
	u, w = u/f.arcsecPerU, w/f.arcsecPerU
	if f.diagonal {
		return (u - w) / 2, (u + w) / 2
	}
	return u, w
}

// skyOf is the place on the sky of the centre of mirror (u, w).
func (f *field) skyOf(u, w int) (east, north float64) {
	return f.sky((float64(u)-f.uMiddle)*f.arcsecPerU, (float64(w)-f.wMiddle)*f.arcsecPerU)
}
