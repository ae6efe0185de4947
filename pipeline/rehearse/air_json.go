package rehearse

import (
	"encoding/json"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/sequence"
)

// AirTruth is truth/atmosphere.json, of a scene with an atmosphere: what the air did.
type AirTruth struct {
	Schema int `json:"schema"`
	// GuideNM is the vacuum wavelength that stands in its place.
	GuideNM      float64 `json:"guide_nm"`
	PressureHPa  float64 `json:"pressure_hpa"`
	TemperatureC float64 `json:"temperature_c"`
	WaterHPa     float64 `json:"water_hpa"`
	Refraction   bool    `json:"refraction"`
	// WavelengthNM lists the grid's voxels, vacuum nm; the lists below belong to them.
	WavelengthNM []float64 `json:"wavelength_nm"`
	// MagPerAirmass is the extinction, and Transmission what is left of the sources'
	// light in the mean of the science steps: truth.fits holds the scene times that.
	MagPerAirmass []float64 `json:"mag_per_airmass"`
	Transmission  []float64 `json:"transmission"`
	// BendArcsec is the refraction less that of GuideNM where tan z is 1.
	BendArcsec []float64 `json:"bend_arcsec"`
	// MeanElements and MeanRows are how far the sources stand from where truth.fits has
	// them, in elements and detector rows, in the mean of the science steps; 0 without
	// refraction.
	MeanElements []float64 `json:"mean_elements"`
	MeanRows     []float64 `json:"mean_rows"`
	// Frames has an entry for every step that looks at the sky.
	Frames []AirFrame `json:"frames"`
}

// AirFrame is the air in a step, at the middle of its exposure.
type AirFrame struct {
	Step    int           `json:"step"`
	Kind    sequence.Kind `json:"kind"`
	Airmass float64       `json:"airmass"`
	// ZenithDeg is the apparent zenith distance, ParallacticDeg the position angle of
	// the zenith.
	ZenithDeg      float64 `json:"zenith_deg"`
	ParallacticDeg float64 `json:"parallactic_deg"`
	// ElementsPerBend and RowsPerBend times BendArcsec are how far a wavelength has
	// moved, in elements and detector rows.
	ElementsPerBend float64 `json:"elements_per_bend"`
	RowsPerBend     float64 `json:"rows_per_bend"`
}

func (r *rehearsal) airTruth() *AirTruth {
	a, grid := r.air, r.optics.profile.Grid
	t := &AirTruth{
		Schema: 1, GuideNM: a.guideNM, PressureHPa: a.atmosphere.PressurePa / 100, TemperatureC: a.atmosphere.TemperatureC,
		WaterHPa: a.atmosphere.VapourPa / 100, Refraction: a.refracts, Frames: []AirFrame{},
	}
	n, elements, rows := 0.0, 0.0, 0.0
	for i, l := range r.sights {
		if l == nil {
			continue
		}
		f := r.airFrame(i, l)
		t.Frames = append(t.Frames, f)
		if f.Kind == sequence.Science {
			n, elements, rows = n+1, elements+f.ElementsPerBend, rows+f.RowsPerBend
		}
	}
	n = max(n, 1)
	for i := range grid.Count {
		nm := grid.WavelengthNM(float64(i))
		magnitude, bend, left := extinctionAt(a.curve, nm), a.bendAt(nm), 0.0
		for k, l := range r.sights {
			if l != nil && r.seq.Steps[k].Kind == sequence.Science {
				left += physics.AirTransmission(magnitude, l.airmass) / n
			}
		}
		t.WavelengthNM, t.MagPerAirmass = append(t.WavelengthNM, nm), append(t.MagPerAirmass, magnitude)
		t.Transmission, t.BendArcsec = append(t.Transmission, left), append(t.BendArcsec, bend)
		t.MeanElements, t.MeanRows = append(t.MeanElements, bend*elements/n), append(t.MeanRows, bend*rows/n)
	}
	return t
}

func (r *rehearsal) airFrame(step int, l *sightline) AirFrame {
	st, f := r.seq.Steps[step], r.optics.field
	u, w := f.along(l.east, l.north)
	perU := l.tanZ / f.arcsecPerU
	return AirFrame{
		Step: st.Step, Kind: st.Kind, Airmass: l.airmass, ZenithDeg: l.zenithDeg, ParallacticDeg: l.parallacticDeg,
		ElementsPerBend: u * perU / float64(r.seq.ElementMirrors()), RowsPerBend: w * perU * r.optics.profile.Spectrograph.WStepPx,
	}
}

// airJSON writes the truth of the air.
func (r *rehearsal) airJSON() ([]byte, error) {
	text, err := json.MarshalIndent(r.airTruth(), "", " ")
	return append(text, '\n'), err
}
