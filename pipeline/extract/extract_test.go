package extract_test

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/extract"
)

// A pixel of a narrow-band image is the band of a spectrum of one voxel, errors
// included.
func TestImageIsTheBandOfOneVoxel(t *testing.T) {
	c, err := extract.Open(tinyRun(t, "m-sequence", 31, 8))
	require.NoError(t, err)
	defer c.Close()
	band := extract.Band{FromNM: 499.2, ToNM: 501.1, Sides: [][2]float64{{497, 498.6}, {501.6, 502.5}}}
	im, err := c.Image(t.Context(), band, func(int) {})
	require.NoError(t, err)
	shape, err := extract.ParseVoxels("11", "7")
	require.NoError(t, err)
	s, err := c.Spectrum(t.Context(), extract.SpectrumOptions{Aperture: shape, Bands: []extract.Band{band}})
	require.NoError(t, err)
	at := 7*c.Elements + 11
	require.InEpsilon(t, s.Bands[0].Signal, im.Signal[at], 1e-4)
	require.InEpsilon(t, s.Bands[0].Error, im.Error[at], 1e-3)
	require.InEpsilon(t, s.Bands[0].Naive, im.Naive[at], 1e-4)
	require.NotEqual(t, im.Error[at], im.Naive[at])
}

// Products are standard FITS, sit on the sky where the cube does, and their errors
// are those that the covariance image says.
func TestCrosscheckProducts(t *testing.T) {
	run := tinyRun(t, "m-sequence", 31, 8)
	dir := t.TempDir()
	shape, err := extract.ParseCircle("11 7 1.2", true)
	require.NoError(t, err)
	around, err := extract.ParseAnnulus("1.4 3", shape)
	require.NoError(t, err)
	band := extract.Band{FromNM: 499.2, ToNM: 501.1}
	lines := &extract.LineOptions{RestNM: []float64{500}, MinSN: 5}
	_, err = extract.Run(t.Context(), extract.Options{Run: run, Out: dir, Spectrum: extract.SpectrumOptions{
		Aperture: shape, Background: around, Bands: []extract.Band{band}, Lines: lines}})
	require.NoError(t, err)
	_, err = extract.Run(t.Context(), extract.Options{Run: run, Out: dir, Image: &band, Lines: lines})
	require.NoError(t, err)
	for _, name := range []string{extract.SpectrumFITS, extract.ImageFITS, extract.LinesFITS} {
		require.Contains(t, outside.Program(t, "fitsverify", filepath.Join(dir, name)), "found 0 warning(s) and 0 error(s)")
	}
	var place struct {
		RADiff, DecDiff, VarianceDiff, BandDiff float64
		Center                                  [2]float64
	}
	out := outside.Python(t, "extract_products.py", filepath.Join(run, "cube.fits"), dir)
	require.NoError(t, json.Unmarshal([]byte(out), &place))
	require.Less(t, math.Abs(place.RADiff)+math.Abs(place.DecDiff), 1e-9)
	require.Less(t, place.VarianceDiff, 1e-9)
	c, err := extract.Open(run)
	require.NoError(t, err)
	defer c.Close()
	at := c.Position(3, 5)
	require.InDelta(t, place.Center[0], at.RADeg, 1e-9)
	require.InDelta(t, place.Center[1], at.DecDeg, 1e-9)
	// The same aperture by its place on the sky, in degrees and in hours.
	p := c.Position(11, 7)
	sky, err := extract.ParseCircle(outside.Python(t, "extract_products.py", "sexagesimal", num(p.RADeg), num(p.DecDeg))+" 1.2", false)
	require.NoError(t, err)
	a, err := c.Spectrum(t.Context(), extract.SpectrumOptions{Aperture: sky})
	require.NoError(t, err)
	b, err := c.Spectrum(t.Context(), extract.SpectrumOptions{Aperture: shape})
	require.NoError(t, err)
	require.InEpsilonSlice(t, b.Signal[2:14], a.Signal[2:14], 1e-4)
}

func num(x float64) string {
	text, _ := json.Marshal(x) // a finite number
	return string(text)
}

