package register

import (
	"cmp"
	"math"
	"slices"

	"mirrorloom/calib"
)

// Picture is the field in white light, [row][element]: the mean over the good voxels of
// each place and its variance, 0 where there is none.
type Picture struct {
	Elements, Rows  int
	Light, Variance []float64
	count           []int
}

// NewPicture begins one.
func NewPicture(elements, rows int) *Picture {
	n := elements * rows
	return &Picture{Elements: elements, Rows: rows, Light: make([]float64, n), Variance: make([]float64, n), count: make([]int, n)}
}

// Add takes a good voxel of a place into it.
func (p *Picture) Add(element, row int, signal, variance float64) {
	if !(variance > 0) || math.IsNaN(signal) || math.IsInf(signal+variance, 0) {
		return
	}
	i := row*p.Elements + element
	p.Light[i] += signal
	p.Variance[i] += variance
	p.count[i]++
}

// leastChannels is the part of the wavelengths, of those of the place that has most, that
// a place needs: a mean over few is of another colour.
const leastChannels = 0.5

// Finish makes means of sums.
func (p *Picture) Finish() {
	most := slices.Max(p.count)
	for i, n := range p.count {
		if n == 0 || float64(n) < leastChannels*float64(most) {
			p.Light[i], p.Variance[i] = math.NaN(), 0
			continue
		}
		p.Light[i] /= float64(n)
		p.Variance[i] /= float64(n) * float64(n)
	}
}

const (
	// maxPeaks of a picture are looked at, the brightest.
	maxPeaks = 40
	// guessArcsec is the width (sigma) of a star with which the fits begin.
	guessArcsec = 0.5
)

// peaks measures the stars of the picture, the brightest first. c1 and c2 are the
// voxels' sides in arc seconds.
func (p *Picture) peaks(c1, c2 float64) []calib.Centroid {
	sj, sy := max(0.6, guessArcsec/c1), max(0.6, guessArcsec/c2)
	// Far enough for the sky, and not for the neighbours.
	reachJ, reachY := int(math.Ceil(4*sj)), int(math.Ceil(4*sy))
	smooth, threshold := p.smoothed(int(math.Round(sj)), int(math.Round(sy)))
	type summit struct {
		j, y  int
		light float64
	}
	var summits []summit
	for y := range p.Rows {
		for j := range p.Elements {
			if v := smooth[y*p.Elements+j]; v > threshold && p.highest(smooth, j, y, int(math.Ceil(sj)), int(math.Ceil(sy))) {
				summits = append(summits, summit{j, y, v})
			}
		}
	}
	slices.SortStableFunc(summits, func(a, b summit) int { return cmp.Compare(b.light, a.light) })
	var found []calib.Centroid
	for _, s := range summits[:min(len(summits), 3*maxPeaks)] {
		c, err := calib.FitCentroid(p.Light, p.Variance, p.Elements, float64(s.j), float64(s.y), sj, sy, reachJ, reachY)
		if err != nil || c.ElementSigma > 3*sj+2 || c.RowSigma > 3*sy+2 || !inside(c, p) {
			continue // a nebula, or nothing
		}
		twice := slices.ContainsFunc(found, func(o calib.Centroid) bool {
			return math.Hypot((o.Element-c.Element)*c1, (o.Row-c.Row)*c2) < max(c1, c2, guessArcsec)
		})
		if !twice {
			found = append(found, *c)
		}
	}
	slices.SortStableFunc(found, func(a, b calib.Centroid) int { return cmp.Compare(b.Light, a.Light) })
	return found[:min(len(found), maxPeaks)]
}

func inside(c *calib.Centroid, p *Picture) bool {
	return c.Element > -0.5 && c.Element < float64(p.Elements)-0.5 && c.Row > -0.5 && c.Row < float64(p.Rows)-0.5
}

// summitSigmas of the noise above the median of the field make a place worth a fit.
const summitSigmas = 5

// smoothed is the mean over the good places within so many elements and rows, not a number
// without any, and what it must exceed to be a star.
func (p *Picture) smoothed(dj, dy int) (light []float64, threshold float64) {
	out, noise := make([]float64, len(p.Light)), 0.0
	var all []float64
	for y := range p.Rows {
		for j := range p.Elements {
			sum, variance, n := 0.0, 0.0, 0
			for y1 := max(0, y-dy); y1 <= min(p.Rows-1, y+dy); y1++ {
				for j1 := max(0, j-dj); j1 <= min(p.Elements-1, j+dj); j1++ {
					if i := y1*p.Elements + j1; p.Variance[i] > 0 {
						sum += p.Light[i]
						variance += p.Variance[i]
						n++
					}
				}
			}
			out[y*p.Elements+j] = sum / float64(n)
			if n > 0 {
				all = append(all, sum/float64(n))
				noise += variance / (float64(n) * float64(n))
			}
		}
	}
	if len(all) == 0 {
		return out, math.Inf(1)
	}
	slices.Sort(all)
	return out, all[len(all)/2] + summitSigmas*math.Sqrt(noise/float64(len(all)))
}

// highest tells whether nothing within so many elements and rows is above a place.
func (p *Picture) highest(light []float64, j, y, dj, dy int) bool {
	at := y*p.Elements + j
	for y1 := max(0, y-dy); y1 <= min(p.Rows-1, y+dy); y1++ {
		for j1 := max(0, j-dj); j1 <= min(p.Elements-1, j+dj); j1++ {
			i := y1*p.Elements + j1
			if light[i] > light[at] || light[i] == light[at] && i < at {
				return false
			}
		}
	}
	return true
}
