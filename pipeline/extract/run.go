package extract

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
)

// Options of Run. An aperture asks for its spectrum, with the bands and lines in it;
// without one, Image and Lines ask for maps of the whole field.
type Options struct {
	// Run is the folder of a reduction or of a combination of them, or its cube.fits.
	Run      string
	Spectrum SpectrumOptions
	Image    *Band
	Lines    *LineOptions
	// Out is a folder that exists and is empty.
	Out string
	// Progress, which may be nil, is called as a stage gets on.
	Progress func(stage string, done, total int)
}

// Answer says what was found and written.
type Answer struct {
	Cube    string `json:"cube"`
	CubeSHA string `json:"cube_sha256"`
	Unit    string `json:"unit"`
	// Runs is how many the cube is made of; they are taken to be independent.
	Runs     int             `json:"runs"`
	Files    []string        `json:"files"`
	Spectrum *SpectrumAnswer `json:"spectrum,omitempty"`
	Image    *ImageAnswer    `json:"image,omitempty"`
	Lines    *LinesAnswer    `json:"lines,omitempty"`
}

// SpectrumAnswer sums up a spectrum.
type SpectrumAnswer struct {
	Aperture string  `json:"aperture"`
	RADeg    float64 `json:"ra_deg"`
	DecDeg   float64 `json:"dec_deg"`
	Element  float64 `json:"element"`
	Row      float64 `json:"row"`
	// AreaVoxels is the shape's, Channels the number of wavelengths with a value.
	AreaVoxels float64 `json:"area_voxels"`
	Channels   int     `json:"channels"`
	// MedianSN is that of a channel, ErrorOverNaive the median of error over naive
	// error.
	MedianSN       float64      `json:"median_sn"`
	ErrorOverNaive float64      `json:"error_over_naive"`
	Bands          []BandAnswer `json:"bands,omitempty"`
	Lines          *LinesAnswer `json:"lines,omitempty"`
}

// BandAnswer is the light of the aperture in a band.
type BandAnswer struct {
	FromNM     float64  `json:"from_nm"`
	ToNM       float64  `json:"to_nm"`
	Signal     *float64 `json:"signal"` // null where the band holds a channel without a value
	Error      *float64 `json:"error"`
	NaiveError *float64 `json:"naive_error"`
	Unit       string   `json:"unit"`
}

// Run extracts what opts asks for into opts.Out. Errors are one sentence that names
// what is wrong and the cure.
func Run(ctx context.Context, opts Options) (*Answer, error) {
	if opts.Progress == nil {
		opts.Progress = func(string, int, int) {}
	}
	c, err := Open(opts.Run)
	if err != nil {
		return nil, err
	}
	defer c.Close() // only read from
	a := &Answer{Cube: c.Path(), CubeSHA: c.SHA, Unit: c.Unit, Runs: c.Runs()}
	if opts.Spectrum.Aperture != nil {
		s, err := c.Spectrum(ctx, opts.Spectrum)
		if err != nil {
			return nil, err
		}
		if err := c.writeSpectrum(opts.Out, opts.Spectrum, s); err != nil {
			return nil, err
		}
		a.Spectrum = s.Answer(opts.Spectrum, c.Unit)
		a.Files = append(a.Files, SpectrumFITS, SpectrumCSV, SpectrumPlot)
	}
	if opts.Image != nil {
		if a.Image, err = c.runImage(ctx, opts); err != nil {
			return nil, err
		}
		a.Files = append(a.Files, ImageFITS, ImageCSV)
		a.addPicture(opts.Out, ImagePlot)
	}
	if opts.Lines != nil {
		if a.Lines, err = c.runLines(ctx, opts); err != nil {
			return nil, err
		}
		a.Files = append(a.Files, LinesFITS, LinesCSV)
		a.addPicture(opts.Out, LinesPlot)
	}
	if len(a.Files) == 0 {
		return nil, fmt.Errorf("nothing to extract from %s; name an aperture, a band or lines", filepath.Base(c.Path()))
	}
	return a, nil
}

// addPicture lists a picture if there was something to draw.
func (a *Answer) addPicture(dir, name string) {
	if _, err := os.Stat(filepath.Join(dir, name)); err == nil {
		a.Files = append(a.Files, name)
	}
}

// Answer sums up the spectrum that o asked for of a cube in unit.
func (s *Spectrum) Answer(o SpectrumOptions, unit string) *SpectrumAnswer {
	a := &SpectrumAnswer{
		Aperture: o.Aperture.Text, RADeg: s.Position.RADeg, DecDeg: s.Position.DecDeg, Element: s.Element, Row: s.Row, AreaVoxels: s.Area,
	}
	var sn, ratio []float64
	for l, v := range s.Signal {
		if e := s.Error[l]; !math.IsNaN(v) && e > 0 {
			a.Channels++
			sn, ratio = append(sn, v/e), append(ratio, e/s.Naive[l])
		}
	}
	a.MedianSN, a.ErrorOverNaive = median(sn), median(ratio)
	for _, b := range s.Bands {
		a.Bands = append(a.Bands, BandAnswer{b.FromNM, b.ToNM, known(b.Signal), known(b.Error), known(b.Naive), b.Unit})
	}
	if s.Lines != nil {
		a.Lines = &LinesAnswer{Status: int(s.LineStatus), Unit: bandUnit(unit), Lines: lineAnswers(s.Lines)}
	}
	return a
}

// known is nil for what is not a number.
func known(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// median is 0 without values.
func median(x []float64) float64 {
	if len(x) == 0 {
		return 0
	}
	x = slices.Clone(x)
	slices.Sort(x)
	return x[len(x)/2]
}