// A cube in other units, its VARIANCE scaled with it, gives errors scaled alike.
func TestUnitsScaleErrors(t *testing.T) {
	const factor = 7.5
	run := tinyRun(t, "m-sequence", 31, 8)
	shape, err := extract.ParseVoxels("10-13", "6-8")
	require.NoError(t, err)
	spectrum := func(path string) *extract.Spectrum {
		c, err := extract.Open(path)
		require.NoError(t, err)
		defer c.Close()
		s, err := c.Spectrum(t.Context(), extract.SpectrumOptions{Aperture: shape, Bands: []extract.Band{{FromNM: 499.2, ToNM: 501.1}}})
		require.NoError(t, err)
		return s
	}
	before := spectrum(run)
	scaled := filepath.Join(t.TempDir(), "cube.fits")
	rescale(t, filepath.Join(run, "cube.fits"), scaled, factor)
	after := spectrum(scaled)
	for l, v := range before.Error {
		require.InEpsilon(t, before.Signal[l]*factor, after.Signal[l], 1e-4)
		require.InEpsilon(t, v*factor, after.Error[l], 1e-3)
		require.InDelta(t, before.Covariance[l][1]*factor*factor, after.Covariance[l][1], 5e-3*v*v*factor*factor)
	}
	// The band of a density is its sum times the voxel, 0.5 nm.
	require.InEpsilon(t, before.Bands[0].Error*factor*0.5, after.Bands[0].Error, 1e-3)
	require.Equal(t, "aW m-2", after.Bands[0].Unit)
}

// rescale copies a cube with SIGNAL times factor and VARIANCE times its square, as a
// flux calibration would.
func rescale(t *testing.T, from, to string, factor float32) {
	t.Helper()
	f, err := fitsutil.Open(from)
	require.NoError(t, err)
	defer f.Close()
	var hdus []any
	for i, u := range f.HDUs()[1:] {
		if u.Kind == fitsutil.BinTableHDU {
			table, err := f.TableAt(i + 1)
			require.NoError(t, err)
			hdus = append(hdus, table)
			continue
		}
		im, err := f.Image(i + 1)
		require.NoError(t, err)
		plane := im.Width() * im.Height()
		data := make([]float32, plane*im.Planes())
		for l := range im.Planes() {
			require.NoError(t, im.ReadPlaneRows(data[l*plane:(l+1)*plane], l, 0, im.Height()))
		}
		header := u.Header.Clone()
		scale, unit := float32(1), ""
		switch u.Name {
		case "SIGNAL":
			scale, unit = factor, "aW m-2 nm-1"
		case "VARIANCE":
			scale, unit = factor*factor, "(aW m-2 nm-1)2"
		}
		if unit != "" {
			require.NoError(t, header.Set("BUNIT", unit, ""))
		}
		for p := range data {
			data[p] *= scale
		}
		hdus = append(hdus, &fitsutil.ImageData{Name: u.Name, Header: header, Axes: u.Axes, Data: data})
	}
	require.NoError(t, fitsutil.WriteFile(to, f.HDUs()[0].Header, hdus...))
}

// A cube whose wavelengths are others says what it is and what to do.
func TestOtherGridsRefused(t *testing.T) {
	run := tinyRun(t, "m-sequence", 31, 8)
	for _, c := range [][3]string{{"CTYPE3", "FREQ", "FREQ"}, {"CTYPE1", "GLON-TAN", "GLON-TAN"}, {"SPECSYS", "BARYCENT", "VELOSYS"}} {
		other := filepath.Join(t.TempDir(), "cube.fits")
		f, err := fitsutil.Open(filepath.Join(run, "cube.fits"))
		require.NoError(t, err)
		defer f.Close()
		header := f.HDUs()[1].Header.Clone()
		require.NoError(t, header.Set(c[0], c[1], ""))
		axes := f.HDUs()[1].Axes
		image := func(name string) *fitsutil.ImageData {
			return &fitsutil.ImageData{Name: name, Header: header, Axes: axes, Data: make([]float32, axes[0]*axes[1]*axes[2])}
		}
		require.NoError(t, fitsutil.WriteFile(other, nil, image("SIGNAL"), image("VARIANCE"), image("FLAGS")))
		_, err = extract.Open(other)
		require.ErrorIs(t, err, extract.ErrGrid)
		require.ErrorContains(t, err, c[2])
	}
}

// Without a run, or with something else in its place, the error names the file.
func TestOpenRefuses(t *testing.T) {
	path := filepath.Join(t.TempDir(), "cube.fits")
	_, err := extract.Open(path)
	require.ErrorContains(t, err, path)
	require.NoError(t, os.WriteFile(path, []byte("no FITS"), 0o644))
	_, err = extract.Open(path)
	require.ErrorContains(t, err, path)
	require.NoError(t, fitsutil.WriteFile(path+".fits", nil, &fitsutil.ImageData{Name: "SIGNAL", Axes: []int{2, 2}, Data: make([]float32, 4)}))
	_, err = extract.Open(path + ".fits")
	require.ErrorContains(t, err, path)
}
