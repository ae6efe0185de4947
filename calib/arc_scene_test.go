package calib

import (
	"math"
	"math/rand/v2"
)

// sceneLine is what a lamp of a test emits.
type sceneLine struct{ nm, electrons float64 }

// lampScene draws exposures of a lamp for tests, the model written out: every mirror
// row of an element puts a Gaussian spot where both equations of the model hold.
type lampScene struct {
	g              Geometry
	columns, rows  int
	mirrorRows     int     // symmetric about Y_c
	wStep          float64 // px per mirror row
	mirrors        int     // of an element, along x
	fwhm           float64
	read, pedestal float64 // electrons rms, electrons per pixel
	unequal        float64 // rms of the pixels' response
	random         *rand.Rand
	response       []float64
}

// spot adds one mirror's light of one wavelength: Picard's iteration for its place,
// then a circular Gaussian integrated over pixels.
func (s *lampScene) spot(dst []float64, dx, row, dispersed, electrons float64) {
	g := s.g
	x, y := g.X_c, row
	for range 50 {
		q := y - g.Y_c
		x = g.X_c + dx + dispersed + g.SlitTilt*q + g.Smile*q*q
		y = row + g.TraceTilt*(x-g.X_c) + g.TraceCurve*(x-g.X_c)*(x-g.X_c)
	}
	sigma := s.fwhm / 2.354820045
	share := func(edge, at float64) float64 { return 0.5 * math.Erfc((at-edge)/(math.Sqrt2*sigma)) }
	x0, y0 := int(x-5*sigma-1), int(y-5*sigma-1)
	var across [30]float64
	for i := range across {
		px := float64(x0 + i)
		across[i] = share(px+0.5, x) - share(px-0.5, x)
	}
	for py := max(y0, 0); py <= min(int(y+5*sigma+1), s.rows-1); py++ {
		down := electrons * (share(float64(py)+0.5, y) - share(float64(py)-0.5, y))
		for px := max(x0, 0); px <= min(int(x+5*sigma+1), s.columns-1); px++ {
			dst[py*s.columns+px] += down * across[px-x0]
		}
	}
}

// light draws the noiseless light of element j; electrons of a line are a mirror's.
func (s *lampScene) light(j int, lines []sceneLine) []float64 {
	dst := make([]float64, s.columns*s.rows)
	for _, l := range lines {
		d := l.nm - s.g.L_c
		dispersed := s.g.D[0]*d + s.g.D[1]*d*d + s.g.D[2]*d*d*d
		for w := range s.mirrorRows {
			row := s.g.Y_c + s.wStep*(float64(w)-float64(s.mirrorRows-1)/2)
			for m := range s.mirrors {
				dx := s.g.X_e * (float64(j) - s.g.J_c + (float64(m)-float64(s.mirrors-1)/2)/float64(s.mirrors))
				s.spot(dst, dx, row, dispersed, l.electrons)
			}
		}
	}
	return dst
}

// expose adds pedestal, unequal response and noise.
func (s *lampScene) expose(light []float64) Exposure {
	if s.response == nil {
		s.response = make([]float64, len(light))
		for i := range s.response {
			s.response[i] = 1 + s.unequal*s.random.NormFloat64()
		}
	}
	e := Exposure{Columns: s.columns, Signal: make([]float32, len(light)), Variance: make([]float32, len(light)), Flags: make([]Flag, len(light))}
	for i, v := range light {
		v = (v + s.pedestal) * s.response[i]
		noisy := v + math.Sqrt(v+s.read*s.read)*s.random.NormFloat64()
		e.Signal[i], e.Variance[i] = float32(noisy), float32(max(noisy, 0)+s.read*s.read)
	}
	return e
}

// litRows are the nominal first and last lit rows.
func (s *lampScene) litRows() (first, last int) {
	half := s.wStep * float64(s.mirrorRows) / 2
	return int(math.Ceil(s.g.Y_c - half)), int(s.g.Y_c + half)
}

// neon is a lamp of 22 lines between 576 and 672 nm (vacuum; NIST ASD Ne I and Hg I,
// as listed in configs/lamps) and three of mercury, with invented strengths.
func neon() []LampLine {
	var lines []LampLine
	for i, nm := range []float64{546.22676, 577.12102, 579.22758, 582.17695, 585.41102, 588.35252, 594.64811, 597.62824, 597.71896, 603.16667, 607.60194,
		609.78507, 614.47629, 616.52995, 621.90014, 626.82286, 630.65330, 633.61792, 638.47561, 640.40178, 650.83255, 653.46873, 660.07755, 668.01206} {
		lines = append(lines, LampLine{nm, 1000 * (1 + float64(i*7%5))})
	}
	return lines
}
