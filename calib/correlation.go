package calib

import "math"

// Correlation measures how resampling correlates voxels: the variance of a sum of
// many neighbouring voxels over the sum of their variances, along the wavelength and
// along the slit. Interpolation spreads each pixel's noise over neighbouring voxels:
// the sum has all of it, while sum w^2 var of each voxel is smaller. edges are a
// voxel row's (Geometry.EdgesX) for trace row y0; both results are at least about 1.
func Correlation(shift *RowShift, columns *Resampler, edges []float64, y0 int) (alongWavelength, alongSlit float64) {
	n := len(edges) - 1
	first, last := shift.Span(y0)
	ones := make([]float32, shift.columns)
	for i := range ones {
		ones[i] = 1
	}
	rows := make([][]float32, last-first+1)
	for i := range rows {
		rows[i] = ones
	}
	straight := make([]float32, shift.columns)
	shift.Variance(straight, rows, first, y0)
	signal, variance, flags := make([]float32, n), make([]float32, n), make([]Flag, n)
	columns.Resample(Voxels{Signal: signal, Variance: variance, Flags: flags, Stride: 1}, ones, straight, nil, edges)
	var whole, kept, sum, count float64
	for i, v := range variance {
		if flags[i] != 0 {
			continue
		}
		x := int(math.Round((edges[i] + edges[i+1]) / 2))
		// A sum over voxels has the variance of the straightened pixels it covers.
		whole += math.Abs(edges[i+1]-edges[i]) * float64(straight[x])
		kept += float64(v)
		sum += float64(straight[x])
		count++
	}
	if count == 0 {
		return 1, 1
	}
	return whole / kept, count / sum
}
