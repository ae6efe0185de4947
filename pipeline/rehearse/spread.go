package rehearse

import "math"

// The drawing grid has perPixel points a pixel. Spots are Gaussians of sigma >=
// 1.27 px (profiles have FWHM >= 3 px), whose spectrum at the grid's sampling
// frequency, exp(-2 pi^2 sigma^2 perPixel^2), is below 1e-55: sums over the grid
// are integrals. What limits the accuracy is how a narrow line is put on the
// grid: see deposit.
const perPixel = 2

const gridStep = 1.0 / perPixel

// reachSigmas is where a spot ends: 2e-9 of it lies beyond.
const reachSigmas = 6

// axis is the drawing grid along x: point i lies at x0 + i gridStep.
type axis struct {
	x0 float64
	n  int
	// margin is the number of pixels before the detector's first column.
	margin int
}

func newAxis(columns int, sigma float64) axis {
	margin := int(math.Ceil(reachSigmas*sigma)) + 8
	return axis{x0: float64(-margin), n: perPixel*(columns+2*margin) + 1, margin: margin}
}

func (a axis) at(i int) float64 { return a.x0 + float64(i)*gridStep }

// spread holds the kernels that turn a density h on the drawing grid, electrons
// per pixel along the trace, into integrals. All reach over points -taps..taps.
type spread struct {
	sigma float64
	taps  int
	// pixel: int over a pixel of G. The integral of pixel x is the sum of
	// pixel[t] h[i+t], i the grid point at x.
	pixel []float64
	// below0, below1, below2: int up to 0 of s^k G(s - t gridStep) with s the
	// distance from the source: D(X_i) gets below_k[t] times the k-th density of
	// point i+t (see voxel.go).
	below0, below1, below2 []float64
	// rows tabulates the part of a spot that falls on a row, by the distance of
	// the row's centre, every 1/rowSteps from -rowReach.
	rows     []float64
	rowReach float64
}

// rowSteps makes the table of rows, read linearly, good to 1e-7 of its peak.
const rowSteps = 1024

// rowShare is the part of a spot that falls on the row whose centre lies d rows
// from it.
func (s *spread) rowShare(d float64) float64 {
	at := (d + s.rowReach) * rowSteps
	if !(at >= 0 && at < float64(len(s.rows)-1)) {
		return 0
	}
	k := int(at)
	low := s.rows[k]
	return low + (s.rows[k+1]-low)*(at-float64(k))
}

func newSpread(sigma float64) *spread {
	taps := int(math.Ceil((reachSigmas*sigma + 0.5) * perPixel))
	s := &spread{sigma: sigma, taps: taps}
	s.pixel = s.shifted(0)
	n := 2*taps + 1
	s.below0, s.below1, s.below2 = make([]float64, n), make([]float64, n), make([]float64, n)
	for t := -taps; t <= taps; t++ {
		d := -float64(t) * gridStep // from the source to where the integral ends
		g := bell(d, sigma)
		s.below0[t+taps] = gridStep * normal(d/sigma)
		s.below1[t+taps] = -gridStep * sigma * sigma * g
		s.below2[t+taps] = gridStep * sigma * sigma * (normal(d/sigma) - d*g)
	}
	s.rowReach = reachSigmas*sigma + 0.5
	s.rows = make([]float64, int(2*s.rowReach*rowSteps)+2)
	for k := range s.rows {
		d := float64(k)/rowSteps - s.rowReach
		s.rows[k] = share(d-0.5, d+0.5, sigma)
	}
	return s
}

// shifted is the pixel kernel for an image that lies dx px to the right. Each
// set of taps a pixel apart sums to gridStep exactly, so that all the light of
// every grid point is seen.
func (s *spread) shifted(dx float64) []float64 {
	kernel := make([]float64, 2*s.taps+1)
	for t := -s.taps; t <= s.taps; t++ {
		// the pixel reaches from -1/2 to 1/2, the source lies at t/2 + dx
		from := -0.5 - float64(t)*gridStep - dx
		kernel[t+s.taps] = gridStep * share(from, from+1, s.sigma)
	}
	for phase := range perPixel {
		sum := 0.0
		for i := phase; i < len(kernel); i += perPixel {
			sum += kernel[i]
		}
		for i := phase; i < len(kernel); i += perPixel {
			kernel[i] *= gridStep / sum
		}
	}
	return kernel
}

// integrate writes the pixels' integrals of the density g: dst[x] is that of
// column x. g covers the axis; only points lo <= i < hi of it are not 0.
func integrate(dst []float32, g []float64, kernel []float64, a axis, lo, hi int) {
	taps := len(kernel) / 2
	for x := range dst {
		c := perPixel * (x + a.margin)
		from, to := max(c-taps, lo), min(c+taps+1, hi)
		if from >= to {
			dst[x] = 0
			continue
		}
		dst[x] = float32(dot(g[from:to], kernel[from-c+taps:]))
	}
}

// dot is the sum of a[i] b[i] over a, in one fixed order.
func dot(a, b []float64) float64 {
	b = b[:len(a)]
	var s0, s1, s2, s3 float64
	i := 0
	for ; i+4 <= len(a); i += 4 {
		s0 += a[i] * b[i]
		s1 += a[i+1] * b[i+1]
		s2 += a[i+2] * b[i+2]
		s3 += a[i+3] * b[i+3]
	}
	for ; i < len(a); i++ {
		s0 += a[i] * b[i]
	}
	return (s0 + s1) + (s2 + s3)
}

// lineNodes is how many grid points a line without width is spread on, by
// Lagrange's polynomial: moments to order lineNodes-1 are those of a point, so
// that the spot's integral errs by 0.23 (gridStep/sigma)^lineNodes of its peak,
// below 2e-5 for sigma >= 1.27 px, and its flux not at all.
const lineNodes = 10

// lagrangeScale holds 1/prod (k-m) over m != k.
var lagrangeScale = func() (scale [lineNodes]float64) {
	for k := range scale {
		product := 1.0
		for m := range scale {
			if m != k {
				product *= float64(k - m)
			}
		}
		scale[k] = 1 / product
	}
	return scale
}()

// pointWeights are the Lagrange weights of lineNodes grid points for a point at
// a fraction t of a step behind node lineNodes/2-1, 0 <= t < 1.
func pointWeights(t float64) (w [lineNodes]float64) {
	t += lineNodes/2 - 1
	before := 1.0
	for k := range w {
		w[k] = before * lagrangeScale[k]
		before *= t - float64(k)
	}
	after := 1.0
	for k := lineNodes - 1; k >= 0; k-- {
		w[k] *= after
		after *= t - float64(k)
	}
	return w
}
