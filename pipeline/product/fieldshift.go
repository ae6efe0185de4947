package product

import (
	"fmt"

	"mirrorloom/calib/physics"
	"mirrorloom/fitsutil"
)

// FieldShift says where in the field of view the light of the cube's voxels was taken:
// that of voxel l of element j and row y at element j + Elements[l] and row y + Rows[l].
type FieldShift struct {
	Elements, Rows []float64
	// GuideNM is the wavelength that refraction leaves in place, Airmass the mean of the
	// science frames, Atmosphere what refracts; nil without refraction.
	GuideNM, Airmass float64
	Atmosphere       *physics.Atmosphere
	// Onto is the part that brings the light to another cube's pixels, elements and rows;
	// nil without one.
	Onto *[2]float64
}

// Shift is the name of the table that holds it.
const Shift = "SHIFT"

// Table is the table SHIFT, a row a voxel of the wavelength axis.
func (s *FieldShift) Table() (*fitsutil.Table, error) {
	t := &fitsutil.Table{Name: Shift, Header: fitsutil.NewHeader(), Columns: []fitsutil.Column{
		{Name: "ELEMENTS", Format: "D", Data: s.Elements},
		{Name: "ROWS", Format: "D", Data: s.Rows},
	}}
	cards := []card{{"REFRACTD", s.Atmosphere != nil, "refraction was taken out"}}
	if a := s.Atmosphere; a != nil {
		cards = append(cards,
			card{"AIRMASS", s.Airmass, "mean of the science frames"},
			card{"GUIDENM", s.GuideNM, "[nm] vacuum wavelength left in place"},
			card{"PRESSURE", a.PressurePa / 100, "[hPa] of the air"},
			card{"TEMPC", a.TemperatureC, "[deg C] of the air"},
			card{"WATERHPA", a.VapourPa / 100, "[hPa] of its water"})
	}
	if s.Onto != nil {
		cards = append(cards,
			card{"ONTOELEM", s.Onto[0], "elements to the pixels of another cube"},
			card{"ONTOROWS", s.Onto[1], "rows to the pixels of another cube"})
	}
	return t, set(t.Header, cards)
}

// ReadFieldShift reads the shifts of n voxels back from a cube.fits; nil where it has none.
func ReadFieldShift(f *fitsutil.File, n int) (*FieldShift, error) {
	found := false
	for _, u := range f.HDUs() {
		found = found || u.Name == Shift
	}
	if !found {
		return nil, nil
	}
	t, err := f.Table(Shift)
	if err != nil {
		return nil, err
	}
	s := new(FieldShift)
	if s.Elements, err = t.Float64s("ELEMENTS"); err != nil {
		return nil, err
	}
	if s.Rows, err = t.Float64s("ROWS"); err != nil {
		return nil, err
	}
	if len(s.Elements) != n {
		return nil, fmt.Errorf("%s: table %s has %d rows for %d wavelengths; make the cube again with reduce", f.Path(), Shift, len(s.Elements), n)
	}
	return s, nil
}

// FieldShiftSection is a FieldShift in run.json: what refracted, and the shift of the first
// and of the last wavelength.
type FieldShiftSection struct {
	Airmass      *float64    `json:"airmass,omitempty"` // mean of the science frames
	GuideNM      float64     `json:"guide_nm,omitempty"`
	PressureHPa  float64     `json:"pressure_hpa,omitempty"`
	TemperatureC *float64    `json:"temperature_c,omitempty"`
	WaterHPa     float64     `json:"water_hpa,omitempty"`
	Elements     [2]float64  `json:"elements"`
	Rows         [2]float64  `json:"rows"`
	Onto         *[2]float64 `json:"onto,omitempty"` // elements and rows, the same for all
}

// Section sums s up for run.json; nil for nil.
func (s *FieldShift) Section() *FieldShiftSection {
	if s == nil {
		return nil
	}
	last := len(s.Rows) - 1
	out := &FieldShiftSection{
		Elements: [2]float64{s.Elements[0], s.Elements[last]}, Rows: [2]float64{s.Rows[0], s.Rows[last]}, Onto: s.Onto,
	}
	if a := s.Atmosphere; a != nil {
		out.Airmass, out.GuideNM = &s.Airmass, s.GuideNM
		out.PressureHPa, out.TemperatureC, out.WaterHPa = a.PressurePa/100, &a.TemperatureC, a.VapourPa/100
	}
	return out
}
