package pair

import (
	"fmt"
	"regexp"
	"strings"
	"time"
)

// dateObs is the form of DATE-OBS (FITS Standard 4.0, section 9.1.1), always
// with the time of day, as a day alone puts no frames in order; the final Z,
// which the Standard does not know, is tolerated.
var dateObs = regexp.MustCompile(`^\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d*)?Z?$`)

// ParseDateObs reads DATE-OBS as UTC. A second of 60 (a leap second) is the
// first of the next minute. Digits beyond nanoseconds are dropped.
func ParseDateObs(text string) (time.Time, error) {
	if !dateObs.MatchString(text) {
		return time.Time{}, fmt.Errorf("%q is no ISO 8601 time such as 2031-03-14T02:30:00.5", text)
	}
	const secondsAt = len("2006-01-02T15:04:")
	plain := strings.TrimSuffix(text, "Z")
	leap := time.Duration(0)
	if plain[secondsAt:secondsAt+2] == "60" {
		plain, leap = plain[:secondsAt]+"59"+plain[secondsAt+2:], time.Second
	}
	t, err := time.Parse("2006-01-02T15:04:05", strings.TrimSuffix(plain, "."))
	if err != nil {
		return time.Time{}, fmt.Errorf("%q is no time of the calendar", text)
	}
	return t.Add(leap), nil
}
