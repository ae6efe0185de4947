package extract

import "slices"

// block adds what pixels x0..x0+n-1 of detector row y contribute.
func (p *propagator) block(w *part, y int, traces []*traceRow, light *rowLight, pixels *pixelRow) {
	if !p.gather(w, y, traces) {
		return
	}
	if p.even {
		p.c.evenSamples(&w.b, light, pixels)
		w.k.even = w.k.even.of(p.c, light)
	} else {
		p.c.samples(&w.b, light.of, pixels)
	}
	if !p.sumsOnly {
		w.k.prepare(&w.b)
		for x := range w.n {
			if p.touched(w, x) {
				p.pixel(w, x, light.of, pixels)
			}
		}
		if w.moments != nil {
			p.addMoments(w, light.of)
		}
	}
	p.addSums(w, light.of, pixels)
}

// gather collects the weights of all channels on the block's pixels, by the slots
// of the aperture's elements; false if there are none.
func (p *propagator) gather(w *part, y int, traces []*traceRow) bool {
	traces, rows := p.reaching(w, y, traces)
	channels := p.c.Grid.Count
	for i := range w.lo {
		w.lo[i], w.hi[i] = int32(channels), 0
	}
	any := false
	p.visit(w, traces, func(_, slot, l, from int, weights []float32) {
		any = true
		for k := range weights {
			at := slot*w.n + from + k
			w.lo[at], w.hi[at] = min(w.lo[at], int32(l)), max(w.hi[at], int32(l+1))
		}
	})
	if !any {
		return false
	}
	size := int32(0)
	for i := range w.lo {
		w.at[i] = size
		size += max(0, w.hi[i]-w.lo[i])
	}
	if cap(w.values) < int(size) {
		w.values = make([]float64, size)
	}
	w.values = w.values[:size]
	clear(w.values)
	p.visit(w, traces, func(trace, slot, l, from int, weights []float32) {
		row := rows[trace][slot]
		for k, v := range weights {
			at := slot*w.n + from + k
			w.values[w.at[at]+int32(l)-w.lo[at]] += row[from+k] * float64(v)
		}
	})
	return true
}

// reaching are the traces that read pixels of the block in detector row y, with the weights
// of that row, [trace][slot][column of the block].
func (p *propagator) reaching(w *part, y int, traces []*traceRow) (kept []*traceRow, rows [][][]float64) {
	for _, t := range traces {
		bySlot := make([][]float64, len(p.elements))
		any := false
		for slot := range bySlot {
			switch {
			case t.gathers == nil && slot > 0:
				bySlot[slot] = bySlot[0] // all alike
				continue
			case t.gathers != nil && t.gathers[slot] == nil:
				continue // no voxel of this trace is made of it
			}
			bySlot[slot] = p.rowWeights(w, t, y, slot)
			any = any || slices.ContainsFunc(bySlot[slot], func(v float64) bool { return v != 0 })
		}
		if any {
			kept, rows = append(kept, t), append(rows, bySlot)
		}
	}
	return kept, rows
}

// rowWeights are the weights of detector row y in trace t of an element, by column of the
// block.
func (p *propagator) rowWeights(w *part, t *traceRow, y, slot int) []float64 {
	rows := make([]float64, w.n)
	from, to, at := 0, w.n, func(x int) (int, []float32) { return p.c.shift.Weights(t.y0, x) }
	if t.gathers != nil {
		g := t.gathers[slot]
		low, high := g.Columns()
		from, to, at = max(0, low-w.x0), min(w.n, high-w.x0), g.Weights
	}
	for x := from; x < to; x++ {
		first, weights := at(w.x0 + x)
		if k := y - first; k >= 0 && k < len(weights) {
			rows[x] = float64(weights[k])
		}
	}
	return rows
}

// visit calls f with the weights of every voxel that reaches the block, from column
// from of the block on.
func (p *propagator) visit(w *part, traces []*traceRow, f func(trace, slot, l, from int, weights []float32)) {
	channels := p.c.Grid.Count
	for trace, t := range traces {
		for i := range t.sources {
			reach := t.reach[i][w.x0/blockPixels]
			for l := int(reach[0]); l < int(reach[1]); l++ {
				first, weights := t.voxel(i, l, channels)
				from := first - w.x0
				if from >= w.n || from+len(weights) <= 0 || len(weights) == 0 {
					continue
				}
				if from < 0 {
					weights, from = weights[-from:], 0
				}
				f(trace, t.sources[i].slot, l, from, weights[:min(len(weights), w.n-from)])
			}
		}
	}
}

