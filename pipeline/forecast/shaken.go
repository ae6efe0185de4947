package forecast

import (
	"math/rand/v2"
	"slices"

	"mirrorloom/hadamard"
)

// drawnDark names the stream of random numbers that dark columns are drawn from.
const drawnDark = 0x6461726b

// darkColumns are a candidate's: those of its sequence, or as many drawn by the code's size.
func (c Candidate) darkColumns() []int {
	if c.columns != nil {
		return c.columns
	}
	drawn := rand.New(rand.NewPCG(drawnDark, uint64(c.V))).Perm(c.V)[:c.Dark]
	slices.Sort(drawn)
	return drawn
}

// litColumns are the code columns of a code's elements, dark those without one (ascending).
func litColumns(v int, dark []int) []int {
	lit := make([]int, 0, v-len(dark))
	for column := range v {
		if _, is := slices.BinarySearch(dark, column); !is {
			lit = append(lit, column)
		}
	}
	return lit
}

// aperture is an element's part of a measurement: the weights of a window's pixels.
type aperture struct {
	element int
	window  window
	weights []float64
}

// shaken is the variance that independent errors e_k of the rows' transmission, of rms d_k, give
// a sum over elements j and pixels p with weights g: of
//
//	sum_k e_k X_k,   X_k = sum_p y_k(p) sum_j g_jp A_jk,
//
// y the light of a frame, it is sum d_k^2 X_k^2 over the number of cycles. All pixels share a
// row's error, so that it adds up coherently over an aperture, as in the reduction.
func (s *sum) shaken() (float64, error) {
	n, c := s.noise, s.candidate
	if n.scatter == 0 || len(s.apertures) == 0 {
		return 0, nil
	}
	code, err := hadamard.New(hadamard.Family(c.Family), c.V)
	if err != nil {
		return 0, err
	}
	lit := litColumns(c.V, c.darkColumns())
	x0, x1 := s.light.camera.columns, -1
	for _, a := range s.apertures {
		x0, x1 = min(x0, a.window.x0), max(x1, a.window.x1)
	}
	width := x1 - x0 + 1
	traces := map[int][][]float64{} // light of all elements by trace row
	decoder := hadamard.NewDecoder(code)
	columns, frames := make([]float32, c.V*width), make([]float32, c.V*width)
	shift, row := make([]float64, c.V), make([]float64, width)
	for y := s.window.y0; y <= s.window.y1; y++ {
		for j, column := range lit {
			s.light.untrace(row, x0, y, func(q int) []float64 { return s.allElements(traces, q, x0, width)[j] })
			for i, v := range row {
				columns[column*width+i] = float32(v * c.DwellSeconds)
			}
		}
		decoder.Predict(frames, columns, width, width)
		s.addShift(shift, code, lit, frames, y, x0, width)
	}
	total := 0.0
	for k, v := range shift {
		total += v * v * n.rows.of(k) * n.rows.of(k)
	}
	return total / n.cycles, nil
}

// allElements is the light of all elements on a trace row, electrons a second.
func (s *sum) allElements(kept map[int][][]float64, q, x0, width int) [][]float64 {
	if kept[q] == nil {
		list := make([][]float64, s.candidate.N)
		for j := range list {
			list[j] = make([]float64, width)
			s.field.element(list[j], j, q, x0, func(int) bool { return true }, false)
		}
		kept[q] = list
	}
	return kept[q]
}

// addShift adds a detector row's part of X to shift.
func (s *sum) addShift(shift []float64, code *hadamard.Code, lit []int, frames []float32, y, x0, width int) {
	open, closed := code.InverseEntries()
	for _, a := range s.apertures {
		if y < a.window.y0 || y > a.window.y1 {
			continue
		}
		weights := a.weights[a.window.at(a.window.x0, y):][:a.window.x1-a.window.x0+1]
		from := a.window.x0 - x0
		for k := range shift {
			light := 0.0
			for i, g := range weights {
				light += g * float64(frames[k*width+from+i])
			}
			if code.Bit(k, lit[a.element]) == 1 {
				shift[k] += open * light
			} else {
				shift[k] += closed * light
			}
		}
	}
}
