package register

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strconv"
	"strings"

	"mirrorloom/pipeline/product"
)

// Star is a listed star, ICRS at the time of the night.
type Star struct {
	Name          string
	RADeg, DecDeg float64
}

// starColumns are those of a table of stars.
var starColumns = []string{"name", "ra_deg", "dec_deg"}

// ReadStars reads a CSV table of stars with the columns name, ra_deg, dec_deg.
func ReadStars(path string) ([]Star, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("open the table of stars: %w", err)
	}
	return ParseStars(path, data)
}

// ParseStars reads the text of a table of stars: a line of column names and one star at
// least. Errors name the file, the line and the cure.
func ParseStars(name string, data []byte) ([]Star, error) {
	reader := csv.NewReader(bytes.NewReader(data))
	reader.FieldsPerRecord = len(starColumns)
	reader.TrimLeadingSpace = true
	heading, err := reader.Read()
	if err != nil {
		return nil, notCSV(name, err)
	}
	if !slices.Equal(heading, starColumns) {
		return nil, fmt.Errorf("%s:1: the columns are %q; write %s, in degrees", name, strings.Join(heading, ","), strings.Join(starColumns, ","))
	}
	var stars []Star
	for {
		record, err := reader.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, notCSV(name, err)
		}
		line, _ := reader.FieldPos(0)
		s, err := parseStar(record)
		if err == nil && slices.ContainsFunc(stars, func(o Star) bool { return o.Name == s.Name }) {
			err = fmt.Errorf("the name %q comes twice; give each star one", s.Name)
		}
		if err != nil {
			return nil, fmt.Errorf("%s:%d: %w", name, line, err)
		}
		stars = append(stars, s)
	}
	if len(stars) == 0 {
		return nil, fmt.Errorf("%s: the table holds no star; list one at least", name)
	}
	return stars, nil
}

func notCSV(name string, err error) error {
	var syntax *csv.ParseError
	switch {
	case errors.As(err, &syntax):
		return fmt.Errorf("%s:%d: not CSV of %d fields (%w); write %s", name, syntax.Line, len(starColumns), syntax.Err, strings.Join(starColumns, ","))
	case errors.Is(err, io.EOF):
		return fmt.Errorf("%s: the table of stars is empty; write %s and a line for each star", name, strings.Join(starColumns, ","))
	}
	return fmt.Errorf("%s: %w", name, err)
}

func parseStar(record []string) (Star, error) {
	s := Star{Name: strings.TrimSpace(record[0])}
	if s.Name == "" {
		return s, errors.New("the star has no name; give it one")
	}
	for i, c := range []struct {
		to          *float64
		least, most float64
	}{{&s.RADeg, 0, 360}, {&s.DecDeg, -90, 90}} {
		text := strings.TrimSpace(record[i+1])
		x, err := strconv.ParseFloat(text, 64)
		switch {
		case err != nil && strings.ContainsAny(text, ":hHdD "):
			return s, fmt.Errorf("column %s: %q is sexagesimal; give degrees", starColumns[i+1], text)
		case err != nil:
			return s, fmt.Errorf("column %s: %q is no number; give degrees", starColumns[i+1], text)
		case !(x >= c.least && x <= c.most):
			return s, fmt.Errorf("column %s: %v is outside %g to %g; give degrees", starColumns[i+1], x, c.least, c.most)
		}
		*c.to = x
	}
	return s, nil
}

// CheckField refuses a table none of whose stars lies within margin (arc seconds) of the
// field, and says so where it is because right ascensions are in hours.
func CheckField(name string, stars []Star, s product.Schema, marginArcsec float64) error {
	nearest, hours := math.Inf(1), 0
	for _, star := range stars {
		d := beyond(s, star.RADeg, star.DecDeg)
		if d <= marginArcsec {
			return nil
		}
		nearest = min(nearest, d)
		if star.RADeg <= 24 && beyond(s, star.RADeg*15, star.DecDeg) <= marginArcsec {
			hours++
		}
	}
	if hours > 0 {
		return fmt.Errorf("%s: no star lies in the field, but %d of %d would if their right ascensions were hours; give degrees, 15 times as much", name, hours, len(stars))
	}
	far := "all of them more than 90 degrees away"
	if !math.IsInf(nearest, 1) {
		far = fmt.Sprintf("the nearest %.3g arc minutes from its edge", nearest/60)
	}
	return fmt.Errorf("%s: none of %d stars lies in the field around RA %.5f, Dec %+.5f, %s; list stars of this field", name, len(stars), s.RADeg, s.DecDeg, far)
}

// beyond is how far a place is from the field, arc seconds; 0 within, infinite where it
// is on the other half of the sky.
func beyond(s product.Schema, raDeg, decDeg float64) float64 {
	j, y := s.PlaceOf(raDeg, decDeg)
	if math.IsNaN(j + y) {
		return math.Inf(1)
	}
	past := func(x float64, n int) float64 { return max(-0.5-x, x-(float64(n)-0.5), 0) }
	return 3600 * math.Hypot(past(j, s.Elements)*s.C1Deg, past(y, s.Rows)*s.C2Deg)
}
