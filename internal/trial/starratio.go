package trial

import (
	"math"

	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/rehearse"
)

// BandRatio is the flux of a star in a band over the true one, with its standard error.
type BandRatio struct {
	FromNM, ToNM  float64
	Ratio, Error  float64
	Element, Row  float64 // centre of light less the star's true place
	CentroidError float64
}

// StarRatios compares a star in a calibrated cube with its true flux, in so many bands of
// equal width: the sum over good voxels within a radius, arc seconds.
func (n *Night) StarRatios(c *Cube, s *rehearse.Source, bands int, radiusArcsec float64) []BandRatio {
	schema := product.NewSchema(n.Seq)
	e0, r0 := schema.Place(s.EastArcsec, s.NorthArcsec)
	c1, c2 := schema.C1Deg*3600, schema.C2Deg*3600
	var out []BandRatio
	for b := range bands {
		from, to := b*c.Voxels/bands, (b+1)*c.Voxels/bands
		band := BandRatio{FromNM: schema.Grid.WavelengthNM(float64(from) - 0.5), ToNM: schema.Grid.WavelengthNM(float64(to) - 0.5)}
		sum, variance, want, ve, vr := 0.0, 0.0, 0.0, 0.0, 0.0
		for l := from; l < to; l++ {
			want += StarFlux(s, schema.Grid.WavelengthNM(float64(l)))
			for y := range c.Rows {
				for j := range c.N {
					u, v := (float64(j)-e0)*c1, (float64(y)-r0)*c2
					i := (l*c.Rows+y)*c.N + j
					if math.Hypot(u, v) > radiusArcsec || !c.Good(i) {
						continue
					}
					f, q := float64(c.Signal[i]), float64(c.Variance[i])
					sum, variance = sum+f, variance+q
					band.Element, band.Row = band.Element+f*(float64(j)-e0), band.Row+f*(float64(y)-r0)
					ve, vr = ve+q*(float64(j)-e0)*(float64(j)-e0), vr+q*(float64(y)-r0)*(float64(y)-r0)
				}
			}
		}
		band.Ratio, band.Error = sum/want, math.Sqrt(variance)/want
		band.Element, band.Row = band.Element/sum, band.Row/sum
		band.CentroidError = math.Sqrt(max(ve, vr)) / sum
		out = append(out, band)
	}
	return out
}
