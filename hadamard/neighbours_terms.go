package hadamard

// quad is how many pixels go through the elements together: what is carried from
// one element to the next then stays in registers.
const quad = 4

// terms fills s.half with g_j/2 of up to lanes pixels and, with own, takes from each
// element the halves of its two pairs.
func (n *Neighbours) terms(s *neighbourScratch, block, d, slope []float32, pixels, stride int, own bool) {
	p := 0
	for ; p+quad <= pixels; p += quad {
		var size, step [quad]float32
		copy(size[:], d[p:p+quad])
		if slope != nil {
			copy(step[:], slope[p:p+quad])
		}
		n.quadTerms(s, block[p:], size, step, p, stride, own)
	}
	for ; p < pixels; p++ {
		step := float32(0)
		if slope != nil {
			step = slope[p]
		}
		n.pixelTerms(s, block[p:], d[p], step, p, stride, own)
	}
}

// start is a quarter of d of element 0, and of its step from element to element.
func (n *Neighbours) start(size, step float32) (float32, float32) {
	middle := float32(len(n.columns)-1) / 2
	return float32(size-float32(step*middle)) * 0.25, step * 0.25
}

// quadTerms is terms for four pixels, pixelTerms for one: the same operations in the
// same order. lastHalf is that of the pair before, f the light of the element before,
// and quarter its d_j f_j/4.
func (n *Neighbours) quadTerms(s *neighbourScratch, block []float32, size, step [quad]float32, at, stride int, own bool) {
	d0, e0 := n.start(size[0], step[0])
	d1, e1 := n.start(size[1], step[1])
	d2, e2 := n.start(size[2], step[2])
	d3, e3 := n.start(size[3], step[3])
	before := (*[quad]float32)(block[int(n.columns[0])*stride:])
	f0, f1, f2, f3 := before[0], before[1], before[2], before[3]
	q0, q1, q2, q3 := d0*f0, d1*f1, d2*f2, d3*f3
	var l0, l1, l2, l3 float32
	for j, c := range n.columns[1:] {
		d0, d1, d2, d3 = d0+e0, d1+e1, d2+e2, d3+e3
		element := (*[quad]float32)(block[int(c)*stride:])
		g0, g1, g2, g3 := element[0], element[1], element[2], element[3]
		r0, r1, r2, r3 := d0*g0, d1*g1, d2*g2, d3*g3
		h0, h1, h2, h3 := q0+r0, q1+r1, q2+r2, q3+r3
		half := (*[quad]float32)(s.half[j][at:])
		half[0], half[1], half[2], half[3] = h0, h1, h2, h3
		if own {
			before[0], before[1], before[2], before[3] = f0-(l0+h0), f1-(l1+h1), f2-(l2+h2), f3-(l3+h3)
		}
		before = element
		f0, f1, f2, f3 = g0, g1, g2, g3
		q0, q1, q2, q3 = r0, r1, r2, r3
		l0, l1, l2, l3 = h0, h1, h2, h3
	}
	if own {
		before[0], before[1], before[2], before[3] = f0-l0, f1-l1, f2-l2, f3-l3
	}
}

func (n *Neighbours) pixelTerms(s *neighbourScratch, block []float32, size, step float32, at, stride int, own bool) {
	d, e := n.start(size, step)
	before := &block[int(n.columns[0])*stride]
	f := *before
	q := float32(d * f)
	last := float32(0)
	for j, c := range n.columns[1:] {
		d += e
		element := &block[int(c)*stride]
		g := *element
		r := float32(d * g)
		h := q + r
		s.half[j][at] = h
		if own {
			*before = f - (last + h)
		}
		before, f, q, last = element, g, r, h
	}
	if own {
		*before = f - last
	}
}

// takeGhosts gives the columns of an m-sequence's ghosts what they lack.
func (n *Neighbours) takeGhosts(s *neighbourScratch, block []float32, pixels, stride int) {
	if pixels < lanes {
		for j, c := range n.ghost {
			row := block[int(c)*stride:][:pixels]
			for p, h := range s.half[j][:pixels] {
				row[p] += h
			}
		}
		return
	}
	for j, c := range n.ghost {
		ghost, half := rowAt(block, int(c)*stride), &s.half[j]
		for p := 0; p < lanes; p += quad {
			g, h := (*[quad]float32)(ghost[p:]), (*[quad]float32)(half[p:])
			g[0], g[1], g[2], g[3] = g[0]+h[0], g[1]+h[1], g[2]+h[2], g[3]+h[3]
		}
	}
}
