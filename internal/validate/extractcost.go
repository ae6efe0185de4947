package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"

	"mirrorloom/calib"
	"mirrorloom/fitsutil"
	"mirrorloom/hadamard"
	"mirrorloom/internal/child"
	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
)

// The cube whose apertures are timed: 2 GB.
const (
	costV, costElements, costRows, costVoxels = 127, 111, 1024, 1260
	costColumns                               = 1600
)

// extractCost must come early among the checks: see package child.
func extractCost() check {
	return check{
		name: "Cost of extract",
		about: fmt.Sprintf(`A cube of %d elements, %d rows and %d wavelengths, 2 GB, written without a night.
extract, the command as built, takes a circle of 3 arcsec (radius) less a ring of 4 to 6,
with a band and a line. Wall time and peak memory (ru_maxrss) are those of the process; the cube is in
the system's cache.`, costElements, costRows, costVoxels),
		run: runExtractCost,
	}
}

func runExtractCost(ctx context.Context, dir string) ([]trial.Finding, error) {
	cube := filepath.Join(dir, product.CubeFile)
	if err := writeLargeCube(cube); err != nil {
		return nil, err
	}
	info, err := os.Stat(cube)
	if err != nil {
		return nil, err
	}
	u, err := child.Run(ctx, program, "extract", cube, "--circle", "60.3 500.2 3", "--in-voxels", "--annulus", "4 6",
		"--band", "500-520", "--lines", "600", "-o", filepath.Join(dir, "out"))
	if err != nil {
		return nil, err
	}
	const most = 200 << 20
	return []trial.Finding{
		trial.AtLeast("size of the cube, GB", float64(info.Size())/1e9, 2, 1),
		trial.Below("extract of one aperture, wall time, s", u.Wall.Seconds(), 2, 1),
		trial.Stated("the same, time of the processors, s", u.CPU.Seconds(), 1),
		{What: "peak memory", Required: "<= 200 MiB", Measured: fmt.Sprintf("%.1f MiB", float64(u.PeakBytes)/(1<<20)), N: 1, OK: u.PeakBytes <= most},
	}, nil
}

// writeLargeCube writes a cube of even light, with all that extract reads.
func writeLargeCube(path string) error {
	s := product.Schema{
		Elements: costElements, Rows: costRows, Grid: instrument.Grid{FirstNM: 480, StepNM: 0.15, Count: costVoxels},
		RADeg: 123.3, DecDeg: 21.6, RowCenter: 511.5, Parity: 1, C1Deg: 0.57 / 3600, C2Deg: 0.28 / 3600, Object: "even light",
	}
	code, err := hadamard.New(hadamard.MSequence, costV)
	if err != nil {
		return err
	}
	noise := product.Noise{
		Family: string(hadamard.MSequence), V: costV, K: code.K(), Poly: code.Poly(), PhotonVariance: 1, Columns: costColumns, Rows: costRows, Uniform: true,
		Element: make([]int32, costV), Frames: make([]int32, costV), ThroughputErr: make([]float64, costV),
	}
	for i := range noise.Element {
		noise.Element[i], noise.Frames[i] = -1, 1
		if i < costElements {
			noise.Element[i] = int32(i)
		}
	}
	primary, err := product.Provenance{ProfileName: "optical"}.Primary(s.Object)
	if err != nil {
		return err
	}
	images, err := s.Images()
	if err != nil {
		return err
	}
	more, err := noise.NoiseImages(s)
	if err != nil {
		return err
	}
	cube, err := fitsutil.CreateCube(path, primary, append(images, more...))
	if err != nil {
		return err
	}
	defer cube.Abort() // nothing after Commit
	if err := fillLargeCube(cube); err != nil {
		return err
	}
	if err := appendLargeTables(cube, &noise); err != nil {
		return err
	}
	return cube.Commit()
}

// fillLargeCube writes light of 20 e a voxel, as if all samples held 1400 e.
func fillLargeCube(cube *fitsutil.Cube) error {
	const light, variance = 20, 0.35
	n := costElements * costRows
	signal, variances, flags := make([]float32, n), make([]float32, n), make([]int16, n)
	pixels := make([]float32, costColumns*costRows)
	for i := range signal {
		signal[i], variances[i] = light, variance
	}
	for i := range pixels {
		pixels[i] = variance
	}
	for l := range costVoxels {
		for i, data := range []any{signal, variances, flags, variances} {
			if err := cube.WriteStrip(i, 0, costRows, l, 1, data); err != nil {
				return err
			}
		}
	}
	if err := cube.WriteStrip(product.PixelVarianceImage, 0, costRows, 0, 1, pixels); err != nil {
		return err
	}
	return cube.WriteStrip(product.PixelVarianceImage, 0, costRows, 1, 1, make([]float32, len(pixels)))
}

func appendLargeTables(cube *fitsutil.Cube, noise *product.Noise) error {
	g := calib.Geometry{X_c: 799.5, Y_c: 511.5, X_e: 1.96, J_c: (costElements - 1) / 2.0, L_c: 574.5, D: [3]float64{6.6, 0, 0}, SlitTilt: 0.015, TraceTilt: 0.0045}
	t := &fitsutil.Table{Name: product.Dispersion, Header: fitsutil.NewHeader(), Columns: []fitsutil.Column{{Name: "ELEMENT", Format: "J", Data: []int32{0}}}}
	if err := product.SetGeometry(t.Header, g.Parameters()); err != nil {
		return err
	}
	if err := cube.AppendTable(t); err != nil {
		return err
	}
	table, err := noise.CodeTable()
	if err != nil {
		return err
	}
	return cube.AppendTable(table)
}
