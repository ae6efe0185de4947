package product

import (
	"fmt"
	"math"
	"strings"

	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
)

// ReadSchema reads what Schema.Header has written to an image of a cube with these axes,
// in FITS order. The errors name the file and the card.
func ReadSchema(h *fitsutil.Header, axes []int) (Schema, error) {
	if len(axes) != 3 {
		return Schema{}, fmt.Errorf("the image has %d axes where a cube has 3; give a cube.fits", len(axes))
	}
	r := wcsReader{header: h}
	s := Schema{Elements: axes[0], Rows: axes[1], RADeg: r.number("CRVAL1"), DecDeg: r.number("CRVAL2")}
	s.ElementShift = r.number("CRPIX1") - float64(s.Elements+1)/2
	s.RowCenter = r.number("CRPIX2") - 1
	s.readCD([2][2]float64{{r.number("CD1_1"), r.number("CD1_2")}, {r.number("CD2_1"), r.number("CD2_2")}})
	s.Grid = instrument.Grid{FirstNM: r.number("CRVAL3"), StepNM: r.number("CD3_3"), Count: axes[2]}
	r.demand("CTYPE1", "RA---TAN")
	r.demand("CTYPE2", "DEC--TAN")
	r.demand("CUNIT3", "nm")
	if r.err == nil && r.number("CRPIX3") != 1 {
		r.err = fmt.Errorf("card CRPIX3 is not 1, as in a cube.fits; make the cube again with reduce")
	}
	r.spectral(&s)
	if h.Has("OBJECT") {
		s.Object = r.text("OBJECT")
	}
	if r.err == nil && !(s.C1Deg > 0 && s.C2Deg > 0) {
		r.err = fmt.Errorf("the CD matrix is singular; make the cube again with reduce")
	}
	return s, r.err
}

// readCD reads steps, position angle and parity: see Schema.wcs.
func (s *Schema) readCD(cd [2][2]float64) {
	s.C1Deg, s.C2Deg = math.Hypot(cd[0][0], cd[1][0]), math.Hypot(cd[0][1], cd[1][1])
	s.RotangDeg = math.Atan2(cd[0][1], cd[1][1]) * 180 / math.Pi
	s.Parity = 1
	if cd[0][0]*cd[1][1]-cd[0][1]*cd[1][0] > 0 {
		s.Parity = -1
	}
}

// wcsReader reads cards and keeps the first error.
type wcsReader struct {
	header *fitsutil.Header
	err    error
}

func (r *wcsReader) number(key string) (x float64) {
	if r.err == nil {
		x, r.err = r.header.Float(key)
	}
	return x
}

func (r *wcsReader) text(key string) (x string) {
	if r.err == nil {
		x, r.err = r.header.Str(key)
	}
	return x
}

func (r *wcsReader) demand(key, want string) {
	if have := r.text(key); r.err == nil && have != want {
		r.err = fmt.Errorf("card %s is %q where a cube.fits has %q; make the cube again with reduce", key, have, want)
	}
}

// spectral reads kind and spacing of the wavelengths, and their frame.
func (r *wcsReader) spectral(s *Schema) {
	kind := r.text("CTYPE3")
	if name, found := strings.CutSuffix(kind, "-LOG"); found {
		kind, s.Grid.Spacing = name, instrument.Logarithmic
	}
	switch kind {
	case "AWAV":
		s.Grid.Axis = instrument.Air
	default:
		if r.err == nil && kind != "WAVE" {
			r.err = fmt.Errorf("card CTYPE3 is %q where a cube.fits has WAVE or AWAV, or either with -LOG; make the cube again with reduce", kind)
		}
	}
	s.Frame.Name = FrameName(r.text("SPECSYS"))
	if r.err == nil && s.Frame.Name != Topocentric {
		s.Frame.Factor = 1 / physics.DopplerFactor(r.number("VELOSYS")/1000)
	}
}
