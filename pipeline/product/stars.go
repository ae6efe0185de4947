package product

// Stars is what listed stars told of the cube's place on the sky, in run.json.
type Stars struct {
	File string `json:"file"`
	// Fit is what was corrected: pointing or similarity.
	Fit string `json:"fit"`
	// Listed stars, those of them in the field, and those that were found and used.
	Listed  int `json:"listed"`
	InField int `json:"in_field"`
	Used    int `json:"used"`
	// East and North are by how much the field's middle lies from where the telescope was
	// asked to point, Turn by how much the position angle of the second axis is above the
	// one that was asked for; arc seconds and degrees.
	East  Measured `json:"east_arcsec"`
	North Measured `json:"north_arcsec"`
	Turn  Measured `json:"turn_deg"`
	// Scale is the voxels' side over that of the profile, Parity the field's; of a pointing
	// they are 1 and the profile's.
	Scale  Measured `json:"scale"`
	Parity int      `json:"parity"`
	// RMSArcsec is that of a coordinate of the stars used, Chi2 per degree of freedom, null
	// without one.
	RMSArcsec float64     `json:"rms_arcsec"`
	Chi2      *float64    `json:"chi2"`
	Stars     []StarFound `json:"stars"`
}

// StarFound is a listed star.
type StarFound struct {
	Name string `json:"name"`
	// Used tells whether it counted; Why what kept it from it.
	Used bool   `json:"used"`
	Why  string `json:"why,omitempty"`
	// Element and Row are where it was found, from 0, East and North its place less that
	// of the corrected coordinates, arc seconds; null where it was not found.
	Element *float64 `json:"element"`
	Row     *float64 `json:"row"`
	East    *float64 `json:"east_arcsec"`
	North   *float64 `json:"north_arcsec"`
}
