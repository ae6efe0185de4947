package scene

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"sort"
	"strconv"

	"mirrorloom/pipeline/config"
)

// Spectrum is the shape of a continuum: relative energy per nm at vacuum
// wavelengths in ascending order, linear between them, 0 beyond.
type Spectrum struct {
	NM, RelativeFlux []float64
}

// Spectrum is the table of a CSV file that the scene names; an empty one for other files.
func (s *Scene) Spectrum(file string) Spectrum { return s.spectra[file] }

// At interpolates the relative energy per nm.
func (s Spectrum) At(nm float64) float64 {
	n := len(s.NM)
	if n == 0 || nm < s.NM[0] || nm > s.NM[n-1] {
		return 0
	}
	i := sort.SearchFloat64s(s.NM, nm)
	if i == 0 {
		return s.RelativeFlux[0]
	}
	t := (nm - s.NM[i-1]) / (s.NM[i] - s.NM[i-1])
	return s.RelativeFlux[i-1] + t*(s.RelativeFlux[i]-s.RelativeFlux[i-1])
}

// ShareSpectra gives the scene the files that another one, nil for none, has read.
func (s *Scene) ShareSpectra(other *Scene) {
	if other != nil {
		s.files, s.spectra = other.files, other.spectra
	}
}

var spectrumHeader = []string{"wavelength_nm", "relative_flux"}

// parseSpectrum reads a CSV file whose first line is wavelength_nm,relative_flux
// and whose others give vacuum wavelengths, ascending, with energies per nm in
// any unit, not negative. Errors are *config.Error with the CSV's line.
func parseSpectrum(name string, data []byte) (Spectrum, error) {
	refuse := func(line int, format string, args ...any) (Spectrum, error) {
		return Spectrum{}, &config.Error{File: name, Line: line, What: fmt.Sprintf(format, args...)}
	}
	reader := csv.NewReader(bytes.NewReader(data))
	reader.FieldsPerRecord = len(spectrumHeader)
	var s Spectrum
	for first := true; ; first = false {
		record, err := reader.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		var syntax *csv.ParseError
		if errors.As(err, &syntax) {
			return refuse(syntax.Line, "not CSV of two fields (%v); write wavelength_nm,relative_flux", syntax.Err)
		}
		if err != nil {
			return Spectrum{}, fmt.Errorf("%s: %w", name, err)
		}
		line, _ := reader.FieldPos(0)
		if first {
			if record[0] != spectrumHeader[0] || record[1] != spectrumHeader[1] {
				return refuse(line, "the first line is not wavelength_nm,relative_flux; write it")
			}
			continue
		}
		nm, errNM := strconv.ParseFloat(record[0], 64)
		flux, errFlux := strconv.ParseFloat(record[1], 64)
		switch {
		case errNM != nil || !(nm >= minNM && nm <= maxNM):
			return refuse(line, "wavelength_nm %q is no number from %v to %v; give vacuum nanometres", record[0], float64(minNM), float64(maxNM))
		case errFlux != nil || !(flux >= 0) || math.IsInf(flux, 0):
			return refuse(line, "relative_flux %q is no number from 0; give an energy per nm", record[1])
		case len(s.NM) > 0 && nm <= s.NM[len(s.NM)-1]:
			return refuse(line, "wavelength_nm %v does not lie above the one before it; list the rows in ascending order", nm)
		}
		s.NM, s.RelativeFlux = append(s.NM, nm), append(s.RelativeFlux, flux)
	}
	if len(s.NM) < 2 {
		return refuse(1, "the table has %d rows; give at least 2", len(s.NM))
	}
	return s, nil
}

// ReadSpectra reads the CSV files of all sources with beside, nil when the scene may name
// none. doc, which may be nil, and prefix say where the scene's keys are: prefix is empty,
// or a key path with a closing dot.
func (s *Scene) ReadSpectra(doc *config.Doc, prefix string, beside func(file string) ([]byte, error)) error {
	s.files, s.spectra = map[string][]byte{}, map[string]Spectrum{}
	for _, placed := range s.allSources() {
		source, name := placed.source, placed.source.SpectrumCSV
		if name == "" {
			continue
		}
		path := prefix + placed.path + ".spectrum_csv"
		if beside == nil {
			return doc.Errorf(path, "a scene read from memory can name no file; leave the key out")
		}
		if _, known := s.files[name]; !known {
			data, err := beside(name)
			if err != nil {
				return &config.Error{File: doc.Name(), Line: doc.Line(path), Path: path, What: err.Error(), Err: err}
			}
			table, err := parseSpectrum(name, data)
			if err != nil {
				return err
			}
			s.files[name], s.spectra[name] = data, table
		}
		if !(s.spectra[name].At(source.AtNM) > 0) {
			return doc.Errorf(prefix+placed.path+".at_nm", "%s has no light at %v nm to scale by ab_mag; give a wavelength where it has", name, source.AtNM)
		}
	}
	return nil
}
