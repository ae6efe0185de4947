package report

import (
	"context"
	"math"
	"slices"

	"mirrorloom/fitsutil"
)

// A survey looks at some spectra all over the field, at all wavelengths: enough to tell
// lines and flags, while most of the file is left unread.
const (
	surveyRows     = 8   // detector rows
	surveyElements = 128 // in each
)

// survey is what it finds, by wavelength.
type survey struct {
	spectra []*spectrum // of the places asked for
	sky     []float64   // median over the field of what is good; NaN where nothing is
	excess  []float64   // see lineSearch
	limit   float64     // of excess
	flagged [][]float64 // part of the voxels with each of product.Flags
}

// surveyor reads rows of planes.
type surveyor struct {
	c         *cube
	rows      []int // in order; of them every stride-th element from offset on is looked at
	sampled   map[int]bool
	stride    int
	images    [3][]float32 // signal, variance, flags of a row
	signal    []float64    // of a plane's sample, NaN where not good
	variance  []float64
	flagCount []int
}

// survey looks at the cube, and reads the spectra of places.
func (c *cube) survey(ctx context.Context, places []place, light *Light) (*survey, error) {
	n := c.signal.Planes()
	r := &surveyor{c: c, sampled: map[int]bool{}, stride: max(1, c.elements()/surveyElements), flagCount: make([]int, len(allFlags))}
	usable := light.usableRows()
	for i := range min(surveyRows, len(usable)) {
		r.sampled[usable[(2*i+1)*len(usable)/(2*min(surveyRows, len(usable)))]] = true
	}
	wanted := map[int]bool{}
	s := &survey{sky: make([]float64, n), flagged: make([][]float64, len(allFlags))}
	for i := range s.flagged {
		s.flagged[i] = make([]float64, n)
	}
	for _, p := range places {
		wanted[p.row] = true
		s.spectra = append(s.spectra, newSpectrum(n))
	}
	for y := range c.rows() {
		if r.sampled[y] || wanted[y] {
			r.rows = append(r.rows, y)
		}
	}
	for i := range r.images {
		r.images[i] = make([]float32, c.elements())
	}
	search := newLineSearch(n)
	for l := range n {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		if err := r.plane(l, s, places); err != nil {
			return nil, err
		}
		s.sky[l] = median(r.signal)
		for i, k := range r.flagCount {
			s.flagged[i][l] = float64(k) / float64(max(1, len(r.signal)))
		}
		search.add(r.signal, r.variance)
	}
	s.excess, s.limit = search.finish()
	return s, nil
}

// plane reads a plane's rows.
func (r *surveyor) plane(l int, s *survey, places []place) error {
	r.signal, r.variance = r.signal[:0], r.variance[:0]
	clear(r.flagCount)
	for _, y := range r.rows {
		for i, im := range []*fitsutil.Image{r.c.signal, r.c.variance, r.c.flags} {
			if err := im.ReadPlaneRows(r.images[i], l, y, y+1); err != nil {
				return err
			}
		}
		for i, p := range places {
			if p.row == y {
				v, sigma := r.voxel(p.element)
				s.spectra[i].set(l, v, sigma)
			}
		}
		if !r.sampled[y] {
			continue
		}
		for j := r.stride / 2; j < r.c.elements(); j += r.stride {
			v, sigma := r.voxel(j)
			r.signal, r.variance = append(r.signal, v), append(r.variance, sigma*sigma)
			for i, f := range allFlags {
				if int16(r.images[2][j])&f.Bit != 0 {
					r.flagCount[i]++
				}
			}
		}
	}
	return nil
}

// voxel is the signal and the standard error of an element of the row that was read; NaN
// where the voxel is not good.
func (r *surveyor) voxel(j int) (signal, sigma float64) {
	signal, sigma = float64(r.images[0][j]), math.Sqrt(float64(r.images[1][j]))
	if int16(r.images[2][j])&r.c.bad != 0 || math.IsNaN(signal) || math.IsNaN(sigma) {
		return math.NaN(), math.NaN()
	}
	return signal, sigma
}

func newSpectrum(n int) *spectrum {
	s := &spectrum{signal: make([]float64, n), sigma: make([]float64, n)}
	for l := range n {
		s.signal[l], s.sigma[l] = math.NaN(), math.NaN()
	}
	return s
}

func (s *spectrum) set(l int, v, sigma float64) {
	s.signal[l], s.sigma[l] = v, sigma
	if !math.IsNaN(v) {
		s.good++
	}
}

// median of the numbers that are; NaN for none.
func median(x []float64) float64 {
	sorted := slices.DeleteFunc(slices.Clone(x), math.IsNaN)
	if len(sorted) == 0 {
		return math.NaN()
	}
	slices.Sort(sorted)
	return sorted[len(sorted)/2]
}
