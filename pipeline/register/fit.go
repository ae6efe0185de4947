package register

import (
	"fmt"
	"math"

	"mirrorloom/calib"
	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/product"
)

// The corrections, as a recipe names them.
const (
	Pointing   = "pointing"
	Similarity = "similarity"
)

// Rule says what is corrected and how far off it may be.
type Rule struct {
	Fit string
	// SearchArcsec is how far the pointing may be off; a similarity looks everywhere.
	SearchArcsec float64
}

const (
	// DefaultSearchArcsec suits a telescope that points within some arc seconds.
	DefaultSearchArcsec = 5
	// scaleOff is by how much a similarity's scale may differ from the profile's.
	scaleOff = 0.1
	// matchVoxels and matchArcsec bound the distance of a star from its peak, by a map
	// that two stars fixed.
	matchVoxels, matchArcsec = 0.7, 0.6
	// outlierSigmas of its errors, or of the scatter, make a star a wrong one.
	outlierSigmas = 4
)

// Solution is what was found.
type Solution struct {
	// Schema is the cube's with the corrected place on the sky.
	Schema product.Schema
	Report product.Stars
	// matches are the stars that were used, by u and w.
	matches []calib.StarMatch
}

// Solve finds listed stars in a finished picture of the cube and corrects its place on the
// sky. An error says in words why that cannot be done.
func Solve(p *Picture, s product.Schema, stars []Star, file string, rule Rule) (*Solution, error) {
	m := &matcher{schema: s, search: rule.SearchArcsec, scale: scaleOff}
	c1, c2 := 3600*s.C1Deg, 3600*s.C2Deg
	m.tolerance = max(matchArcsec, matchVoxels*max(c1, c2))
	m.peaks = newPeaks(p.peaks(c1, c2), s)
	f := &fitting{matcher: m, rule: rule, all: stars}
	f.report = product.Stars{File: file, Fit: rule.Fit, Listed: len(stars), Stars: []product.StarFound{}}
	f.listStars()
	if err := f.match(); err != nil {
		return nil, err
	}
	return f.solve()
}

type fitting struct {
	*matcher
	rule   Rule
	all    []Star
	report product.Stars
	found  [][2]int // pairs of star, in matcher.stars, and peak
}

// listStars puts the stars that may be in the field into the matcher.
func (f *fitting) listStars() {
	margin := f.search
	if f.rule.Fit == Similarity {
		// The field may be turned by any angle.
		margin = 3600 * math.Hypot(float64(f.schema.Elements)*f.schema.C1Deg, float64(f.schema.Rows)*f.schema.C2Deg)
	}
	for i, s := range f.all {
		found := product.StarFound{Name: s.Name}
		if beyond(f.schema, s.RADeg, s.DecDeg) <= margin {
			e, n := physics.Gnomonic(s.RADeg, s.DecDeg, f.schema.RADeg, f.schema.DecDeg)
			f.stars = append(f.stars, listed{i, e, n})
			found.Why = "no star of enough light was found there"
		} else {
			found.Why = "it lies outside the field"
		}
		f.report.Stars = append(f.report.Stars, found)
	}
	f.report.InField = len(f.stars)
}

// fewestOf a fit: for a similarity, whose parity is free, one more than fix it and another
// that bears it out.
func (r Rule) fewest() int {
	if r.Fit == Similarity {
		return 4
	}
	return 1
}

func (f *fitting) match() error {
	if len(f.stars) == 0 {
		return fmt.Errorf("no listed star lies in the field; list stars of this field")
	}
	if len(f.peaks) == 0 {
		return fmt.Errorf("no star is bright enough in the white light of the field; expose longer or list no stars")
	}
	look := f.pointing
	if f.rule.Fit == Similarity {
		look = f.turned
	}
	f.found = f.pairs(look())
	if n, need := len(f.found), f.rule.fewest(); n < need {
		return fmt.Errorf("%d of the %d listed stars in the field are found among the %d stars seen, where a %s takes %d; check the list, or let `search_arcsec` be larger", n, len(f.stars), len(f.peaks), f.rule.Fit, need)
	}
	return nil
}

