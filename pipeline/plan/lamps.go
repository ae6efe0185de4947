package plan

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"slices"
	"strings"

	"mirrorloom/configs"
	"mirrorloom/pipeline/sequence"
)

// The lists of lamp lines that reduce has.
const lampFolder = "lamps"

var lampLists = []string{"lamp_lines.csv", "lamp_lines_infrared.csv"}

// continuumLamps are those that rehearse can draw for flats.
var continuumLamps = []string{"continuum", "halogen"}

// lampSymbols are the chemical symbols that the lists have lines of, in their order.
func lampSymbols() ([]string, error) {
	var symbols []string
	for _, name := range lampLists {
		data, err := configs.ReadFile(lampFolder, name)
		if err != nil {
			return nil, err
		}
		rows, err := csv.NewReader(bytes.NewReader(data)).ReadAll()
		if err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		for _, row := range rows[1:] {
			if !slices.Contains(symbols, row[0]) {
				symbols = append(symbols, row[0])
			}
		}
	}
	return symbols, nil
}

// lampMade tells whether a lamp's name is made of symbols, each once, the longest that fits
// first, as reduce reads it.
func lampMade(lamp string, symbols []string) bool {
	var seen []string
	for rest := lamp; rest != ""; {
		found := ""
		for _, s := range symbols {
			if strings.HasPrefix(rest, s) && len(s) > len(found) {
				found = s
			}
		}
		if found == "" || slices.Contains(seen, found) {
			return false
		}
		seen, rest = append(seen, found), rest[len(found):]
	}
	return seen != nil
}

// checkLamps refuses arc lamps whose lines no list has, and flats by a lamp that has none of
// the names of a continuum.
func checkLamps(t *sequence.Target) error {
	c := t.Calibration
	symbols, err := lampSymbols()
	if err != nil {
		return err
	}
	if c.Arc.Count > 0 && !lampMade(c.Arc.Lamp, symbols) {
		return refuse("calibration.arc.lamp", "no list has the lines of lamp %q; name it by the symbols of %s, each once, such as HgNe", c.Arc.Lamp, strings.Join(symbols, ", "))
	}
	if (c.Flat.Count > 0 || c.Flat.CodedCycles > 0) && !slices.Contains(continuumLamps, c.Flat.Lamp) {
		return refuse("calibration.flat.lamp", "flats by lamp %q are not known; whatever lamp of continuous light it is, name it %s", c.Flat.Lamp, strings.Join(continuumLamps, " or "))
	}
	return nil
}
