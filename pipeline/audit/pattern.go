package audit

// masks are the ways in which a mask may be wrong, as weights of the elements: how much
// of each is open.

// bits are those of code row k.
func (e *engine) bits(k int) []float64 {
	w := make([]float64, len(e.Elements))
	for j, column := range e.Elements {
		w[j] = float64(e.Code.Bit(k, column))
	}
	return w
}

// weightsOf are the weights that the frame of a move shows.
func (e *engine) weightsOf(m move) []float64 {
	switch m.kind {
	case Stale:
		return e.bits(m.other)
	case Inverted:
		w := e.bits(m.row)
		for j := range w {
			w[j] = 1 - w[j]
		}
		return w
	case Flipped:
		own := e.bits(m.row)
		w := make([]float64, len(own))
		for j := range w {
			w[j] = own[len(own)-1-j]
		}
		return w
	case Slipped:
		return e.slipped(m.row, m.mirrors)
	}
	return e.bits(m.row)
}

// slipped moves row k's mask by so many mirrors towards larger j.
func (e *engine) slipped(k, mirrors int) []float64 {
	own := e.bits(k)
	w := make([]float64, len(own))
	whole, part := mirrors/e.Mirrors, mirrors%e.Mirrors
	if part < 0 {
		whole, part = whole-1, part+e.Mirrors
	}
	f := float64(part) / float64(e.Mirrors)
	at := func(j int) float64 {
		if j < 0 || j >= len(own) {
			return 0
		}
		return own[j]
	}
	for j := range w {
		w[j] = (1-f)*at(j-whole) + f*at(j-whole-1)
	}
	return w
}

// slips are the mirrors by which masks are tried: single ones, and whole elements.
func (e *engine) slips() []int {
	const elements = 3
	var list []int
	for n := 1; n <= elements; n++ {
		if n < e.Mirrors {
			list = append(list, n, -n)
		}
		list = append(list, n*e.Mirrors, -n*e.Mirrors)
	}
	return list
}

// misfit is the chi-square by which the frame of an erased row k contradicts a mask
// that opens the elements by the weights w, and what noise gives it: one degree of
// freedom a pixel, all in one check x,
//
//	x = (I - P)(e_k - t),  misfit = x'Gx/|x|^2,
//
// where t'y predicts such a frame from the readings of other rows: t = A'h with h the
// weights on the elements, and on the dark columns what makes t pass a pedestal
// unchanged; the parts of t on erased rows are moved to others by the checks. The
// frame's own factor is fitted within ownScatter.
func (s *state) misfit(k int, w []float64) (misfit, noise float64) {
	x, norm := s.check(k, w)
	var a, b, c float64
	for i, xi := range x {
		if xi == 0 {
			continue
		}
		row := s.sum.RawRowView(i)
		c += xi * dot(row, x)
		b += xi * row[k]
		noise += xi * xi * s.noise[i]
	}
	a = s.sum.At(k, k)
	value, own := cheapest(a, b, c, s.noise[k])
	return value / norm, (noise + own) / norm
}

// repeated is the misfit of the frame of an erased row k with the mask of row r, which is
// not erased. The reading of r predicts it as well as any t, so that x = (I - P)(e_k - e_r),
// whose forms are all in G, PG and P.
func (s *state) repeated(k, r int) (misfit, noise float64) {
	pg, p := s.lit().RawRowView(r), s.projector.RawRowView(r)
	c := s.sum.At(r, r) - 2*pg[r] + dot(pg, p)
	b := s.sum.At(r, k) - pg[k]
	for i, x := range p {
		noise += x * x * s.noise[i]
	}
	noise += (1 - 2*p[r]) * s.noise[r]
	value, own := cheapest(s.sum.At(k, k), b, c, s.noise[k])
	norm := 2 - p[r]
	return value / norm, (noise + own) / norm
}

// prediction is t of misfit: it reads no erased row.
func (s *state) prediction(w []float64) []float64 {
	h := make([]float64, s.v)
	for j, column := range s.Elements {
		h[column] = w[j]
	}
	rest := (float64(s.Code.K()) - sumOf(w)) / float64(len(s.Dark))
	for _, column := range s.Dark {
		h[column] = rest
	}
	t := make([]float64, s.v)
	for j, x := range h {
		if x != 0 {
			for i, a := range s.inverse.RawRowView(j) {
				t[i] += x * a
			}
		}
	}
	for _, m := range s.marks {
		x := t[m.row] / m.checks[m.row]
		for i, p := range m.checks {
			t[i] -= x * p
		}
		t[m.row] = 0
	}
	return t
}

// check is the x of misfit on the other rows, and |x|^2.
func (s *state) check(k int, w []float64) (x []float64, norm float64) {
	t := s.prediction(w)
	x = make([]float64, s.v)
	for i := range x {
		x[i] = t[i] - dot(s.projector.RawRowView(i), t)
	}
	x[k] = 0
	return x, 1 + dot(x, x)
}

// strength is |x|^2: a frame that is off by d has a misfit of d^2/|x|^2.
func (s *state) strength(k int, w []float64) float64 {
	_, norm := s.check(k, w)
	return norm
}
