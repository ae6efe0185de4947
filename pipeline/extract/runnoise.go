package extract

import (
	"context"
	"math"
)

// fieldNoise gives the errors of the spectra of single elements and rows, one after the
// other, by the runs that the cube is made of.
type fieldNoise struct {
	from, to int
	runs     []*runNoise
	// variance and part are scratch, of a run.
	variances, weights []float64
	part               [][]float64
}

// runNoise is what a run has to do with it.
type runNoise struct {
	member
	alone bool // the cube is this run
	noise *spectrumNoise
	slit  []float32 // of the row
	row   int       // of the run
	inRow bool      // it has the row
	here  bool      // it has the element and row
	// voxels are its own there, responses their errors that channels share, and share its
	// part in each channel of the mean.
	voxels    spectrumVoxels
	responses responseNoise
	share     []float64
}

// newFieldNoise is for channels from..to-1.
func (c *Cube) newFieldNoise(from, to int) *fieldNoise {
	n := to - from
	f := &fieldNoise{from: from, to: to, variances: make([]float64, n), weights: make([]float64, n), part: table[float64](n, Lags+1)}
	for _, m := range c.runs() {
		f.runs = append(f.runs, &runNoise{member: m, alone: c.members == nil, noise: m.newSpectrumNoise(), share: make([]float64, n)})
	}
	return f
}

// runVoxels are the voxels of a run in some rows of the cube, from the run's row first on.
type runVoxels struct {
	*voxelBlock
	first int
}

// readRuns reads, by run, channels from..to-1 of rows y0..y1-1; own are those of the cube.
func (c *Cube) readRuns(ctx context.Context, own *voxelBlock, from, to, y0, y1 int) ([]runVoxels, error) {
	if c.members == nil {
		return []runVoxels{{own, y0}}, nil
	}
	all := make([]runVoxels, len(c.members))
	for i, m := range c.members {
		first, end := max(y0-m.row, 0), min(y1-m.row, m.Rows)
		if first >= end {
			continue
		}
		b, err := m.readVoxels(ctx, from, to, first, end)
		if err != nil {
			return nil, err
		}
		all[i] = runVoxels{b, first}
	}
	return all, nil
}

// setRow prepares for row y of the cube.
func (f *fieldNoise) setRow(y int) (err error) {
	for _, r := range f.runs {
		_, r.row, r.inRow = r.place(r.element, y)
		if !r.inRow {
			continue
		}
		if err := r.noise.setRow(r.row); err != nil {
			return err
		}
		if r.slit, err = r.slitRow(1, r.row); err != nil {
			return err
		}
	}
	return nil
}

// setElement prepares for element j of the row, whose voxels in the cube are s and in the
// runs those of v.
func (f *fieldNoise) setElement(j int, s spectrumVoxels, v []runVoxels) {
	for i, r := range f.runs {
		var own int
		own, _, r.here = r.place(j, r.row+r.member.row)
		if r.here = r.here && r.inRow; !r.here {
			continue
		}
		r.voxels = v[i].spectrum((r.row-v[i].first)*r.Elements + own)
		r.noise.setElement(own, f.from, f.to)
		r.responses = r.sharedBy(r.slit, own, r.row, f.from)
		for l := range r.share {
			switch {
			case r.alone:
				r.share[l] = 1
			case s.good(l) && r.voxels.good(l):
				r.share[l] = share(s.variance[l], r.voxels.variance[l])
			default:
				r.share[l] = 0
			}
		}
	}
}

// variance of a sum over the channels with the given weights.
func (f *fieldNoise) variance(weights []float64) float64 {
	sum := 0.0
	for _, r := range f.runs {
		if !r.here {
			continue
		}
		for l, w := range weights {
			f.weights[l] = w * r.share[l]
		}
		sum += r.responses.variance(f.weights, r.voxels) + r.noise.variance(r.responses.onPixels(f.weights, r.voxels, r.noise))
	}
	return sum
}

// covariance fills dst, [channel][lag], for channels whose variances in the cube are given,
// 0 for those that do not count.
func (f *fieldNoise) covariance(dst [][]float64, variance []float64) {
	for l := range dst {
		clear(dst[l])
	}
	for _, r := range f.runs {
		if !r.here {
			continue
		}
		for l, v := range variance {
			f.variances[l] = v * r.share[l] // V_i (V/V_i)^2
		}
		r.noise.covariance(f.part, f.variances)
		for l, row := range f.part {
			for lag, v := range row {
				dst[l][lag] += v
			}
		}
	}
}

// shared is the relative variance of the light that its channels, whose variances in the
// cube are given, have in common: by the responses and the flux of each run.
func (f *fieldNoise) shared(variance []float64) float64 {
	sum, middle := 0.0, (f.to-f.from)/2
	for _, r := range f.runs {
		if !r.here {
			continue
		}
		part, n := 0.0, 0.0
		for l, v := range variance {
			if v > 0 {
				part += r.share[l]
				n++
			}
		}
		part /= math.Max(n, 1)
		sum += part * part * (r.responses.slit + r.responses.band(middle) + r.responses.flux(middle))
	}
	return sum
}
