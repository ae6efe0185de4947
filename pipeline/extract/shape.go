package extract

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Form is the kind of a shape.
type Form string

// The forms of a shape.
const (
	Circle  Form = "circle"
	Ellipse Form = "ellipse"
	Polygon Form = "polygon"
	Annulus Form = "annulus" // from MinorArcsec to MajorArcsec
	Voxels  Form = "voxels"
)

// Shape is an aperture as asked for.
type Shape struct {
	Form Form
	// Text is what was asked for, for headers.
	Text string
	// InVoxels: Points are elements and rows, from 0; else right ascension and
	// declination in degrees. Sizes are arc seconds on the sky in both cases.
	InVoxels bool
	// Points are the centre, or the corners of a polygon.
	Points [][2]float64
	// MajorArcsec and MinorArcsec are the semi-axes, equal in a circle; the major one
	// points to position angle PADeg, north through east.
	MajorArcsec, MinorArcsec, PADeg float64
	// Elements and Rows list those of Voxels: every named element in every named row.
	Elements, Rows []int
}

// maxCorners bounds a polygon; nobody types more.
const maxCorners = 1000

// ParseCircle reads "RA DEC RADIUS", or "ELEMENT ROW RADIUS" in voxels.
func ParseCircle(text string, inVoxels bool) (*Shape, error) {
	s := &Shape{Form: Circle, Text: "circle " + text, InVoxels: inVoxels}
	err := s.parse(text, 1, &s.MajorArcsec)
	s.MinorArcsec = s.MajorArcsec
	return s.checked(err)
}

// ParseEllipse reads "RA DEC MAJOR MINOR PA": semi-axes and position angle.
func ParseEllipse(text string, inVoxels bool) (*Shape, error) {
	s := &Shape{Form: Ellipse, Text: "ellipse " + text, InVoxels: inVoxels}
	err := s.parse(text, 1, &s.MajorArcsec, &s.MinorArcsec, &s.PADeg)
	return s.checked(err)
}

// ParsePolygon reads "RA DEC RA DEC RA DEC ...".
func ParsePolygon(text string, inVoxels bool) (*Shape, error) {
	s := &Shape{Form: Polygon, Text: "polygon " + text, InVoxels: inVoxels}
	n := len(fields(text))
	if n < 6 || n%2 != 0 || n > 2*maxCorners {
		return nil, fmt.Errorf("%s: has %d numbers; give two a corner, three corners or more, at most %d", s.Text, n, maxCorners)
	}
	return s.checked(s.parse(text, n/2))
}

// ParseVoxels reads lists such as "3-7,9" of elements and rows, counted from 0.
func ParseVoxels(elements, rows string) (*Shape, error) {
	s := &Shape{Form: Voxels, Text: fmt.Sprintf("elements %s rows %s", elements, rows), InVoxels: true}
	var err error
	if s.Elements, err = parseList(elements); err != nil {
		return nil, fmt.Errorf("elements %q: %w", elements, err)
	}
	if s.Rows, err = parseList(rows); err != nil {
		return nil, fmt.Errorf("rows %q: %w", rows, err)
	}
	return s, nil
}

func fields(text string) []string {
	return strings.FieldsFunc(text, func(r rune) bool { return r == ' ' || r == ',' || r == '\t' })
}

// parse reads so many places and then the numbers.
func (s *Shape) parse(text string, places int, numbers ...*float64) error {
	f := fields(text)
	if len(f) != 2*places+len(numbers) {
		return fmt.Errorf("has %d numbers, not %d", len(f), 2*places+len(numbers))
	}
	for i := range places {
		var at [2]float64
		var err error
		if s.InVoxels {
			at, err = voxelPlace(f[2*i], f[2*i+1])
		} else {
			at, err = skyPlace(f[2*i], f[2*i+1])
		}
		if err != nil {
			return err
		}
		s.Points = append(s.Points, at)
	}
	for i, to := range numbers {
		x, err := strconv.ParseFloat(f[2*places+i], 64)
		if err != nil || math.Abs(x) > 1e6 || x != x {
			return fmt.Errorf("%q is no number", f[2*places+i])
		}
		*to = x
	}
	return nil
}

func voxelPlace(element, row string) (at [2]float64, err error) {
	for i, text := range []string{element, row} {
		at[i], err = strconv.ParseFloat(text, 64)
		if err != nil || !(math.Abs(at[i]) < 1e6) {
			return at, fmt.Errorf("%q is no element or row", text)
		}
	}
	return at, nil
}

func skyPlace(ra, dec string) (at [2]float64, err error) {
	if at[0], err = ParseRA(ra); err != nil {
		return at, err
	}
	at[1], err = ParseDec(dec)
	return at, err
}

func (s *Shape) checked(err error) (*Shape, error) {
	if err == nil && s.Form != Polygon && !(s.MajorArcsec > 0 && s.MinorArcsec > 0) {
		err = fmt.Errorf("sizes in arc seconds must be above 0")
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", s.Text, err)
	}
	return s, nil
}

// parseList reads "3-7,9".
func parseList(text string) ([]int, error) {
	const most = 1 << 16
	var all []int
	seen := map[int]bool{}
	for _, part := range strings.Split(text, ",") {
		from, to, isRange := strings.Cut(strings.TrimSpace(part), "-")
		if !isRange {
			to = from
		}
		a, errA := strconv.Atoi(from)
		b, errB := strconv.Atoi(to)
		if errA != nil || errB != nil || a < 0 || b < a || b >= most {
			return nil, fmt.Errorf("%q is no number or range such as 3-7, from 0", part)
		}
		for i := a; i <= b; i++ {
			if !seen[i] {
				seen[i] = true
				all = append(all, i)
			}
		}
	}
	return all, nil
}
