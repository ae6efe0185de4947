package rehearse

import (
	"mirrorloom/calib/physics"
)

// photons is a source's continuum in photons per s, m^2 and nm, by vacuum nm.
func photons(s *Scene, source *Source) func(nm float64) float64 {
	mag, at := *source.ABMag, source.AtNM
	scale := func(shape func(nm float64) float64) func(nm float64) float64 {
		factor := physics.ABPhotons(mag, at) / shape(at)
		return func(nm float64) float64 { return factor * shape(nm) }
	}
	switch {
	case source.TemperatureK > 0:
		return scale(func(nm float64) float64 { return physics.PlanckPhotons(nm, source.TemperatureK) })
	case source.SpectrumCSV != "":
		table := s.Spectrum(source.SpectrumCSV)
		return scale(func(nm float64) float64 { return table.At(nm) * nm })
	}
	return func(nm float64) float64 { return physics.ABPhotons(mag, nm) }
}
