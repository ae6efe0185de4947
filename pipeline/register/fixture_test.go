package register

import (
	"fmt"
	"math"
	"math/rand/v2"

	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// askedSchema is what the sequence says of the field.
func askedSchema() product.Schema {
	return product.Schema{
		Elements: 60, Rows: 90, Grid: instrument.Grid{FirstNM: 500, StepNM: 1, Count: 1}, RADeg: 123.3, DecDeg: 61.6, RowCenter: 45.3,
		RotangDeg: 37, Parity: 1, C1Deg: 0.56 / 3600, C2Deg: 0.28 / 3600,
	}
}

// sky is stars and their light.
type sky struct {
	stars []Star
	light []float64
}

// newSky draws n stars in the field of a schema, at least 3.6 arc seconds apart.
func newSky(rng *rand.Rand, s product.Schema, n int) sky {
	var k sky
	var places [][2]float64
	for len(k.stars) < n {
		j, y := 3+rng.Float64()*float64(s.Elements-7), 5+rng.Float64()*float64(s.Rows-11)
		near := false
		for _, p := range places {
			near = near || math.Hypot((p[0]-j)*0.56, (p[1]-y)*0.28) < 3.6
		}
		if near {
			continue
		}
		places = append(places, [2]float64{j, y})
		ra, dec := s.Sky(j, y)
		k.stars = append(k.stars, Star{fmt.Sprint("star ", len(k.stars)+1), ra, dec})
		k.light = append(k.light, 2000*math.Exp(rng.NormFloat64()))
	}
	return k
}

// picture is the stars through a schema, of seeing 1.1 arc seconds FWHM, with noise of
// sigma a voxel on a sky of 20.
func (k sky) picture(rng *rand.Rand, s product.Schema, sigma float64) *Picture {
	p := NewPicture(s.Elements, s.Rows)
	width := 1.1 / 2.3548
	for y := range s.Rows {
		for j := range s.Elements {
			light := 20 + sigma*rng.NormFloat64()
			for i, star := range k.stars {
				j0, y0 := s.PlaceOf(star.RADeg, star.DecDeg)
				sj, sy := width/(3600*s.C1Deg)*math.Sqrt2, width/(3600*s.C2Deg)*math.Sqrt2
				// The integral over the voxel.
				part := (math.Erf((float64(j)+0.5-j0)/sj) - math.Erf((float64(j)-0.5-j0)/sj)) / 2 *
					(math.Erf((float64(y)+0.5-y0)/sy) - math.Erf((float64(y)-0.5-y0)/sy)) / 2
				light += k.light[i] * part
			}
			p.Add(j, y, light, sigma*sigma)
		}
	}
	p.Finish()
	return p
}

// moved is the schema of a telescope that points and turns otherwise than asked.
func moved(s product.Schema, east, north, turn, scale float64, parity int) product.Schema {
	s = s.Repointed(east, north, turn)
	s.C1Deg *= scale
	s.C2Deg *= scale
	s.Parity *= parity
	return s
}

// apart is the largest distance on the sky between what two schemas say of corners and
// middle, arc seconds.
func apart(a, b product.Schema) float64 {
	worst := 0.0
	for _, c := range [][2]float64{{0, 0}, {float64(a.Elements), 0}, {0, float64(a.Rows)}, {float64(a.Elements), float64(a.Rows)}, {30, 45}} {
		ra, dec := a.Sky(c[0], c[1])
		j, y := b.PlaceOf(ra, dec)
		worst = max(worst, 3600*math.Hypot((j-c[0])*b.C1Deg, (y-c[1])*b.C2Deg))
	}
	return worst
}
