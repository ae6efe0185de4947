package product

import (
	"errors"
	"fmt"
	"maps"
	"slices"

	"mirrorloom/fitsutil"
)

// Names of what a cube holds that was brought to the sky, and its units.
const (
	SkyTable   = "SKYSPEC"    // the sky that was subtracted, by wavelength
	SkyShare   = "SKYSHARE"   // image: weight of each element and row in it, and what part it sees
	FluxTable  = "FLUXFACTOR" // what turned counts into flux, by wavelength
	UnitFlux   = "aW m-2 nm-1"
	UnitFlux2  = "aW2 m-4 nm-2"
	cardSkySub = "SKYTAKEN"
)

// SkyRecord is the sky that was subtracted from a cube in counts, by wavelength: electrons
// of one science exposure, the same in all elements and rows.
type SkyRecord struct {
	Value, Variance []float64 // NaN where there is no sky
	// Weight is the sum of SKYSHARE over the voxels that were good, 1 if all were.
	Weight []float64
	Places []int32 // blank places that were good
	Line   []bool  // dominated by a line of the sky
}

// Table is the table SKYSPEC; row l tells of plane l.
func (s *SkyRecord) Table() *fitsutil.Table {
	return &fitsutil.Table{Name: SkyTable, Columns: []fitsutil.Column{
		{Name: "SKY", Format: "D", Unit: UnitSignal, Data: s.Value},
		{Name: "VARIANCE", Format: "D", Unit: UnitVariance, Data: s.Variance},
		{Name: "WEIGHT", Format: "D", Data: s.Weight},
		{Name: "PLACES", Format: "J", Data: s.Places},
		{Name: "LINE", Format: "L", Data: s.Line},
	}}
}

// FluxRecord is what turned counts into flux, by wavelength.
type FluxRecord struct {
	// Factor is flux over counts, NaN where it is not known; RelVariance its relative
	// variance, the same error in all voxels of the wavelength.
	Factor, RelVariance []float64
	// Transmission is that of the air in the mean of the science frames.
	Transmission []float64
}

// Table is the table FLUXFACTOR; row l tells of plane l.
func (f *FluxRecord) Table() *fitsutil.Table {
	return &fitsutil.Table{Name: FluxTable, Columns: []fitsutil.Column{
		{Name: "FACTOR", Format: "D", Unit: UnitFlux + " ct-1", Data: f.Factor},
		{Name: "RELVAR", Format: "D", Data: f.RelVariance},
		{Name: "TRANSMISSION", Format: "D", Data: f.Transmission},
	}}
}

// OnSky says what was done to a cube after it was made: each nil if it was not.
type OnSky struct {
	Sky  *SkyRecord
	Flux *FluxRecord
}

// Cards are for the images' headers and the primary one.
func (o OnSky) Cards() []fitsutil.Card {
	if o.Sky == nil {
		return nil
	}
	return []fitsutil.Card{{Key: cardSkySub, Value: true, Comment: "the sky was subtracted: see " + SkyTable}}
}

// Units are those of SIGNAL and VARIANCE.
func (o OnSky) Units() (signal, variance string) {
	if o.Flux == nil {
		return UnitSignal, UnitVariance
	}
	return UnitFlux, UnitFlux2
}

// ReadOnSky reads both tables from a cube.fits; nil for one that it does not have.
func ReadOnSky(f *fitsutil.File) (OnSky, error) {
	var o OnSky
	err := readIfThere(f, SkyTable, func(t *fitsutil.Table) error {
		o.Sky = new(SkyRecord)
		return o.Sky.read(t)
	})
	if err != nil {
		return OnSky{}, err
	}
	err = readIfThere(f, FluxTable, func(t *fitsutil.Table) error {
		o.Flux = new(FluxRecord)
		return readFloats(t, map[string]*[]float64{"FACTOR": &o.Flux.Factor, "RELVAR": &o.Flux.RelVariance, "TRANSMISSION": &o.Flux.Transmission})
	})
	if err != nil {
		return OnSky{}, err
	}
	return o, nil
}

