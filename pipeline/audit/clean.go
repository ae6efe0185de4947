package audit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"

	"mirrorloom/hadamard"
)

// rowData keeps a row's samples, so that some can be left out later.
type rowData struct {
	y, s2  []float32 // [frame][sample]
	n      int
	floor  float64
	struck []bool // by sample
}

// gram sums the samples that are not struck.
func (d *rowData) gram(frames int) (*hadamard.Gram, []float64) {
	y, s2, n := d.y, d.s2, d.n
	if slices.Contains(d.struck, true) {
		y, s2, n = make([]float32, len(d.y)), make([]float32, len(d.s2)), 0
		for p, off := range d.struck {
			if off {
				continue
			}
			for m := range frames {
				y[m*d.n+n], s2[m*d.n+n] = d.y[m*d.n+p], d.s2[m*d.n+p]
			}
			n++
		}
	}
	g, level := hadamard.NewGram(frames), make([]float64, frames)
	g.Add(y, s2, n, d.n, float32(d.floor))
	for p := range n {
		scale := 1 / math.Sqrt(variance(s2[p:], frames, d.n, d.floor))
		for m := range frames {
			level[m] += float64(y[m*d.n+p]) * scale
		}
	}
	return g, level
}

// variance is the mean of a sample's variances, as Gram weighs it.
func variance(s2 []float32, frames, stride int, floor float64) float64 {
	sum := 0.0
	for m := range frames {
		sum += float64(s2[m*stride])
	}
	return max(sum/float64(frames), floor)
}

// A reading is a hit that no look at its pixel told if its check is off by more than
// hitSquare of its variance, and hitSpans times what is common in its frame at its
// brightness: a frame of a wrong mask is off everywhere.
const (
	hitSquare = 30
	hitSpans  = 30
	// calm is the upper quartile of chi-square of one degree of freedom, with room.
	calm = 1.6
)

// clean marks the samples in which a single reading contradicts the others under the
// pairing and the factors of a state, and returns how many there are. Hits of bright
// pixels hide among the masks' own light until the pairing is known.
func (s *sampler) clean(st *state) int {
	frames := len(s.album.Frames)
	squares := make([][]float64, st.v) // of each row's checks, over all samples
	bright := make([][]float64, len(s.data))
	checks := make([]*mat.Dense, len(s.data))
	for i, d := range s.data {
		if d.n == 0 {
			continue
		}
		y := mat.NewDense(st.v, d.n, nil)
		bright[i] = make([]float64, d.n)
		for p := range d.n {
			scale := 1 / math.Sqrt(variance(d.s2[p:], frames, d.n, d.floor))
			mean := 0.0
			for k, m := range st.from {
				if m != none {
					x := st.factor[k] * float64(d.y[m*d.n+p]) * scale
					y.Set(k, p, x)
					mean += x / float64(st.v)
				}
			}
			bright[i][p] = 1 + mean*mean
		}
		checks[i] = new(mat.Dense)
		checks[i].Mul(st.projector, y)
		for k := range st.v {
			if own := st.projector.At(k, k); own > leastSeen {
				for p, r := range checks[i].RawRowView(k) {
					if !d.struck[p] {
						squares[k] = append(squares[k], r*r/own)
					}
				}
			}
		}
	}
	var all []float64
	for _, b := range bright {
		all = append(all, b...)
	}
	typical := max(median(all), 1)
	found := 0
	for k := range st.v {
		own := st.projector.At(k, k)
		if own <= leastSeen || len(squares[k]) == 0 {
			continue
		}
		slices.Sort(squares[k])
		common := max(0, squares[k][len(squares[k])*3/4]-calm) / typical
		for i, d := range s.data {
			if checks[i] == nil {
				continue
			}
			for p, r := range checks[i].RawRowView(k) {
				if !d.struck[p] && r*r/own > hitSquare+hitSpans*common*bright[i][p] {
					d.struck[p] = true
					found++
				}
			}
		}
	}
	if found > 0 {
		s.resum()
	}
	return found
}

// resum adds all rows up again, in order.
func (s *sampler) resum() {
	s.reset()
	for i, d := range s.data {
		s.add(i, d)
	}
}

func (s *sampler) reset() {
	frames := len(s.album.Frames)
	s.gram, s.level, s.parts = hadamard.NewGram(frames), make([]float64, frames), nil
	for range parts {
		s.parts = append(s.parts, hadamard.NewGram(frames))
	}
}

func (s *sampler) add(i int, d *rowData) {
	g, level := d.gram(len(s.album.Frames))
	s.gram.Merge(g)
	s.parts[i%parts].Merge(g)
	for m, x := range level {
		s.level[m] += x
	}
}
