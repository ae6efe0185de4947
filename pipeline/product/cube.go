package product

import (
	"fmt"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/sequence"
	"mirrorloom/pipeline/version"
)

// Names of files and HDUs.
const (
	CubeFile     = "cube.fits"
	ElementsFile = "elements.fits"
	LedgerFile   = "ledger.csv"
	RunFile      = "run.json"
	ReportFile   = "report.html"

	Signal     = "SIGNAL"     // detected electrons of one science exposure
	Variance   = "VARIANCE"   // their variance
	FlagsImage = "FLAGS"      // bits, see Flags
	Scale      = "SCALE"      // measured error scale q, 1 until it is measured
	Sky        = "SKY"        // truth only: the sky's part of SIGNAL
	Frames     = "FRAMES"     // the ledger as a table
	Dispersion = "DISPERSION" // wavelength solution by element and row
	Code       = "CODE"       // which element has which code column, see CodeTable
	// The images that errors of sums over voxels need, see NoiseImages.
	PixelVariance = "PIXELVAR"
	SlitResponse  = "SLITRESP"
	BandResponse  = "BANDRESP"
)

// The images of cube.fits by their place in the file, counted from 0.
const (
	SignalImage = iota
	VarianceImage
	FlagsImageIndex
	ScaleImage
	PixelVarianceImage
	SlitResponseImage // where there is a response
	BandResponseImage
)

// Units of SIGNAL and VARIANCE before flux calibration. FITS knows no unit
// "electron": a count stands for one detected electron (Standard 4.3).
const (
	UnitSignal   = "ct"
	UnitVariance = "ct2"
)

// Schema is the shape of a cube and its place on the sky and in wavelength.
type Schema struct {
	// Elements, Rows and Grid are the axes in FITS order.
	Elements, Rows int
	Grid           instrument.Grid
	// Frame is the standard of rest of the grid's wavelengths.
	Frame SpectralFrame
	// RADeg and DecDeg (ICRS) lie at element (n-1)/2 + ElementShift and detector row
	// RowCenter, both counted from 0. ElementShift is 0 but where cubes were put
	// together.
	RADeg, DecDeg float64
	RowCenter     float64
	ElementShift  float64
	// RotangDeg is the position angle of +axis 2, north through east; east is
	// towards -axis 1 at 0 unless Parity is -1.
	RotangDeg float64
	Parity    int
	// C1Deg and C2Deg are the steps of axes 1 and 2 on the sky, degrees.
	C1Deg, C2Deg float64
	Object       string
}

// NewSchema gives the cube that a sequence makes on the profile's grid.
func NewSchema(seq *sequence.Sequence) Schema {
	p, t := seq.Profile, seq.Target
	c1, c2 := p.VoxelDeg(seq.ElementMirrors())
	return Schema{
		Elements: seq.N(), Rows: p.Detector.Rows, Grid: p.Grid,
		RADeg: t.RADeg, DecDeg: t.DecDeg, RowCenter: p.Spectrograph.YCenterPx,
		RotangDeg: t.RotangDeg, Parity: p.DMD.Parity,
		C1Deg: c1, C2Deg: c2, Object: t.Name,
	}
}

// Axes are the cube's axes in FITS order.
func (s Schema) Axes() []int { return []int{s.Elements, s.Rows, s.Grid.Count} }

// Header gives an image's header: the whole WCS, BUNIT where unit is not
// empty, and further cards. The image's name is left to the writer.
func (s Schema) Header(unit string, more ...fitsutil.Card) (*fitsutil.Header, error) {
	h := fitsutil.NewHeader()
	cards := s.wcs()
	if unit != "" {
		cards = append([]card{{"BUNIT", unit, "unit of the pixel values"}}, cards...)
	}
	if err := set(h, cards); err != nil {
		return nil, err
	}
	for _, c := range more {
		if err := h.Set(c.Key, c.Value, c.Comment); err != nil {
			return nil, fmt.Errorf("cube header: %w", err)
		}
	}
	return h, nil
}

// layer is an image of a product: its name, unit, sample type and further cards.
type layer struct {
	name, unit string
	bitpix     int
	cards      []card
}

// decodedLayers are the images that cube and element cube share, in their order.
func decodedLayers(signal, variance string) []layer {
	return []layer{
		{Signal, signal, -32, nil},
		{Variance, variance, -32, nil},
		{FlagsImage, "", 16, flagCards()},
	}
}

// Images gives the four images of cube.fits in their order.
func (s Schema) Images() ([]fitsutil.ImageSpec, error) { return s.ImagesOnSky(OnSky{}) }

// ImagesOnSky are Images of a cube to which that was done.
func (s Schema) ImagesOnSky(o OnSky) ([]fitsutil.ImageSpec, error) {
	var specs []fitsutil.ImageSpec
	for _, im := range append(decodedLayers(o.Units()), layer{Scale, "", -32, nil}) {
		h, err := s.Header(im.unit, o.Cards()...)
		if err != nil {
			return nil, err
		}
		if err := set(h, im.cards); err != nil {
			return nil, err
		}
		specs = append(specs, fitsutil.ImageSpec{Name: im.name, Header: h, BITPIX: im.bitpix, Axes: s.Axes()})
	}
	return specs, nil
}

// Provenance says which software, profile, sequence and recipe made a cube and
// of how many frames.
type Provenance struct {
	ProfileName, ProfileSHA, SequenceSHA, RecipeSHA string
	FramesUsed, FramesLost                          int
}

// Primary gives the primary header of cube.fits and elements.fits.
func (p Provenance) Primary(object string) (*fitsutil.Header, error) {
	h := fitsutil.NewHeader()
	err := set(h, []card{
		{"OBJECT", object, "target"},
		{"SOFTVERS", "mirrorloom " + version.Version, "software that made this file"},
		{"PROFNAME", p.ProfileName, "instrument profile"},
		{"PROFSHA", p.ProfileSHA, "SHA-256 of the profile"},
		{"SEQSHA", p.SequenceSHA, "SHA-256 of the sequence"},
		{"RECSHA", p.RecipeSHA, "SHA-256 of the recipe"},
		{"NFRAMES", p.FramesUsed, "science frames used"},
		{"NLOST", p.FramesLost, "science frames lost"},
	})
	return h, err
}

// ElementImages gives the images of elements.fits: axes x, y, column, in
// detector coordinates, dark columns too.
func ElementImages(columns, rows, v int) ([]fitsutil.ImageSpec, error) {
	var specs []fitsutil.ImageSpec
	for _, im := range decodedLayers(UnitSignal, UnitVariance) {
		h := fitsutil.NewHeader()
		cards := im.cards
		if im.unit != "" {
			cards = append([]card{{"BUNIT", im.unit, "unit of the pixel values"}}, cards...)
		}
		if err := set(h, cards); err != nil {
			return nil, err
		}
		specs = append(specs, fitsutil.ImageSpec{Name: im.name, Header: h, BITPIX: im.bitpix, Axes: []int{columns, rows, v}})
	}
	return specs, nil
}

type card struct {
	key     string
	value   any
	comment string
}

func set(h *fitsutil.Header, cards []card) error {
	for _, c := range cards {
		if err := h.Set(c.key, c.value, c.comment); err != nil {
			return fmt.Errorf("product header: %w", err)
		}
	}
	return nil
}
