package reduce

import (
	"cmp"
	"context"
	"slices"

	"mirrorloom/calib"
	"mirrorloom/pipeline/exposure"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/product"
)

// Where the dark columns are too few to tell struck samples, cosmic rays are looked for
// in each science frame by itself, by their sharp edges (calib.EdgeRule), and a struck
// sample is replaced by what the other frames and its neighbours let expect
// (calib.StandIn).

// edgeHit is a struck pixel of a frame, and its reading less bias and dark current.
type edgeHit struct {
	pixel   int32 // of the detector, row by row
	reading float32
}

// edgeHits lists those of each science frame, in the order of pixels.
type edgeHits map[*exposure.Frame][]edgeHit

// findEdges searches the science frames, each read whole.
func (r *reduction) findEdges(ctx context.Context) (edgeHits, error) {
	m, err := r.masters.whole(r.camera.Rows, r.camera.Columns)
	if err != nil {
		return nil, err
	}
	noise := calib.FrameNoise{Photon: 1 + r.camera.PhotonExcess}
	for _, row := range r.camera.Variance {
		for _, v := range row {
			noise.Read = append(noise.Read, float32(v))
		}
	}
	var frames []*exposure.Frame
	for _, slot := range r.roles.slots {
		frames = append(frames, slot...)
	}
	found := make([][]edgeHit, len(frames))
	rule := calib.DefaultEdgeRule()
	err = r.eachExposure(ctx, frames, m, false, func(i int, e *calib.Exposure) error {
		strikes, err := rule.Find(e.Signal, e.Columns, noise, e.Flags)
		for _, s := range strikes {
			found[i] = append(found[i], edgeHit{int32(s.Pixel), e.Signal[s.Pixel]})
		}
		return err
	})
	if err != nil {
		return nil, err
	}
	all := edgeHits{}
	for i, f := range frames {
		slices.SortFunc(found[i], func(a, b edgeHit) int { return cmp.Compare(a.pixel, b.pixel) })
		all[f] = found[i]
	}
	return all, nil
}

// edges is findEdges where it is asked for: repairs are, and the dark columns cannot make
// them.
func (r *reduction) edges(ctx context.Context, d *decoder) (edgeHits, error) {
	if d.repair != nil || r.opts.Recipe.Repair.Use == useOff {
		return nil, nil
	}
	return r.findEdges(ctx)
}

// count is the number of hits.
func (h edgeHits) count() int {
	n := 0
	for _, list := range h {
		n += len(list)
	}
	return n
}

// struckSlot is a struck sample of a strip.
type struckSlot struct {
	pixel, slot int // of the strip; code row
	frames      int // of the slot
	reading     float32
}

// extraNoise is the variance that a stand-in has beyond a reading's.
type extraNoise struct {
	pixel, slot int
	variance    float64
}

// cleaned reads rows y0 to y1-1 of a frame, with cosmic rays taken out by their edges:
// where there are too few frames to tell them by comparison.
func (p *prepare) cleaned(f *exposure.Frame, y0, y1 int, scratch *exposure.Scratch) ([]float32, error) {
	rule, columns := calib.DefaultEdgeRule(), p.camera.Columns
	first, last := max(0, y0-rule.MarginRows()), min(p.camera.Rows, y1+rule.MarginRows())
	samples := make([]float32, (last-first)*columns)
	flags := make([]calib.Flag, len(samples))
	mark := func(found []calib.Flag, x, y, w int) { p.camera.Merge(flags, first, found, x, y, w) }
	if _, err := p.camera.Read(samples, f.Image, first, last, scratch, mark); err != nil {
		return nil, err
	}
	noise := calib.FrameNoise{Photon: 1 + p.camera.PhotonExcess, Read: make([]float32, 0, len(samples))}
	for y := first; y < last; y++ {
		for _, v := range p.camera.Variance[y] {
			noise.Read = append(noise.Read, float32(v))
		}
	}
	strikes, err := rule.Find(samples, columns, noise, flags)
	for _, s := range strikes {
		if s.Value == s.Value { // not NaN
			samples[s.Pixel] = s.Value
		}
	}
	return samples[(y0-first)*columns : (y1-first)*columns], err
}

