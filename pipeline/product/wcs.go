package product

import (
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
)

// wcs gives the world coordinates of the cube: gnomonic sky coordinates and an
// axis of wavelengths (FITS Standard 4.0, sections 8.3 and 8.4; Greisen et al. 2006,
// A&A 446, 747), WAVE in vacuum or AWAV in air, linear or logarithmic (-LOG):
//
//	wavelength = CRVAL3 + CD3_3 (p - 1)   or   CRVAL3 exp(CD3_3 (p - 1) / CRVAL3).
//
//	CD = | -p c1 cos t   c2 sin t   0    |     p = parity (+1 or -1)
//	     |  p c1 sin t   c2 cos t   0    |     t = ROTANG, the position angle of +axis 2
//	     |  0            0          step |
//
// The steps c1 and c2 differ in general: voxels are not square.
func (s Schema) wcs() []card {
	sin, cos := math.Sincos(s.RotangDeg * math.Pi / 180)
	parity := s.parity()
	cards := []card{
		{"WCSAXES", 3, "world coordinate axes"},
		{"CTYPE1", "RA---TAN", "right ascension, gnomonic"},
		{"CTYPE2", "DEC--TAN", "declination, gnomonic"},
		{"CTYPE3", spectralType(s.Grid), spectralWords(s.Grid)},
		{"CUNIT1", "deg", ""},
		{"CUNIT2", "deg", ""},
		{"CUNIT3", "nm", ""},
		{"CRPIX1", s.centre() + 1, s.centreWords()},
		{"CRPIX2", s.RowCenter + 1, "detector row y_c"},
		{"CRPIX3", 1.0, ""},
		{"CRVAL1", s.RADeg, "RA of the field's centre"},
		{"CRVAL2", s.DecDeg, "Dec of the field's centre"},
		{"CRVAL3", s.Grid.FirstNM, "wavelength of the first voxel"},
		{"CD1_1", plus(-parity * s.C1Deg * cos), ""},
		{"CD1_2", plus(s.C2Deg * sin), ""},
		{"CD2_1", plus(parity * s.C1Deg * sin), ""},
		{"CD2_2", plus(s.C2Deg * cos), ""},
		{"CD3_3", s.Grid.StepNM, "wavelength step at the first voxel"},
		{"RADESYS", "ICRS", ""},
	}
	return append(cards, s.Frame.cards()...)
}

// PlaceCards are the values of the cards by which images tell where on the sky they lie.
func (s Schema) PlaceCards() []fitsutil.Card {
	var cards []fitsutil.Card
	for _, c := range s.wcs() {
		switch c.key {
		case "CRVAL1", "CRVAL2", "CD1_1", "CD1_2", "CD2_1", "CD2_2":
			cards = append(cards, fitsutil.Card{Key: c.key, Value: c.value, Comment: c.comment})
		}
	}
	return cards
}

// spectralType is CTYPE3 of a grid.
func spectralType(g instrument.Grid) string {
	name := "WAVE"
	if g.Axis == instrument.Air {
		name = "AWAV"
	}
	if g.Spacing == instrument.Logarithmic {
		name += "-LOG"
	}
	return name
}

func spectralWords(g instrument.Grid) string {
	words := "wavelength in vacuum"
	if g.Axis == instrument.Air {
		words = "wavelength in standard air"
	}
	if g.Spacing == instrument.Logarithmic {
		words += ", logarithmic"
	}
	return words
}

// centre is the element, from 0, at RADeg and DecDeg.
func (s Schema) centre() float64 { return float64(s.Elements-1)/2 + s.ElementShift }

func (s Schema) centreWords() string {
	if s.ElementShift != 0 {
		return "element of the field's centre"
	}
	return "middle of the elements"
}

// plus turns a negative zero into zero, which a header should not show.
func plus(x float64) float64 { return x + 0 }
