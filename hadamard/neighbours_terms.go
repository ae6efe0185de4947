package hadamard

// quad is how many pixels go through the elements together: what is carried from
// one element to the next then stays in registers.
const quad = 4

// terms fills s.half with g_j/2 of the four pixels from at on and, for an
// m-sequence, takes from each element the halves of its two pairs. A quarter of d_j is
// carried along in d, of its step in e, the light of the element before in f, its
// d_j f_j/4 in q, and the half of the pair before in l.
func (n *Neighbours) terms(s *neighbourScratch, size, step *row, at int) {
	d0, e0 := n.start(size[at], step[at])
	d1, e1 := n.start(size[at+1], step[at+1])
	d2, e2 := n.start(size[at+2], step[at+2])
	d3, e3 := n.start(size[at+3], step[at+3])
	own := n.ghost != nil
	before := (*[quad]float32)(s.light[n.columns[0]][at:])
	f0, f1, f2, f3 := before[0], before[1], before[2], before[3]
	q0, q1, q2, q3 := float32(d0*f0), float32(d1*f1), float32(d2*f2), float32(d3*f3)
	var l0, l1, l2, l3 float32
	for j, c := range n.columns[1:] {
		d0, d1, d2, d3 = d0+e0, d1+e1, d2+e2, d3+e3
		element := (*[quad]float32)(s.light[c][at:])
		g0, g1, g2, g3 := element[0], element[1], element[2], element[3]
		r0, r1, r2, r3 := float32(d0*g0), float32(d1*g1), float32(d2*g2), float32(d3*g3)
		h0, h1, h2, h3 := q0+r0, q1+r1, q2+r2, q3+r3
		half := (*[quad]float32)(s.half[j*lanes+at:])
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

// start is a quarter of d of element 0, and of its step from element to element.
func (n *Neighbours) start(size, step float32) (float32, float32) {
	middle := float32(len(n.columns)-1) / 2
	return float32(size-float32(step*middle)) * 0.25, step * 0.25
}

// takeGhosts gives the columns of an m-sequence's ghosts what they lack.
func (n *Neighbours) takeGhosts(s *neighbourScratch) {
	for j, c := range n.ghost {
		ghost, half := &s.light[c], rowAt(s.half, j*lanes)
		for p := 0; p < lanes; p += quad {
			g, h := (*[quad]float32)(ghost[p:]), (*[quad]float32)(half[p:])
			g[0], g[1], g[2], g[3] = g[0]+h[0], g[1]+h[1], g[2]+h[2], g[3]+h[3]
		}
	}
}