// standIns replaces the struck samples of a strip that was read, row by row.
func (r *stripReader) standIns(ctx context.Context, s *strip) error {
	s.extra = s.extra[:0]
	if r.edges == nil {
		return nil
	}
	byRow := make([][]struckSlot, s.y1-s.y0)
	first, last := int32(s.y0*s.columns), int32(s.y1*s.columns)
	for i, frames := range r.slots {
		for _, f := range frames {
			factor, offset, _ := r.correction.of(f.Step)
			list := r.edges[f]
			from, _ := slices.BinarySearchFunc(list, first, func(h edgeHit, p int32) int { return cmp.Compare(h.pixel, p) })
			for _, h := range list[from:] {
				if h.pixel >= last {
					break
				}
				row := int(h.pixel)/s.columns - s.y0
				byRow[row] = append(byRow[row], struckSlot{int(h.pixel - first), i, len(frames), float32(factor) * (h.reading - float32(offset))})
			}
		}
	}
	extra := make([][]extraNoise, len(byRow))
	err := parallel.Do(ctx, r.workers, len(byRow), func(_, row int) error {
		if len(byRow[row]) > 0 {
			extra[row] = r.standInRow(s, row, byRow[row])
		}
		return nil
	})
	for _, e := range extra {
		s.extra = append(s.extra, e...)
	}
	return err
}

// standInRow replaces the struck samples of one row of a strip, and gives their extra
// noise, by pixel.
func (r *stripReader) standInRow(s *strip, row int, struck []struckSlot) []extraNoise {
	slices.SortStableFunc(struck, func(a, b struckSlot) int { return cmp.Or(cmp.Compare(a.pixel, b.pixel), cmp.Compare(a.slot, b.slot)) })
	at := row * s.columns
	flags := s.flags[at : at+s.columns]
	isStruck := map[[2]int]bool{}
	for _, h := range struck {
		isStruck[[2]int{h.slot, h.pixel - at}] = true
	}
	// The light of a slot, and its mean over the slots, struck samples left out.
	light := func(slot, x int) float32 {
		return s.slot(slot)[at+x] - float32(r.scale.gain[slot])*s.base[at+x] - float32(r.scale.shift[slot])
	}
	mean, count := make([]float32, s.columns), make([]float32, s.columns)
	for i := range r.slots {
		if r.scale.isLost(i) {
			continue
		}
		for x := range mean {
			mean[x] += light(i, x)
			count[x]++
		}
	}
	for i, h := range struck {
		if i > 0 && struck[i-1].slot == h.slot && struck[i-1].pixel == h.pixel {
			continue // in another frame of the slot
		}
		mean[h.pixel-at] -= light(h.slot, h.pixel-at)
		count[h.pixel-at]--
	}
	for x := range mean {
		mean[x] /= max(1, count[x])
	}
	rule, frame := calib.DefaultStandIn(), make([]float32, s.columns)
	var extra []extraNoise
	for _, h := range struck {
		x := h.pixel - at
		for u := max(0, x-rule.Reach); u <= min(s.columns-1, x+rule.Reach); u++ {
			frame[u] = light(h.slot, u)
		}
		usable := func(u int) bool { return flags[u]&^product.FlagRestored == 0 && !isStruck[[2]int{h.slot, u}] }
		value, variance, ok := rule.Estimate(frame, mean, usable, x)
		if !ok {
			flags[x] |= calib.BadPixel
			continue
		}
		n := float64(h.frames)
		sample := &s.slot(h.slot)[h.pixel]
		if h.frames == 1 {
			*sample += float32(value) - light(h.slot, x)
		} else {
			*sample += (float32(value) - h.reading) / float32(n)
		}
		flags[x] |= product.FlagRestored
		own := s.quiet[row][x] + (1+r.camera.PhotonExcess)*max(0, value)
		extra = append(extra, extraNoise{h.pixel, h.slot, max(0, variance-own) / (n * n)})
	}
	return extra
}

// addExtra adds the noise of stand-ins in a block of n pixels to what the variances need.
func (d *decoder) addExtra(w *decodeWorker, s *strip, at, n int) {
	from, _ := slices.BinarySearchFunc(s.extra, at, func(e extraNoise, p int) int { return cmp.Compare(e.pixel, p) })
	for _, e := range s.extra[from:] {
		if e.pixel >= at+n {
			break
		}
		if d.code.VarianceUniform() {
			w.square[e.pixel-at] += e.variance
		} else {
			w.variance[e.slot*n+e.pixel-at] += float32(e.variance)
		}
	}
}
