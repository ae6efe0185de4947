package extract

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Position is a place on the sky, ICRS, in degrees.
type Position struct{ RADeg, DecDeg float64 }

// ParseRA reads a right ascension: degrees (123.3), or hours, minutes and seconds
// (08:13:12.5, 8h13m12.5s). It gives degrees, 0 to below 360.
func ParseRA(text string) (float64, error) {
	deg, sexagesimal, err := parseAngle(text, "hms")
	if err != nil {
		return 0, fmt.Errorf("right ascension %q: %w; write 123.45 (degrees) or 08:13:48.0 (hours)", text, err)
	}
	if sexagesimal {
		deg *= 15
	}
	if !(deg >= 0 && deg < 360) {
		return 0, fmt.Errorf("right ascension %q is not within 0 to 360 degrees (24 hours)", text)
	}
	return deg, nil
}

// ParseDec reads a declination: degrees (-21.6), or degrees, minutes and seconds
// (-21:36:00, -21d36m00s). It gives degrees, -90 to 90.
func ParseDec(text string) (float64, error) {
	deg, _, err := parseAngle(text, "dms")
	if err != nil {
		return 0, fmt.Errorf("declination %q: %w; write -21.6 or -21:36:00 (degrees)", text, err)
	}
	if !(deg >= -90 && deg <= 90) {
		return 0, fmt.Errorf("declination %q is not within -90 to 90 degrees", text)
	}
	return deg, nil
}

// parseAngle reads a plain number, or up to three numbers set apart by colons or
// followed by the given letters. The sign counts for all of them.
func parseAngle(text, letters string) (value float64, sexagesimal bool, err error) {
	body := strings.TrimSpace(text)
	sign := 1.0
	switch {
	case strings.HasPrefix(body, "-"):
		sign, body = -1, body[1:]
	case strings.HasPrefix(body, "+"):
		body = body[1:]
	}
	parts, err := splitAngle(body, letters)
	if err != nil {
		return 0, false, err
	}
	unit := 1.0
	for i, part := range parts {
		x, err := unsigned(part)
		if err != nil {
			return 0, false, err
		}
		if i > 0 && x >= 60 {
			return 0, false, fmt.Errorf("%s is not below 60", part)
		}
		if i < len(parts)-1 && x != math.Trunc(x) {
			return 0, false, fmt.Errorf("only the last number may have a fraction")
		}
		value += x * unit
		unit /= 60
	}
	return sign * value, len(parts) > 1 || strings.ContainsAny(body, letters[:1]), nil
}

// splitAngle cuts at colons, or behind the letters in their order.
func splitAngle(body, letters string) ([]string, error) {
	if strings.Contains(body, ":") {
		parts := strings.Split(body, ":")
		if len(parts) > 3 {
			return nil, fmt.Errorf("more than three numbers")
		}
		return parts, nil
	}
	if !strings.ContainsAny(body, letters) {
		return []string{body}, nil
	}
	var parts []string
	for i := range letters {
		before, after, found := strings.Cut(body, letters[i:i+1])
		if !found {
			break
		}
		parts, body = append(parts, before), after
	}
	if body != "" || len(parts) == 0 {
		return nil, fmt.Errorf("the letters %s must follow the numbers in this order", strings.Join(strings.Split(letters, ""), ", "))
	}
	return parts, nil
}

// unsigned is a number of digits and at most one point.
func unsigned(text string) (float64, error) {
	if text == "" || strings.Trim(text, "0123456789.") != "" {
		return 0, fmt.Errorf("%q is no number", text)
	}
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return 0, fmt.Errorf("%q is no number", text)
	}
	return x, nil
}
