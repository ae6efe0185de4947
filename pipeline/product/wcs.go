package product

import "math"

// wcs gives the world coordinates of the cube: gnomonic sky coordinates and a
// linear axis of vacuum wavelength (FITS Standard 4.0, sections 8.3 and 8.4).
//
//	CD = | -p c1 cos t   c2 sin t   0    |     p = parity (+1 or -1)
//	     |  p c1 sin t   c2 cos t   0    |     t = ROTANG, the position angle of +axis 2
//	     |  0            0          step |
//
// The steps c1 and c2 differ in general: voxels are not square.
func (s Schema) wcs() []card {
	sin, cos := math.Sincos(s.RotangDeg * math.Pi / 180)
	parity := 1.0
	if s.Parity < 0 {
		parity = -1
	}
	return []card{
		{"WCSAXES", 3, "world coordinate axes"},
		{"CTYPE1", "RA---TAN", "right ascension, gnomonic"},
		{"CTYPE2", "DEC--TAN", "declination, gnomonic"},
		{"CTYPE3", "WAVE", "wavelength in vacuum"},
		{"CUNIT1", "deg", ""},
		{"CUNIT2", "deg", ""},
		{"CUNIT3", "nm", ""},
		{"CRPIX1", float64(s.Elements+1) / 2, "middle of the elements"},
		{"CRPIX2", s.RowCenter + 1, "detector row y_c"},
		{"CRPIX3", 1.0, ""},
		{"CRVAL1", s.RADeg, "RA of the field's centre"},
		{"CRVAL2", s.DecDeg, "Dec of the field's centre"},
		{"CRVAL3", s.Grid.FirstNM, "vacuum wavelength of the first voxel"},
		{"CD1_1", plus(-parity * s.C1Deg * cos), ""},
		{"CD1_2", plus(s.C2Deg * sin), ""},
		{"CD2_1", plus(parity * s.C1Deg * sin), ""},
		{"CD2_2", plus(s.C2Deg * cos), ""},
		{"CD3_3", s.Grid.StepNM, "wavelength step"},
		{"RADESYS", "ICRS", ""},
		{"SPECSYS", "TOPOCENT", "wavelengths as observed"},
	}
}

// plus turns a negative zero into zero, which a header should not show.
func plus(x float64) float64 { return x + 0 }
