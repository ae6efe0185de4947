package product

import "mirrorloom/fitsutil"

// geometryCards are the parameters of the geometry on the cards of DISPERSION, in
// the order of calib.Geometry.Parameters.
var geometryCards = []struct{ key, comment string }{
	{"GEOMXC", "x = XC + XE (j - JC) + D1 l + D2 l^2 + D3 l^3"},
	{"GEOMYC", "    + SLIT q + SMIL q^2, q = y - YC, px from 0"},
	{"GEOMXE", "px per element"},
	{"GEOMJC", "element at XC, from 0"},
	{"GEOMLC", "l = vacuum nm - LC"},
	{"GEOMD1", "px/nm"},
	{"GEOMD2", "px/nm2"},
	{"GEOMD3", "px/nm3"},
	{"GEOMSLIT", "slit tilt, px/px"},
	{"GEOMSMIL", "smile, 1/px"},
	{"GEOMTILT", "trace: y = row + TILT (x-XC) + CURV (x-XC)^2"},
	{"GEOMCURV", "1/px"},
}

// SetGeometry writes the parameters of a calib.Geometry to a header.
func SetGeometry(h *fitsutil.Header, parameters []*float64) error {
	for i, c := range geometryCards {
		if err := h.Set(c.key, *parameters[i], c.comment); err != nil {
			return err
		}
	}
	return nil
}

// ReadGeometry reads them back from the header of DISPERSION.
func ReadGeometry(h *fitsutil.Header, parameters []*float64) (err error) {
	for i, c := range geometryCards {
		if *parameters[i], err = h.Float(c.key); err != nil {
			return err
		}
	}
	return nil
}
