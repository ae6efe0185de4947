package calib

import "math"

// trusted is the relative error below which a pixel's response tells how responses
// scatter.
const trusted = 0.005

// leastResponse: a pixel that answers less than this is dead. Divided by its
// response, it would be all noise, or infinite.
const leastResponse = 0.2

// judge finds the scatter of the responses of well lit pixels and leaves those out of
// the next S that deviate by more than Clip sigmas.
func (m *pixelMeasure) judge() {
	miss := make([]float32, 0, len(m.light))
	noise := 0.0
	for i, s := range m.smooth {
		if e := m.relativeError(i); !m.bad[i] && e < trusted {
			miss = append(miss, m.light[i]/s-1)
			noise += e * e
		}
	}
	if len(miss) == 0 {
		m.scatter = 0
		return
	}
	e := Clip{Sigmas: m.rule.Clip}.Mean(miss, make([]float32, len(miss)))
	m.scatter = math.Sqrt(max(0, e.Noise*e.Noise-noise/float64(len(miss))))
	for i, s := range m.smooth {
		if s > 0 && !m.bad[i] {
			limit := m.rule.Clip * math.Hypot(m.scatter, m.relativeError(i))
			m.bad[i] = math.Abs(float64(m.light[i]/s)-1) > limit
		}
	}
}

// relativeError of A, +Inf where no light is expected.
func (m *pixelMeasure) relativeError(i int) float64 {
	if !(m.smooth[i] > 0) {
		return math.Inf(1)
	}
	return math.Sqrt(float64(m.variance[i])) / float64(m.smooth[i])
}

// response makes the best estimates of the pixels' responses.
func (m *pixelMeasure) response() *PixelResponse {
	p := &PixelResponse{
		Width: m.width, Scatter: m.scatter,
		Factor: make([]float32, len(m.light)), Variance: make([]float32, len(m.light)), Flags: make([]Flag, len(m.light)),
	}
	prior := m.scatter * m.scatter
	for i, s := range m.smooth {
		p.Factor[i], p.Variance[i] = 1, float32(prior)
		e := m.relativeError(i)
		switch {
		case !(e*m.rule.Floor <= 1):
			p.Flags[i] = LowFlat
			p.Low++
		case m.flags[i] != 0 || m.light[i] != m.light[i]:
		default:
			deviation := float64(m.light[i])/float64(s) - 1
			noise := e*e + prior*float64(m.averaged[i])
			share := 1.0
			// A pixel that is out of the ordinary tells nothing about the others, nor
			// they about it.
			if prior+noise > 0 && math.Abs(deviation) <= m.rule.Clip*math.Sqrt(prior+noise) {
				share = prior / (prior + noise)
			}
			if factor := 1 + share*deviation; factor > leastResponse {
				p.Factor[i], p.Variance[i] = float32(factor), float32(share*noise)
			} else {
				p.Flags[i] = BadPixel
			}
		}
	}
	return p
}
