package pair

import (
	"testing"
	"time"

	"github.com/stretchr/testify/require"
)

// The examples of the FITS Standard 4.0, section 9.1.1, and forms near them.
func TestParseDateObs(t *testing.T) {
	day := func(s, ns int) time.Time { return time.Date(1996, 10, 14, 10, 14, s, ns, time.UTC) }
	for _, c := range []struct {
		text string
		want time.Time // zero: refused
	}{
		{"1996-10-14T10:14:36", day(36, 0)},
		{"1996-10-14T10:14:36Z", day(36, 0)},
		{"1996-10-14T10:14:36.", day(36, 0)},
		{"1996-10-14T10:14:36.123", day(36, 123e6)},
		{"1996-10-14T10:14:36.123456789012", day(36, 123456789)},
		{"2016-12-31T23:59:60.5", time.Date(2017, 1, 1, 0, 0, 0, 5e8, time.UTC)}, // a leap second
		{"1996-10-14", time.Time{}},
		{"14/10/96", time.Time{}},
		{"1996-10-14 10:14:36", time.Time{}},
		{"1996-10-14T10:14", time.Time{}},
		{"1996-10-14T10:14:36,5", time.Time{}},
		{"1996-10-14T10:14:36+01:00", time.Time{}},
		{"1996-02-30T10:14:36", time.Time{}},
		{"1996-10-14T24:00:00", time.Time{}},
		{"", time.Time{}},
	} {
		got, err := ParseDateObs(c.text)
		require.Equal(t, c.want.IsZero(), err != nil, c.text)
		require.True(t, c.want.Equal(got), "%s: %v", c.text, got)
	}
}

// A time that is taken is the one that Go prints back in the same form.
func FuzzDateObs(f *testing.F) {
	for _, s := range []string{"1996-10-14T10:14:36.123Z", "2016-12-31T23:59:60", "1996-10-14", "0000-01-01T00:00:00", "9999-12-31T23:59:59.999999999"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, text string) {
		got, err := ParseDateObs(text)
		if err != nil {
			require.True(t, got.IsZero())
			return
		}
		again, err := ParseDateObs(got.Format("2006-01-02T15:04:05.999999999"))
		if got.Year() > 9999 { // a leap second at the end of the calendar
			return
		}
		require.NoError(t, err)
		require.True(t, got.Equal(again))
	})
}
