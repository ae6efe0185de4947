package reduce

import (
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
)

// noise is what errors of sums over voxels will need to know: see product.Noise.
func (r *reduction) noise() product.Noise {
	n := product.Noise{
		Family: r.seq.Family, V: r.seq.V, K: r.seq.K, Poly: r.seq.Poly,
		PhotonVariance: 1 + r.camera.PhotonExcess,
		Columns:        r.camera.Columns, Rows: r.camera.Rows, Uniform: r.shape.uniform,
		Mean:             !r.shape.uniform && hadamard.Family(r.seq.Family) != hadamard.SlitScan,
		ResponseVariance: r.optics.pixelVariance(), Response: r.optics.response != nil,
		Element: make([]int32, r.seq.V), Frames: make([]int32, r.seq.V), ThroughputErr: make([]float64, r.seq.V),
	}
	for i := range n.Element {
		n.Element[i] = -1
		n.Frames[i] = int32(len(r.roles.slots[i]))
	}
	for j, column := range r.seq.ElementColumns() {
		n.Element[column] = int32(j)
	}
	for row, frames := range r.roles.slots {
		square := 0.0
		for _, f := range frames {
			if e := r.night.Ledger[f.Entry].ThroughputErr; e > 0 { // not NaN: measured
				square += e * e
			}
		}
		n.ThroughputErr[row] = math.Sqrt(square) / float64(max(1, len(frames)))
	}
	return n
}

// noiseImages are those of the noise behind the cube's own.
func (r *reduction) noiseImages() ([]fitsutil.ImageSpec, error) {
	return r.noise().NoiseImages(r.schema)
}

// writePixelVariance writes a row of PIXELVAR.
func (r *reduction) writePixelVariance(row *decodedRow) error {
	own, common := row.pixelVariance(r.shape.uniform)
	for plane, data := range [][]float32{own, common} {
		if err := r.cube.WriteStrip(product.PixelVarianceImage, row.y, 1, plane, 1, data); err != nil {
			return err
		}
	}
	return nil
}

// writeResponses writes the response by which voxels were divided.
func (r *reduction) writeResponses() error {
	if f := r.optics.response; f != nil {
		// BANDRESP has the order of a plane of the cube's elements and wavelengths.
		band, variance := transposed(f.Band, f.Elements, f.Voxels), transposed(f.BandVariance, f.Elements, f.Voxels)
		for _, im := range []struct {
			image, rows, plane int
			data               []float32
		}{
			{product.SlitResponseImage, f.Rows, 0, f.Slit}, {product.SlitResponseImage, f.Rows, 1, f.SlitVariance},
			{product.BandResponseImage, f.Voxels, 0, band}, {product.BandResponseImage, f.Voxels, 1, variance},
		} {
			if err := r.cube.WriteStrip(im.image, 0, im.rows, im.plane, 1, im.data); err != nil {
				return err
			}
		}
	}
	return nil
}

// finishNoise appends the table of the code, and the response where it is not written yet.
func (r *reduction) finishNoise() error {
	if !r.toSky() {
		if err := r.writeResponses(); err != nil {
			return err
		}
	}
	table, err := r.noise().CodeTable()
	if err != nil {
		return err
	}
	return r.cube.AppendTable(table)
}

// transposed turns [a][b] into [b][a].
func transposed(x []float32, a, b int) []float32 {
	out := make([]float32, len(x))
	for i := range a {
		for j := range b {
			out[j*a+i] = x[i*b+j]
		}
	}
	return out
}
