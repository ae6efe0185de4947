package reduce

import (
	"bytes"
	"cmp"
	"encoding/csv"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"mirrorloom/calib"
	"mirrorloom/configs"
)

// The lists of lamp lines that the program carries, each line with its source.
const lampFolder = "lamps"

var lampLists = []string{"lamp_lines.csv", "lamp_lines_infrared.csv"}

// The columns of a list.
var lampColumns = []string{"element", "ion", "air_wavelength_nm", "vacuum_wavelength_nm", "relative_intensity", "source"}

// listedLine is a line of a list.
type listedLine struct {
	element            string
	vacuumNM, strength float64
}

// lampLines gives the lines of a lamp between two vacuum wavelengths, in order of
// wavelength. A lamp is named by the chemical symbols of what glows in it, one after
// the other, such as Ne or HgNe. Intensities are relative to the brightest line of the
// same symbol within the range: the lists say nothing of how the gases are mixed.
func lampLines(lamp string, firstNM, lastNM float64) ([]calib.LampLine, error) {
	all, err := listedLines()
	if err != nil {
		return nil, err
	}
	symbols, err := lampSymbols(lamp, all)
	if err != nil {
		return nil, err
	}
	var lines []calib.LampLine
	for _, symbol := range symbols {
		from, brightest := len(lines), 0.0
		for _, l := range all {
			if l.element == symbol && l.vacuumNM >= firstNM && l.vacuumNM <= lastNM {
				lines = append(lines, calib.LampLine{VacuumNM: l.vacuumNM, Intensity: l.strength})
				brightest = math.Max(brightest, l.strength)
			}
		}
		for i := range lines[from:] {
			lines[from+i].Intensity /= brightest
		}
	}
	slices.SortStableFunc(lines, func(a, b calib.LampLine) int {
		return cmp.Compare(a.VacuumNM, b.VacuumNM)
	})
	return lines, nil
}

// lampSymbols parts a lamp's name into symbols of the lists: the longest that fits
// first, so that He is no hydrogen.
func lampSymbols(lamp string, all []listedLine) ([]string, error) {
	var symbols []string
	for rest := lamp; rest != ""; {
		found := ""
		for _, l := range all {
			if strings.HasPrefix(rest, l.element) && len(l.element) > len(found) {
				found = l.element
			}
		}
		if found == "" || slices.Contains(symbols, found) {
			return nil, unknownLamp(lamp, all)
		}
		symbols, rest = append(symbols, found), rest[len(found):]
	}
	if symbols == nil {
		return nil, unknownLamp(lamp, all)
	}
	return symbols, nil
}

func unknownLamp(lamp string, all []listedLine) error {
	var known []string
	for _, l := range all {
		if !slices.Contains(known, l.element) {
			known = append(known, l.element)
		}
	}
	return fmt.Errorf("no list has the lines of lamp %q; name it by the symbols of %s, each once, such as HgNe", lamp, strings.Join(known, ", "))
}

// listedLines reads the lists.
func listedLines() ([]listedLine, error) {
	var all []listedLine
	for _, name := range lampLists {
		data, err := configs.ReadFile(lampFolder, name)
		if err != nil {
			return nil, err
		}
		lines, err := parseLampList(name, data)
		if err != nil {
			return nil, err
		}
		all = append(all, lines...)
	}
	return all, nil
}

// parseLampList reads one list.
func parseLampList(name string, data []byte) ([]listedLine, error) {
	r := csv.NewReader(bytes.NewReader(data))
	records, err := r.ReadAll()
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	if len(records) == 0 || !slices.Equal(records[0], lampColumns) {
		return nil, fmt.Errorf("%s: the first line must name the columns %s", name, strings.Join(lampColumns, ","))
	}
	var lines []listedLine
	for i, record := range records[1:] {
		air, errAir := strconv.ParseFloat(record[2], 64)
		vacuum, errVacuum := strconv.ParseFloat(record[3], 64)
		strength, errStrength := strconv.ParseFloat(record[4], 64)
		// Air slows light by 2.7 to 3.1 parts in 10000 from 200 nm to the infrared.
		if errAir != nil || errVacuum != nil || errStrength != nil || record[0] == "" || !(strength > 0) || math.IsInf(strength, 0) ||
			!(air > 0) || !(vacuum > air*(1+2.5e-4) && vacuum < air*(1+3.3e-4)) {
			return nil, fmt.Errorf("%s: line %d is no lamp line; give element, ion, air and vacuum wavelength in nm, an intensity above 0, source", name, i+2)
		}
		lines = append(lines, listedLine{record[0], vacuum, strength})
	}
	return lines, nil
}
