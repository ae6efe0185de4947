package skyflux

import (
	"context"
	"fmt"
	"math"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// StarPlace says where a cube shows the reference star: at a position, ICRS degrees, or
// the brightest there is; and within what radius its light is added up, 0 for
// apertureFWHM widths of the star.
type StarPlace struct {
	RADeg, DecDeg *float64
	RadiusArcsec  float64
}

const (
	// apertureFWHM widths hold all but 1e-7 of a Gaussian's light, and leave half a width
	// for a centre that moves with wavelength.
	apertureFWHM = 2.5
	// searchArcsec around a position is where the star is looked for.
	searchArcsec = 4
	// guessFWHMArcsec begins the fit of the star's width.
	guessFWHMArcsec = 1.2
	// innerRows at both ends of the slit are left out where it is not known what they see.
	innerRows = 6
	// starBlocks of wavelengths have a place and a width of the star each.
	starBlocks = 8
	// surePlace is the largest error of a block's place, element and row, that is taken.
	surePlace = 0.05
	// lossError is the relative error of what is taken to be lost outside the aperture or the
	// slit: the wings of true seeing are not those of a Gaussian.
	lossError = 0.25

	arcsecPerDeg = 3600
	fwhmPerSigma = 2.3548200450309493 // 2 sqrt(2 ln 2)
)

// Star is a reference star as it was seen, by voxel.
type Star struct {
	// Edges of the voxels, nm at the telescope, one more than the rest. Counts are those of
	// one exposure, less the sky; Fraction is the part of the star's light that they hold, 0
	// where too little is good.
	Edges, Counts, Variance, Fraction []float64
	// LossError is the relative error of what is lost.
	LossError    float64
	Element, Row float64
	FWHMArcsec   float64
	RadiusArcsec float64
	// PlaceError is that of Element where it decides on wavelengths, which PlaceMeasured
	// says were not only assumed; Misplaced what it does to the counts, relative, by voxel.
	PlaceError    float64
	PlaceMeasured bool
	Misplaced     []float64
	// FrameError is the relative error of all counts alike, of exposures that differ.
	FrameError float64
}

// shared is the relative variance of a voxel's counts that its neighbours share.
func (s *Star) shared(l int) float64 {
	v := s.FrameError * s.FrameError
	if s.Misplaced != nil {
		v += s.Misplaced[l] * s.Misplaced[l]
	}
	return v
}

// WhereStar checks that a star's place lies in a cube.
func WhereStar(path string, s product.Schema, at StarPlace) (element, row float64, err error) {
	if at.RADeg == nil {
		return math.NaN(), math.NaN(), nil
	}
	inside := func(ra float64) bool {
		element, row = s.PlaceOf(ra, *at.DecDeg)
		return element > -0.5 && element < float64(s.Elements)-0.5 && row > -0.5 && row < float64(s.Rows)-0.5
	}
	if inside(*at.RADeg) {
		return element, row, nil
	}
	hint := "give the star's position in degrees, or leave it out to take the brightest star"
	if inside(15 * *at.RADeg) {
		hint = fmt.Sprintf("%.6g looks like hours: write ra_deg: %.6g", *at.RADeg, 15**at.RADeg)
	}
	return 0, 0, fmt.Errorf("flux.ra_deg, flux.dec_deg: the star at %.6g %+.6g does not lie in %s, whose field is centred on %.6g %+.6g (degrees); %s", *at.RADeg, *at.DecDeg, path, s.RADeg, s.DecDeg, hint)
}

// MeasureStar adds up the light of a star. sky is what is to be taken off, nil for a cube
// from which it was. Errors say what is wrong and the cure.
func (s *Source) MeasureStar(ctx context.Context, at StarPlace, sky *Sky, o Options) (*Star, error) {
	o.setDefaults()
	schema, err := s.Schema()
	if err != nil {
		return nil, err
	}
	c, err := s.findStar(ctx, schema, at, o)
	if err != nil {
		return nil, err
	}
	stepE, stepR := schema.C1Deg*arcsecPerDeg, schema.C2Deg*arcsecPerDeg
	star := &Star{Element: c.Element, Row: c.Row, FWHMArcsec: fwhmPerSigma * math.Sqrt(c.ElementSigma*stepE*c.RowSigma*stepR), RadiusArcsec: at.RadiusArcsec, LossError: lossError}
	if star.RadiusArcsec == 0 {
		star.RadiusArcsec = apertureFWHM * star.FWHMArcsec
	}
	w, err := s.readWindow(ctx, c, star.RadiusArcsec/stepE, star.RadiusArcsec/stepR, sky)
	if err != nil {
		return nil, err
	}
	axis := schema.Axis()
	for l := range s.Voxels + 1 {
		star.Edges = append(star.Edges, axis.ObservedNM(float64(l)-0.5))
	}
	star.addUp(w, w.track(c), sky, s.correlation(schema, c))
	return star, nil
}

// findStar fits the star in white light.
func (s *Source) findStar(ctx context.Context, schema product.Schema, at StarPlace, o Options) (*calib.Centroid, error) {
	element, row, err := WhereStar(s.file.Path(), schema, at)
	if err != nil {
		return nil, err
	}
	seen, err := s.lookAt(ctx, calib.DefaultSkyRule(), nil, func(done, total int) { o.Progress("look", done, total) })
	if err != nil {
		return nil, err
	}
	stepE, stepR := schema.C1Deg*arcsecPerDeg, schema.C2Deg*arcsecPerDeg
	sigmaE, sigmaR := max(0.4, guessFWHMArcsec/fwhmPerSigma/stepE), max(0.4, guessFWHMArcsec/fwhmPerSigma/stepR)
	reachE, reachR := int(math.Ceil(searchArcsec/stepE)), int(math.Ceil(searchArcsec/stepR))
	if math.IsNaN(element) {
		element, row = brightest(seen.picture, seen.variance, s.Elements)
	}
	c, err := calib.FitCentroid(seen.picture, seen.variance, s.Elements, element, row, sigmaE, sigmaR, reachE, reachR)
	if err != nil {
		return nil, fmt.Errorf("%s: the reference star: %w", s.file.Path(), err)
	}
	return c, nil
}

// brightest is the middle of the brightest square of three places.
func brightest(picture, variance []float64, elements int) (element, row float64) {
	best := math.Inf(-1)
	rows := len(picture) / elements
	for y := 1; y+1 < rows; y++ {
		for j := 1; j+1 < elements; j++ {
			sum := 0.0
			for a := y - 1; a <= y+1; a++ {
				for b := j - 1; b <= j+1; b++ {
					if variance[a*elements+b] > 0 {
						sum += picture[a*elements+b]
					}
				}
			}
			if variance[y*elements+j] > 0 && sum > best {
				best, element, row = sum, float64(j), float64(y)
			}
		}
	}
	return element, row
}

// correlation is by how much the variance of a sum over voxels is above that of the voxels,
// for they share pixels; 1 where the cube does not tell.
func (s *Source) correlation(schema product.Schema, c *calib.Centroid) float64 {
	pixels, err := s.file.ImageNamed(product.PixelVariance)
	if err != nil {
		return 1
	}
	var g calib.Geometry
	found := false
	for _, u := range s.file.HDUs() {
		if u.Kind == fitsutil.BinTableHDU && u.Name == product.Dispersion {
			found = product.ReadGeometry(u.Header, g.Parameters()) == nil
		}
	}
	if !found {
		return 1
	}
	shift := make([]float64, pixels.Width())
	for x := range shift {
		shift[x] = g.TraceShift(float64(x))
	}
	rows, err := calib.NewRowShift(shift, s.Rows)
	if err != nil {
		return 1
	}
	columns, err := calib.NewResampler(0, pixels.Width()-1)
	if err != nil {
		return 1
	}
	edges, axis := make([]float64, s.Voxels+1), schema.Axis()
	nm := make([]float64, len(edges))
	for l := range nm {
		nm[l] = axis.ObservedNM(float64(l) - 0.5)
	}
	g.EdgesXAt(edges, c.Element, c.Row, nm)
	along, across := calib.Correlation(rows, columns, edges, int(math.Round(c.Row)))
	if product := along * across; product >= 1 {
		return product
	}
	return 1
}
