package calib

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"sort"
	"strconv"

	"mirrorloom/calib/physics"
)

// FluxTable is the flux density of a star by ascending vacuum wavelength.
type FluxTable struct {
	VacuumNm []float64
	Flux     []float64 // aW m-2 nm-1
}

// fluxUnits turn a table's second column, by its heading, into aW m-2 nm-1.
var fluxUnits = map[string]func(value, vacuumNm float64) float64{
	"flux_aw_m2_nm": func(f, _ float64) float64 { return f },
	"flux_w_m2_nm":  func(f, _ float64) float64 { return f * physics.AttowattsPerWatt },
	// 1 erg = 1e-7 J, 1 cm2 = 1e-4 m2, 1 A = 0.1 nm.
	"flux_erg_s_cm2_a": func(f, _ float64) float64 { return f * 1e-2 * physics.AttowattsPerWatt },
	"flux_jy":          func(f, nm float64) float64 { return f / physics.ABZero_Jy * physics.ABFlux(0, nm) },
	"ab_mag":           physics.ABFlux,
}

const fluxColumns = "wavelength_nm (vacuum) or wavelength_air_nm, and flux_aw_m2_nm, flux_w_m2_nm, flux_erg_s_cm2_a, flux_jy or ab_mag"

// ParseFluxTable reads a CSV file of two columns whose heading names their units: see
// fluxColumns. Wavelengths ascend, from 180 to 30000 nm; fluxes are above 0. Two rows are
// the least. Errors name the file, the line and the cure.
func ParseFluxTable(name string, data []byte) (FluxTable, error) {
	reader := csv.NewReader(bytes.NewReader(data))
	reader.FieldsPerRecord = 2
	heading, err := reader.Read()
	if err != nil {
		return FluxTable{}, refuseTable(name, err)
	}
	toFlux := fluxUnits[heading[1]]
	inAir := heading[0] == "wavelength_air_nm"
	if toFlux == nil || !inAir && heading[0] != "wavelength_nm" {
		return FluxTable{}, fmt.Errorf("%s:1: the columns %q and %q are unknown; write %s", name, heading[0], heading[1], fluxColumns)
	}
	var t FluxTable
	for {
		record, err := reader.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return FluxTable{}, refuseTable(name, err)
		}
		line, _ := reader.FieldPos(0)
		nm, errNm := strconv.ParseFloat(record[0], 64)
		value, errValue := strconv.ParseFloat(record[1], 64)
		if err := errors.Join(errNm, errValue); err != nil {
			return FluxTable{}, fmt.Errorf("%s:%d: %q and %q are not two numbers; correct them", name, line, record[0], record[1])
		}
		if !(nm >= 180 && nm <= 30000) {
			return FluxTable{}, fmt.Errorf("%s:%d: a wavelength of %v nm is outside 180 to 30000; give nanometres", name, line, nm)
		}
		if inAir {
			nm = physics.AirToVacuum(nm)
		}
		if n := len(t.VacuumNm); n > 0 && !(nm > t.VacuumNm[n-1]) {
			return FluxTable{}, fmt.Errorf("%s:%d: wavelengths must ascend; sort the rows and leave one of each", name, line)
		}
		flux := toFlux(value, nm)
		if !(flux > 0) || math.IsInf(flux, 0) {
			return FluxTable{}, fmt.Errorf("%s:%d: %v is no flux above 0; correct it or leave the row out", name, line, value)
		}
		t.VacuumNm, t.Flux = append(t.VacuumNm, nm), append(t.Flux, flux)
	}
	if len(t.VacuumNm) < 2 {
		return FluxTable{}, fmt.Errorf("%s: %d rows are no table; give at least 2", name, len(t.VacuumNm))
	}
	return t, nil
}

func refuseTable(name string, err error) error {
	var syntax *csv.ParseError
	switch {
	case errors.As(err, &syntax):
		return fmt.Errorf("%s:%d: not CSV of two fields (%w); write %s", name, syntax.Line, syntax.Err, fluxColumns)
	case errors.Is(err, io.EOF):
		return fmt.Errorf("%s: the file is empty; write a heading, %s, and rows", name, fluxColumns)
	}
	return fmt.Errorf("%s: %w", name, err)
}

// Mean is the mean flux density from one vacuum wavelength to another (nm, the first
// below the second), the table being linear between its rows; NaN where it does not cover
// the range.
func (t FluxTable) Mean(fromNm, toNm float64) float64 {
	n := len(t.VacuumNm)
	if n < 2 || !(fromNm >= t.VacuumNm[0] && toNm <= t.VacuumNm[n-1] && fromNm < toNm) {
		return math.NaN()
	}
	sum, x, y := 0.0, fromNm, t.at(fromNm)
	for i := sort.SearchFloat64s(t.VacuumNm, fromNm); i < n && t.VacuumNm[i] < toNm; i++ {
		sum += (t.VacuumNm[i] - x) * (y + t.Flux[i]) / 2
		x, y = t.VacuumNm[i], t.Flux[i]
	}
	sum += (toNm - x) * (y + t.at(toNm)) / 2
	return sum / (toNm - fromNm)
}

// at is linear between rows, for a wavelength within the table.
func (t FluxTable) at(nm float64) float64 {
	i := min(max(sort.SearchFloat64s(t.VacuumNm, nm), 1), len(t.VacuumNm)-1)
	x0, x1 := t.VacuumNm[i-1], t.VacuumNm[i]
	return t.Flux[i-1] + (t.Flux[i]-t.Flux[i-1])*(nm-x0)/(x1-x0)
}
