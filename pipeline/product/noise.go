package product

import (
	"fmt"

	"mirrorloom/fitsutil"
)

// Noise says what cube.fits has to hold besides VARIANCE for the errors of sums over
// voxels: voxels share pixels, and decoding couples the elements of one pixel.
type Noise struct {
	// Family, V and Poly name the code.
	Family string
	V      int
	Poly   uint32
	// Element is the element of each code column, -1 for a dark one; Frames is the
	// number of science frames of each code row.
	Element, Frames []int32
	// ThroughputErr is the relative standard error of the throughput of each code
	// row's frames taken together; 0 where it was not measured.
	ThroughputErr []float64
	// PhotonVariance is the variance of one electron's worth of light in a sample, 1
	// but for some read modes; K how often a column is open.
	PhotonVariance float64
	K              int
	// Columns and Rows are the detector's. Uniform and Mean tell what PIXELVAR holds: all
	// elements of a pixel have one variance, or the mean over the code's columns is given.
	Columns, Rows int
	Uniform, Mean bool
	// ResponseVariance is the mean relative variance of a pixel's response.
	ResponseVariance float64
	// Response tells whether the voxels were divided by a response.
	Response bool
}

// What plane 1 of PIXELVAR holds, on its card PIXVKIND.
const (
	// OfElements: the variance that every element of the pixel has when decoded.
	OfElements = "elements"
	// OfMean: the mean over the code columns of what decoding gives each, restored samples
	// taken for read ones.
	OfMean = "mean"
	// OfUnlit: the variance of one sample that no open mirror lights.
	OfUnlit = "unlit"
)

// NoiseImages are, behind the images of Schema.Images:
//
//   - PIXELVAR, axes (x, y, 2): plane 1 as its card PIXVKIND says, plane 2 the part
//     of an element's variance that all elements of the pixel share. As voxels are
//     made of them: after division by the pixel's response.
//   - with Response, SLITRESP, axes (element, row, 2), and BANDRESP, axes (element,
//     wavelength, 2): the two factors of the response by which voxels were divided,
//     and in plane 2 their relative variances.
func (n Noise) NoiseImages(s Schema) ([]fitsutil.ImageSpec, error) {
	kind := OfUnlit
	switch {
	case n.Uniform:
		kind = OfElements
	case n.Mean:
		kind = OfMean
	}
	h := fitsutil.NewHeader()
	err := set(h, []card{
		{"BUNIT", UnitVariance, "variance of detected electrons"},
		{"PIXVKIND", kind, "plane 1: of decoded elements, mean, unlit"},
		{"RESPVAR", n.ResponseVariance, "relative variance of a pixel's response"},
	})
	if err != nil {
		return nil, err
	}
	images := []fitsutil.ImageSpec{{Name: PixelVariance, Header: h, BITPIX: -32, Axes: []int{n.Columns, n.Rows, 2}}}
	if n.Response {
		images = append(images,
			fitsutil.ImageSpec{Name: SlitResponse, BITPIX: -32, Axes: []int{s.Elements, s.Rows, 2}},
			fitsutil.ImageSpec{Name: BandResponse, BITPIX: -32, Axes: []int{s.Elements, s.Grid.Count, 2}})
	}
	return images, nil
}

// CodeTable is the table CODE: row i tells of code column i (ELEMENT, -1 dark) and
// of code row i (NFRAMES, the science frames that show it, and the relative standard
// error of their throughput).
func (n Noise) CodeTable() (*fitsutil.Table, error) {
	t := &fitsutil.Table{Name: Code, Header: fitsutil.NewHeader(), Columns: []fitsutil.Column{
		{Name: "ELEMENT", Format: "J", Data: n.Element},
		{Name: "NFRAMES", Format: "J", Data: n.Frames},
		{Name: "THROUGHPUT_ERR", Format: "D", Data: n.ThroughputErr},
	}}
	return t, set(t.Header, []card{
		{"FAMILY", n.Family, "code"},
		{"CODEV", n.V, "code rows and columns"},
		{"CODEK", n.K, "ones in a column"},
		{"CODEPOLY", int64(n.Poly), "of an m-sequence or a Singer code"},
		{"PHOTVAR", n.PhotonVariance, "variance of light in a sample, over the light"},
	})
}

// ReadNoise reads from a cube.fits what NoiseImages and CodeTable have put there.
// The pixels of the images are left to the caller. The errors name the file and the
// cure.
func ReadNoise(f *fitsutil.File) (*Noise, error) {
	t, err := f.Table(Code)
	if err != nil {
		return nil, fmt.Errorf("%w; the cube is of a version without it: make it again with reduce", err)
	}
	n := new(Noise)
	if n.Family, err = t.Header.Str("FAMILY"); err != nil {
		return nil, err
	}
	if n.PhotonVariance, err = t.Header.Float("PHOTVAR"); err != nil {
		return nil, err
	}
	for _, c := range []struct {
		key string
		to  func(int64)
	}{
		{"CODEV", func(x int64) { n.V = int(x) }}, {"CODEK", func(x int64) { n.K = int(x) }},
		{"CODEPOLY", func(x int64) { n.Poly = uint32(x) }},
	} {
		x, err := t.Header.Int(c.key)
		if err != nil {
			return nil, err
		}
		c.to(x)
	}
	if n.Element, err = t.Int32s("ELEMENT"); err != nil {
		return nil, err
	}
	if n.Frames, err = t.Int32s("NFRAMES"); err != nil {
		return nil, err
	}
	if n.ThroughputErr, err = t.Float64s("THROUGHPUT_ERR"); err != nil {
		return nil, err
	}
	if n.V < 1 || len(n.Element) != n.V || n.K < 1 {
		return nil, fmt.Errorf("%s: table %s has %d rows for a code of %d columns; make the cube again with reduce", f.Path(), Code, len(n.Element), n.V)
	}
	return n, n.readImages(f)
}

func (n *Noise) readImages(f *fitsutil.File) error {
	im, err := f.ImageNamed(PixelVariance)
	if err != nil {
		return err
	}
	kind, err := im.Header.Str("PIXVKIND")
	if err != nil {
		return err
	}
	if n.ResponseVariance, err = im.Header.Float("RESPVAR"); err != nil {
		return err
	}
	n.Uniform, n.Mean, n.Columns, n.Rows = kind == OfElements, kind == OfMean, im.Width(), im.Height()
	for _, u := range f.HDUs() {
		n.Response = n.Response || u.Name == SlitResponse
	}
	return nil
}
