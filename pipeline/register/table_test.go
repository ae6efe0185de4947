package register

import (
	"path/filepath"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestParseStars(t *testing.T) {
	stars, err := ParseStars("s.csv", []byte("name,ra_deg,dec_deg\nA, 12.5,-3\n\"B, b\",0,90\n"))
	require.NoError(t, err)
	require.Equal(t, []Star{{"A", 12.5, -3}, {"B, b", 0, 90}}, stars)
	for _, c := range []struct{ text, want string }{
		{"", "s.csv: the table of stars is empty; write name,ra_deg,dec_deg"},
		{"name,ra,dec\n", `s.csv:1: the columns are "name,ra,dec"; write name,ra_deg,dec_deg, in degrees`},
		{"name,ra_deg\n", "s.csv:1: not CSV of 3 fields"},
		{"name,ra_deg,dec_deg\n", "holds no star"},
		{"name,ra_deg,dec_deg\nA,1\n", "s.csv:2: not CSV of 3 fields"},
		{"name,ra_deg,dec_deg\nA,12:30:00,-3\n", `s.csv:2: column ra_deg: "12:30:00" is sexagesimal; give degrees`},
		{"name,ra_deg,dec_deg\nA,x,-3\n", `"x" is no number`},
		{"name,ra_deg,dec_deg\nA,361,-3\n", "361 is outside 0 to 360"},
		{"name,ra_deg,dec_deg\nA,1,-93\n", "column dec_deg: -93 is outside -90 to 90"},
		{"name,ra_deg,dec_deg\nA,NaN,-3\n", "NaN is outside"},
		{"name,ra_deg,dec_deg\nA,1,2\nA,1,3\n", `s.csv:3: the name "A" comes twice`},
		{"name,ra_deg,dec_deg\n,1,2\n", "no name"},
	} {
		stars, err := ParseStars("s.csv", []byte(c.text))
		require.Nil(t, stars)
		require.ErrorContains(t, err, c.want)
	}
	_, err = ReadStars(filepath.Join(t.TempDir(), "no.csv"))
	require.ErrorContains(t, err, "open the table of stars")
}

func TestCheckField(t *testing.T) {
	s := askedSchema()
	in := Star{"in", s.RADeg, s.DecDeg}
	require.NoError(t, CheckField("s.csv", []Star{{"out", 1, 2}, in}, s, 0))
	err := CheckField("s.csv", []Star{{"a", s.RADeg / 15, s.DecDeg}, {"b", 1, 2}}, s, 5)
	require.EqualError(t, err, "s.csv: no star lies in the field, but 1 of 2 would if their right ascensions were hours; give degrees, 15 times as much")
	err = CheckField("s.csv", []Star{{"a", s.RADeg, s.DecDeg + 0.1}}, s, 5)
	require.ErrorContains(t, err, "none of 1 stars lies in the field around RA 123.30000, Dec +61.60000, the nearest 5.")
	err = CheckField("s.csv", []Star{{"a", s.RADeg + 180, -s.DecDeg}}, s, 5)
	require.ErrorContains(t, err, "more than 90 degrees away")
	// Just beyond the edge, within what the telescope may be off.
	ra, dec := s.Sky(-5, 40)
	require.Error(t, CheckField("s.csv", []Star{{"a", ra, dec}}, s, 2))
	require.NoError(t, CheckField("s.csv", []Star{{"a", ra, dec}}, s, 3))
}

func FuzzParseStars(f *testing.F) {
	f.Add([]byte("name,ra_deg,dec_deg\nA,12.5,-3\n"))
	f.Add([]byte("name,ra_deg,dec_deg\n\"A\nb\",12h,+3\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		stars, err := ParseStars("s.csv", data)
		if err != nil {
			require.Nil(t, stars)
			return
		}
		for _, s := range stars {
			require.True(t, s.RADeg >= 0 && s.RADeg <= 360 && s.DecDeg >= -90 && s.DecDeg <= 90)
		}
	})
}