func readIfThere(f *fitsutil.File, name string, read func(t *fitsutil.Table) error) error {
	t, err := f.Table(name)
	if errors.Is(err, fitsutil.ErrMissingHDU) {
		return nil
	}
	if err == nil {
		err = read(t)
	}
	if err != nil {
		return fmt.Errorf("%w; make the cube again with reduce", err)
	}
	return nil
}

func readFloats(t *fitsutil.Table, columns map[string]*[]float64) error {
	for _, name := range slices.Sorted(maps.Keys(columns)) {
		var err error
		if *columns[name], err = t.Float64s(name); err != nil {
			return err
		}
	}
	return nil
}

func (s *SkyRecord) read(t *fitsutil.Table) error {
	err := readFloats(t, map[string]*[]float64{"SKY": &s.Value, "VARIANCE": &s.Variance, "WEIGHT": &s.Weight})
	if err != nil {
		return err
	}
	if s.Places, err = t.Int32s("PLACES"); err != nil {
		return err
	}
	s.Line, err = t.Bools("LINE")
	return err
}

// SkyReport is what was found of the sky, in run.json.
type SkyReport struct {
	// Chosen says how: blindly, or by the recipe's names.
	Chosen string `json:"chosen"`
	// Places are the elements and rows of blank sky, Share their part of those that can be used.
	Places int     `json:"places"`
	Share  float64 `json:"share"`
	// Noise is the scatter of the blank places in white light over their errors, 0 for named ones.
	Noise float64 `json:"noise,omitempty"`
	// Lines counts the wavelengths that lines of the sky dominate, flagged SKYLINE.
	Lines int `json:"lines"`
	// Chi2 is the mean squared residual of the blank places over their variance, before the
	// sky's error, Chi2Lines that at lines, 0 without any.
	Chi2      float64 `json:"chi2"`
	Chi2Lines float64 `json:"chi2_lines,omitempty"`
	// Correlated is by how much the variance of the sky's mean is above that of independent
	// voxels, CorrelatedLines at lines.
	Correlated      float64 `json:"correlated"`
	CorrelatedLines float64 `json:"correlated_lines"`
	// RelError is the median of the sky's standard error over the sky.
	RelError float64 `json:"rel_error"`
}

// FluxReport is what was found of the sensitivity, in run.json.
type FluxReport struct {
	// Star says where the star was seen, Table is its table of fluxes.
	Star  string `json:"star"`
	Table string `json:"table"`
	// Element and Row are where the star lies, its width along both in arc seconds.
	Element    float64 `json:"element"`
	Row        float64 `json:"row"`
	FWHMArcsec float64 `json:"fwhm_arcsec"`
	// SlitFraction is the part of the star's light that was measured, at the middle of the
	// band, SlitRelError its relative error; the flux of the cube is of all its light.
	SlitFraction float64 `json:"slit_fraction"`
	SlitRelError float64 `json:"slit_rel_error"`
	// Frames counts those of the star through one wide element, 0 for a star's cube. What
	// wavelengths they show depends on Element, known to ElementError: assumed to be where
	// the telescope was to point, or found by the ends of the band and the star's lines.
	// FrameError is the relative error of the mean by which the frames differ.
	Frames         int     `json:"frames,omitempty"`
	ElementError   float64 `json:"element_error,omitempty"`
	ElementAssumed bool    `json:"element_assumed,omitempty"`
	FrameError     float64 `json:"frame_error,omitempty"`
	// StarAirmass and Airmass are those of the star's and of the science exposures.
	StarAirmass float64 `json:"star_airmass"`
	Airmass     float64 `json:"airmass"`
	// Extinction tells whether the site's curve was used.
	Extinction bool `json:"extinction"`
	// Used and Rejected count voxels of the star's spectrum; RMS is their relative scatter
	// about the curve.
	Used     int     `json:"used"`
	Rejected int     `json:"rejected"`
	RMS      float64 `json:"rms"`
	// RelError is the median of the relative error of the factor, Efficiency the largest
	// of electrons over photons that it says of telescope and instrument.
	RelError   float64 `json:"rel_error"`
	Efficiency float64 `json:"efficiency"`
}
