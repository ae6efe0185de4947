package calib

import "math"

// PersistenceFit measures the share of a frame's charge that appears in the next:
// for pixels that the next frame does not light, r = level + share * before, r being
// what is left in them and before the charge of the frame before, both in electrons.
// Least squares, with a level for each frame, since bias levels are never perfect.
// Best from a dark or bias frame that follows a lamp frame.
type PersistenceFit struct {
	// Clip, in sigmas of a row's own scatter, leaves pixels out; 0 means 5.
	Clip float64

	top, bottom float64 // over frames: sum w (x - mean)(r - mean), sum w (x - mean)^2
	frame       regressionSums
	square      float64
	pixels      int
	levels      int
}

// regressionSums of one frame with weights.
type regressionSums struct{ w, x, r, xx, xr, rr float64 }

// Persistence is the share with its standard error.
type Persistence struct {
	Share, Error float64
	Chi2         float64 // per degree of freedom; Error is widened by its root above 1
	Pixels       int
}

// Add adds pixels of one frame: residual with its variance, and before; pixels with
// flags, of either frame, are left out (flags may be nil). Variances are averaged over
// neighbours, as in ColourFit.
func (p *PersistenceFit) Add(residual, variance, before []float32, flags []Flag) {
	clip := p.Clip
	if clip == 0 {
		clip = 5
	}
	scratch := make([]float32, len(residual))
	level, scatter := RobustLevel(residual, scratch)
	if math.IsNaN(level) {
		return
	}
	use := make([]bool, len(residual))
	for i, r := range residual {
		if flags != nil && flags[i] != 0 || !(variance[i] > 0) {
			continue
		}
		// What the frame before explains must not be clipped: a bright pixel lags.
		d := float64(r) - level
		limit := clip * math.Sqrt(max(float64(variance[i]), scatter*scatter))
		use[i] = d > -limit && d < limit+mostPersistence*math.Abs(float64(before[i]))
	}
	for i, w := range smoothWeights(variance, use) {
		if use[i] {
			p.frame.add(w, float64(before[i]), float64(residual[i]))
			p.pixels++
		}
	}
}

func (s *regressionSums) add(w, x, r float64) {
	s.w += w
	s.x += w * x
	s.r += w * r
	s.xx += w * x * x
	s.xr += w * x * r
	s.rr += w * r * r
}

// mostPersistence is the largest share that is believed possible.
const mostPersistence = 0.5

// NextFrame ends a frame: what follows has a level of its own.
func (p *PersistenceFit) NextFrame() {
	f := p.frame
	if f.w > 0 {
		p.top += f.xr - f.x*f.r/f.w
		p.bottom += f.xx - f.x*f.x/f.w
		p.square += f.rr - f.r*f.r/f.w
		p.levels++
	}
	p.frame = regressionSums{}
}

// Solve gives the share; NaN without light before or without pixels.
func (p *PersistenceFit) Solve() Persistence {
	p.NextFrame()
	if !(p.bottom > 0) {
		return Persistence{Share: math.NaN(), Error: math.NaN(), Pixels: p.pixels}
	}
	out := Persistence{Share: p.top / p.bottom, Pixels: p.pixels}
	out.Chi2 = (p.square - out.Share*p.top) / float64(max(1, p.pixels-p.levels-1))
	out.Error = math.Sqrt(max(1, out.Chi2) / p.bottom)
	return out
}