// touched tells whether any weight lies on pixel x of the block.
func (p *propagator) touched(w *part, x int) bool {
	for slot := range p.elements {
		if at := slot*w.n + x; w.hi[at] > w.lo[at] {
			return true
		}
	}
	return false
}

// weights gives the weights of element slot on pixel x, of the channels from lo on.
func (w *part) weights(slot, x int) (lo int, values []float64) {
	at := slot*w.n + x
	if w.hi[at] <= w.lo[at] {
		return 0, nil
	}
	return int(w.lo[at]), w.values[w.at[at] : w.at[at]+w.hi[at]-w.lo[at]]
}

// pixel adds the covariances of channels in pixel x of the block:
// sum_jj' g_jl C_jj' g_j'l', what the elements have in common included.
func (p *propagator) pixel(w *part, x int, light [][]float32, pixels *pixelRow) {
	common := float64(pixels.common[w.x0+x])
	w.k.at(w.pairs, &w.b, x, func(slot int) float64 {
		if p.c.noise.Uniform {
			return w.b.own[x]
		}
		own := float64(pixels.of(slot)[w.x0+x]) - common
		if pixels.shared != nil {
			own -= float64(pixels.shared[slot][w.x0+x])
		}
		return own
	})
	for j := range p.elements {
		lo, g := w.weights(j, x)
		if g == nil {
			continue
		}
		row := w.row[:len(g)+Lags]
		clear(row)
		for other := range p.elements {
			low, h := w.weights(other, x)
			c := w.pairs[j][other] + common
			c += p.c.noise.ResponseVariance * float64(light[p.elements[j]][w.x0+x]) * float64(light[p.elements[other]][w.x0+x])
			from, to := max(lo, low), min(lo+len(row), low+len(h))
			for l := from; l < to; l++ {
				row[l-lo] += c * h[l-low]
			}
		}
		for l, v := range g {
			band := w.channels[lo+l]
			for lag, sum := range row[l : l+Lags+1][:len(band)] {
				band[lag] += v * sum
			}
		}
	}
	if w.perChannel != nil {
		p.pixelThroughput(w, x)
	}
}

// pixelThroughput adds what a relative error of each step does to the channels.
func (p *propagator) pixelThroughput(w *part, x int) {
	code := p.c.decoder.Code()
	open, closed := code.InverseEntries()
	for slot, j := range p.elements {
		lo, g := w.weights(slot, x)
		for k := range p.c.noise.V {
			if p.c.noise.ThroughputErr[k] == 0 || g == nil {
				continue
			}
			entry := closed
			if code.Bit(k, p.c.columns[j]) == 1 {
				entry = open
			}
			entry *= float64(w.b.predicted[k*w.n+x])
			for i, v := range g {
				w.perChannel[k][lo+i] += float32(entry * v)
			}
		}
	}
}

// addSums adds the variances of sums over channels: sum_k s_k^2 (A'g)_k^2 with the
// summed weights g. A is symmetric, so that A'g is the decode of g.
func (p *propagator) addSums(w *part, light [][]float32, pixels *pixelRow) {
	if len(p.sums) == 0 {
		return
	}
	if w.sumWeights == nil {
		w.sumWeights, w.sumSamples = make([]float32, p.c.noise.V*w.n), make([]float32, p.c.noise.V*w.n)
	}
	for s, sum := range p.sums {
		clear(w.sumWeights)
		total, ofResponse := make([]float64, w.n), make([]float64, w.n)
		for slot, j := range p.elements {
			for x := range w.n {
				lo, g := w.weights(slot, x)
				all := 0.0
				for i, v := range g {
					all += sum[lo+i] * v
				}
				w.sumWeights[p.c.columns[j]*w.n+x] = float32(all)
				total[x] += all
				ofResponse[x] += all * float64(light[j][w.x0+x])
			}
		}
		p.c.decoder.Decode(w.sumSamples, w.sumWeights, w.n, w.n)
		for x, e := range w.b.erased {
			if e != nil {
				e.reweigh(p.c.erased.projector, w.sumSamples[x:], w.n)
			}
		}
		for k := range p.c.noise.V {
			for x, h := range w.sumSamples[k*w.n : (k+1)*w.n] {
				w.sums[s] += float64(w.b.variances[k*w.n+x]) * float64(h) * float64(h)
				if w.throughput != nil {
					w.throughput[s][k] += float64(h) * float64(w.b.predicted[k*w.n+x])
				}
			}
		}
		for x := range w.n {
			w.sums[s] += float64(pixels.common[w.x0+x])*total[x]*total[x] + p.c.noise.ResponseVariance*ofResponse[x]*ofResponse[x]
		}
	}
}