// solve fits the map and describes it.
func (f *fitting) solve() (*Solution, error) {
	rule := calib.MapRule{Kind: calib.Shift, Sigmas: outlierSigmas, Parity: f.schema.Parity}
	switch {
	case f.rule.Fit == Similarity:
		rule.Kind, rule.Parity = calib.Similarity, 0
	case len(f.found) >= 3: // a turn by two stars has no check
		rule.Kind = calib.Pointing
	}
	matches := f.matches(rule.Kind)
	fit, err := calib.FitPlaneMap(matches, rule)
	if err != nil {
		return nil, err
	}
	if fit.Used < f.rule.fewest() {
		return nil, fmt.Errorf("of the %d listed stars that are found %d agree on a map, where a %s takes %d; check the list", len(f.found), fit.Used, f.rule.Fit, f.rule.fewest())
	}
	out := &Solution{Schema: f.corrected(fit, rule.Kind), Report: f.report}
	for i, m := range f.matches(calib.Similarity) {
		if fit.Residuals[i].Used {
			out.matches = append(out.matches, m)
		}
	}
	f.describe(out, fit, rule.Kind)
	return out, nil
}

// matches are the found stars for a fit: see calib.MapKind for what U and W are.
func (f *fitting) matches(kind calib.MapKind) []calib.StarMatch {
	var all []calib.StarMatch
	for _, pair := range f.found {
		s, p := f.stars[pair[0]], f.peaks[pair[1]]
		m := calib.StarMatch{U: p.u, W: p.w, East: s.east, North: s.north, Sigma: p.sigma}
		if kind == calib.Shift || kind == calib.Pointing {
			m.U, m.W = f.nominal().At(p.u, p.w)
		}
		all = append(all, m)
	}
	return all
}

// corrected is the schema with the map of a fit.
func (f *fitting) corrected(fit *calib.MapFit, kind calib.MapKind) product.Schema {
	s := f.schema
	at := func(u, w float64) (east, north float64) {
		if kind == calib.Shift || kind == calib.Pointing {
			u, w = f.nominal().At(u, w)
		}
		return fit.Map.At(u, w)
	}
	shape := calib.PlaneMap{}
	e0, n0 := at(0, 0)
	eu, nu := at(1, 0)
	ew, nw := at(0, 1)
	shape.East, shape.North = [3]float64{e0, eu - e0, ew - e0}, [3]float64{n0, nu - n0, nw - n0}
	if kind == calib.Similarity {
		known := shape.Shape()
		s.C1Deg *= known.ScaleU
		s.C2Deg *= known.ScaleW
		s.Parity = known.Parity
	}
	// North at the new middle is not quite north at the old one: the direction of the
	// second axis is taken there.
	s.RADeg, s.DecDeg = physics.FromGnomonic(e0, n0, f.schema.RADeg, f.schema.DecDeg)
	ra, dec := physics.FromGnomonic(ew, nw, f.schema.RADeg, f.schema.DecDeg)
	east, north := physics.Gnomonic(ra, dec, s.RADeg, s.DecDeg)
	s.RotangDeg = f.schema.RotangDeg + math.Remainder(math.Atan2(east, north)*180/math.Pi-f.schema.RotangDeg, 360)
	return s
}

// describe fills the report.
func (f *fitting) describe(out *Solution, fit *calib.MapFit, kind calib.MapKind) {
	r, s := &out.Report, out.Schema
	sigma := func(k int) float64 { return math.Sqrt(fit.Covariance.At(k, k)) }
	r.Used, r.RMSArcsec = fit.Used, fit.RMS
	if !math.IsNaN(fit.Chi2) {
		chi2 := fit.Chi2
		r.Chi2 = &chi2
	}
	r.East.Value, r.North.Value = physics.Gnomonic(s.RADeg, s.DecDeg, f.schema.RADeg, f.schema.DecDeg)
	r.East.Error, r.North.Error = sigma(0), sigma(1)
	r.Turn.Value = s.RotangDeg - f.schema.RotangDeg
	r.Scale, r.Parity = product.Measured{Value: 1}, s.Parity
	switch kind {
	case calib.Pointing:
		r.Turn.Error = sigma(2) * 180 / math.Pi
	case calib.Similarity:
		// Of a and b, scale times cosine and sine of the angle: both errors are the same.
		scale := s.C2Deg / f.schema.C2Deg
		r.Scale = product.Measured{Value: scale, Error: sigma(2)}
		r.Turn.Error = sigma(3) / scale * 180 / math.Pi
	}
	for i, pair := range f.found {
		p, miss := f.peaks[pair[1]], fit.Residuals[i]
		found := &r.Stars[f.stars[pair[0]].star]
		found.Used, found.Why = miss.Used, ""
		if !miss.Used {
			found.Why = "it does not lie where the others say"
		}
		element, row, east, north := p.Element, p.Row, miss.East, miss.North
		found.Element, found.Row, found.East, found.North = &element, &row, &east, &north
	}
}
