package instrument

import (
	"fmt"

	"mirrorloom/calib/physics"
	"mirrorloom/pipeline/config"
)

// Site is where the telescope stands, and its air on a usual night.
type Site struct {
	// LatitudeDeg is geodetic, north positive, degrees.
	LatitudeDeg float64 `yaml:"latitude_deg"`
	// LongitudeEastDeg is east positive, -180 to 360 degrees.
	LongitudeEastDeg float64 `yaml:"longitude_east_deg"`
	// HeightM is above the ellipsoid, metres.
	HeightM float64 `yaml:"height_m"`
	// PressureHPa, TemperatureC and WaterHPa (the partial pressure of water vapour)
	// are those of the air around the telescope. Each optional; that of the mean air
	// at HeightM (physics.SiteAtmosphere).
	PressureHPa  *float64 `yaml:"pressure_hpa" config:"optional"`
	TemperatureC *float64 `yaml:"temperature_c" config:"optional"`
	WaterHPa     *float64 `yaml:"water_hpa" config:"optional"`
	// Extinction is what the air takes at the site. Optional; without it nothing is
	// known of it.
	Extinction Extinction `yaml:"extinction" config:"optional"`
}

// ExtinctionPoint is a row of an extinction curve.
type ExtinctionPoint struct {
	// WavelengthNM is in vacuum nm.
	WavelengthNM float64 `yaml:"wavelength_nm"`
	// MagPerAirmass is in magnitudes per unit of air mass.
	MagPerAirmass float64 `yaml:"mag_per_airmass"`
}

// Extinction is an extinction curve, wavelengths strictly ascending.
type Extinction []ExtinctionPoint

// Curve is the curve as calib/physics takes it; empty for none.
func (e Extinction) Curve() physics.ExtinctionCurve {
	curve := make(physics.ExtinctionCurve, len(e))
	for i, p := range e {
		curve[i] = physics.ExtinctionPoint{VacuumNm: p.WavelengthNM, MagPerAirmass: p.MagPerAirmass}
	}
	return curve
}

// Atmosphere is the site's air: what the profile says of it, the mean air at its
// height for the rest.
func (s Site) Atmosphere() physics.Atmosphere {
	return WithAir(physics.SiteAtmosphere(s.HeightM), s.PressureHPa, s.TemperatureC, s.WaterHPa)
}

// WithAir is an atmosphere with those of its values replaced that are not nil.
func WithAir(a physics.Atmosphere, pressureHPa, temperatureC, waterHPa *float64) physics.Atmosphere {
	const pascalPerHPa = 100
	if pressureHPa != nil {
		a.PressurePa = *pressureHPa * pascalPerHPa
	}
	if temperatureC != nil {
		a.TemperatureC = *temperatureC
	}
	if waterHPa != nil {
		a.VapourPa = *waterHPa * pascalPerHPa
	}
	return a
}

func (s *Site) check(c *config.Checks, path string) {
	c.Within(path+".latitude_deg", s.LatitudeDeg, -90, 90)
	c.Within(path+".longitude_east_deg", s.LongitudeEastDeg, -180, 360)
	c.Within(path+".height_m", s.HeightM, -500, 10000)
	CheckAir(c, path, s.PressureHPa, s.TemperatureC, s.WaterHPa, s.Extinction)
}

// Limits of air that a telescope may stand in: 200 hPa is 12 km high, and the lower
// limit catches a pressure in kPa; air of 60 C holds 200 hPa of water.
const (
	leastHPa, mostHPa       = 200, 1100
	coldestC, hottestC      = -90, 60
	mostWaterHPa            = 200
	mostExtinction          = 10 // mag per unit of air mass
	fewestExtinctionEntries = 2
)

// CheckAir checks the keys pressure_hpa, temperature_c, water_hpa and extinction below
// a key path; nil values are not there.
func CheckAir(c *config.Checks, path string, pressureHPa, temperatureC, waterHPa *float64, extinction Extinction) {
	within := func(key string, value *float64, least, most float64) {
		if value != nil {
			c.Within(path+"."+key, *value, least, most)
		}
	}
	within("pressure_hpa", pressureHPa, leastHPa, mostHPa)
	within("temperature_c", temperatureC, coldestC, hottestC)
	within("water_hpa", waterHPa, 0, mostWaterHPa)
	if extinction == nil {
		return
	}
	wavelengths := make([]float64, len(extinction))
	for i, point := range extinction {
		at := fmt.Sprintf("%s.extinction[%d]", path, i)
		wavelengths[i] = point.WavelengthNM
		c.Positive(at+".wavelength_nm", point.WavelengthNM)
		c.Within(at+".mag_per_airmass", point.MagPerAirmass, 0, mostExtinction)
	}
	c.Ascending(path+".extinction", "wavelength_nm", wavelengths, fewestExtinctionEntries)
}
