package trial

import (
	"context"
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/extract"
	"mirrorloom/pipeline/product"
)

// SkySums compares sums over voxels of a cube without its sky with the truth without its
// own: pulls of the channels of each aperture, and of their sums over bands.
type SkySums struct{ Channels, Bands, Naive Moments }

// bandsOfSums in which channels are added up.
const bandsOfSums = 6

// Add takes the apertures, elements and rows as extract lists them, of the night named name.
func (s *SkySums) Add(ctx context.Context, n *Night, name string, apertures [][2]string) error {
	c, err := extract.Open(n.Run(name))
	if err != nil {
		return err
	}
	defer c.Close() // only read from
	cube, err := ReadCube(n.CubePath(name))
	if err != nil {
		return err
	}
	truth, err := n.SkylessTruth(cube, name)
	if err != nil {
		return err
	}
	var bands []extract.Band
	for b := range bandsOfSums {
		edge := func(k int) float64 { return c.Grid.WavelengthNM(float64(k*c.Grid.Count/bandsOfSums) - 0.5) }
		bands = append(bands, extract.Band{FromNM: edge(b), ToNM: edge(b + 1)})
	}
	for _, at := range apertures {
		shape, err := extract.ParseVoxels(at[0], at[1])
		if err != nil {
			return err
		}
		found, err := c.Spectrum(ctx, extract.SpectrumOptions{Aperture: shape, Bands: bands})
		if err != nil {
			return err
		}
		want := make([]float64, cube.Voxels)
		for l := range want {
			sum, some := 0.0, 0.0
			for _, y := range shape.Rows {
				for _, j := range shape.Elements {
					if i := (l*cube.Rows+y)*cube.N + j; cube.Good(i) {
						sum, some = sum+float64(truth[i]), some+1
					}
				}
			}
			want[l] = sum / some * float64(len(shape.Rows)*len(shape.Elements))
			if v := found.Signal[l]; v == v {
				s.Channels.Add((v - want[l]) / found.Error[l])
				s.Naive.Add((v - want[l]) / found.Naive[l])
			}
		}
		for b, band := range found.Bands {
			sum := 0.0
			for l := b * cube.Voxels / bandsOfSums; l < (b+1)*cube.Voxels/bandsOfSums; l++ {
				sum += want[l]
			}
			if v := band.Signal; !math.IsNaN(v) {
				s.Bands.Add((v - sum) / band.Error)
			}
		}
	}
	return nil
}

// SkylessTruth is the truth of a night on the grid of c without the sky's part.
func (n *Night) SkylessTruth(c *Cube, name string) ([]float32, error) {
	truth, err := c.ReadTruth(n.TruthPath(name))
	if err != nil {
		return nil, err
	}
	file, err := fitsutil.Open(n.TruthPath(name))
	if err != nil {
		return nil, err
	}
	defer file.Close() // only read from
	sky, _, err := readImage(file, product.Sky)
	if err != nil {
		return nil, err
	}
	for i := range truth {
		truth[i] -= sky[i]
	}
	return truth, nil
}
