package rehearse

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

// spectrum is the shape of a continuum: relative energy per nm at vacuum
// wavelengths in ascending order, linear between them, 0 beyond.
type spectrum struct {
	nm, flux []float64
}

// at interpolates the relative energy per nm.
func (s spectrum) at(nm float64) float64 {
	n := len(s.nm)
	if n == 0 || nm < s.nm[0] || nm > s.nm[n-1] {
		return 0
	}
	i := sort.SearchFloat64s(s.nm, nm)
	if i == 0 {
		return s.flux[0]
	}
	t := (nm - s.nm[i-1]) / (s.nm[i] - s.nm[i-1])
	return s.flux[i-1] + t*(s.flux[i]-s.flux[i-1])
}

var spectrumHeader = []string{"wavelength_nm", "relative_flux"}

// parseSpectrum reads a CSV file whose first line is wavelength_nm,relative_flux
// and whose others give vacuum wavelengths, ascending, with energies per nm in
// any unit, not negative. Errors are *config.Error with the CSV's line.
func parseSpectrum(name string, data []byte) (spectrum, error) {
	refuse := func(line int, format string, args ...any) (spectrum, error) {
		return spectrum{}, &config.Error{File: name, Line: line, What: fmt.Sprintf(format, args...)}
	}
	reader := csv.NewReader(bytes.NewReader(data))
	reader.FieldsPerRecord = len(spectrumHeader)
	var s spectrum
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
			return spectrum{}, fmt.Errorf("%s: %w", name, err)
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
		case len(s.nm) > 0 && nm <= s.nm[len(s.nm)-1]:
			return refuse(line, "wavelength_nm %v does not lie above the one before it; list the rows in ascending order", nm)
		}
		s.nm, s.flux = append(s.nm, nm), append(s.flux, flux)
	}
	if len(s.nm) < 2 {
		return refuse(1, "the table has %d rows; give at least 2", len(s.nm))
	}
	return s, nil
}

// readSpectra reads the CSV files of all sources.
func (s *Scene) readSpectra(doc *config.Doc, beside func(string) ([]byte, error)) error {
	s.files, s.spectra = map[string][]byte{}, map[string]spectrum{}
	for _, placed := range s.allSources() {
		source, name := placed.source, placed.source.SpectrumCSV
		if name == "" {
			continue
		}
		path := placed.path + ".spectrum_csv"
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
		if !(s.spectra[name].at(source.AtNM) > 0) {
			return doc.Errorf(placed.path+".at_nm", "%s has no light at %v nm to scale by ab_mag; give a wavelength where it has", name, source.AtNM)
		}
	}
	return nil
}
