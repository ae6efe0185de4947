package extract

import "gonum.org/v1/gonum/blas/blas32"

// An error e_k of step k's throughput moves channel l by e_k T_kl,
//
//	T_kl = sum_pixels sum_j A_jk g_jl (W f)_k = sum_j A_jk (W m_jl)_k,   m_jl = sum_pixels g_jl f,
//
// f the light of all elements. Adding up m, a vector for each element and channel, takes a
// part of the time of adding up T, which has an entry a step; but more memory.

// mostMoments is the number of values of m up to which it is chosen: 64 MiB.
const mostMoments = 16 << 20

// hasThroughput tells whether steps have errors of throughput.
func (c *Cube) hasThroughput() bool {
	for _, e := range c.noise.ThroughputErr {
		if e > 0 {
			return true
		}
	}
	return false
}

// byMoments tells whether p adds up m.
func (p *propagator) byMoments() bool {
	return p.c.hasThroughput() && !p.stepwise && len(p.elements)*p.c.Grid.Count*p.c.Elements <= mostMoments
}

// addMoments adds those of a block.
func (p *propagator) addMoments(w *part, light [][]float32) {
	elements := p.c.Elements
	if w.across == nil {
		w.across = make([]float32, w.n*elements)
	}
	for j, row := range light {
		for x, v := range row[w.x0 : w.x0+w.n] {
			w.across[x*elements+j] = v
		}
	}
	for slot := range p.elements {
		for x := range w.n {
			lo, g := w.weights(slot, x)
			f := blas32.Vector{N: elements, Inc: 1, Data: w.across[x*elements : (x+1)*elements]}
			for i, v := range g {
				m := w.moments[slot][lo+i]
				if m == nil {
					m = make([]float32, elements)
					w.moments[slot][lo+i] = m
				}
				blas32.Axpy(float32(v), f, blas32.Vector{N: elements, Inc: 1, Data: m})
			}
		}
	}
}

// moves adds T of a part to dst, [code row][channel].
func (p *propagator) moves(dst [][]float64, w *part) {
	if w.moments == nil {
		for k, row := range w.perChannel {
			for l, v := range row {
				dst[k][l] += float64(v)
			}
		}
		return
	}
	v, channels := p.c.noise.V, p.c.Grid.Count
	code := p.c.decoder.Code()
	open, closed := code.InverseEntries()
	m, predicted := make([]float32, v*channels), make([]float32, v*channels)
	for slot, j := range p.elements {
		clear(m)
		any := false
		for l, of := range w.moments[slot] {
			for element, value := range of {
				m[p.c.columns[element]*channels+l] = value
				any = true
			}
		}
		if !any {
			continue
		}
		p.c.decoder.Predict(predicted, m, channels, channels)
		for k := range v {
			entry := closed
			if code.Bit(k, p.c.columns[j]) == 1 {
				entry = open
			}
			for l, x := range predicted[k*channels : (k+1)*channels] {
				dst[k][l] += entry * float64(x)
			}
		}
	}
}
