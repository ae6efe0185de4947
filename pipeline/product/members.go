package product

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"strconv"
	"strings"

	"mirrorloom/fitsutil"
)

// MembersTable is the table of a combined cube that names the runs it was made of.
const MembersTable = "RUNS"

// Member is a run in a combined cube.
type Member struct {
	// Path is the run's folder as seen from that of the combined cube, SHA what
	// Identify makes of its cube.fits.
	Path string `json:"run"`
	SHA  string `json:"cube_sha256"`
	// Element and Row are where its first element and row lie in the combined cube.
	Element int `json:"element"`
	Row     int `json:"row"`
	// Frames is its number of science frames.
	Frames int `json:"frames"`
	// Light is its light over that of the first run in voxels that are good in both, and
	// LightErr the standard error for independent voxels; 0 where they share none.
	Light    float64 `json:"light"`
	LightErr float64 `json:"light_err"`
}

// Members are the runs in a combined cube, in their order.
type Members []Member

// Table is the table RUNS.
func (m Members) Table() *fitsutil.Table {
	t := &fitsutil.Table{Name: MembersTable}
	width := 1
	paths, shas := make([]string, len(m)), make([]string, len(m))
	ints := [3][]int32{}
	floats := [2][]float64{}
	for i, r := range m {
		paths[i], shas[i] = ascii(r.Path), r.SHA
		width = max(width, len(paths[i]))
		for k, v := range [3]int{r.Element, r.Row, r.Frames} {
			ints[k] = append(ints[k], int32(v))
		}
		for k, v := range [2]float64{r.Light, r.LightErr} {
			floats[k] = append(floats[k], v)
		}
	}
	t.Columns = []fitsutil.Column{
		{Name: "RUN", Format: strconv.Itoa(width) + "A", Data: paths},
		{Name: "CUBESHA", Format: "64A", Data: shas},
		{Name: "ELEMENT", Format: "J", Data: ints[0]},
		{Name: "ROW", Format: "J", Data: ints[1]},
		{Name: "NFRAMES", Format: "J", Data: ints[2]},
		{Name: "LIGHT", Format: "D", Data: floats[0]},
		{Name: "LIGHTERR", Format: "D", Data: floats[1]},
	}
	return t
}

// ReadMembers reads the table from a cube.fits; nil where it has none, as the cube of one
// night.
func ReadMembers(f *fitsutil.File) (Members, error) {
	t, err := f.Table(MembersTable)
	if errors.Is(err, fitsutil.ErrMissingHDU) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	m := make(Members, t.Rows())
	paths, err := t.Strings("RUN")
	if err != nil {
		return nil, err
	}
	shas, err := t.Strings("CUBESHA")
	if err != nil {
		return nil, err
	}
	for i := range m {
		m[i].Path, m[i].SHA = unascii(paths[i]), shas[i]
	}
	for _, c := range []struct {
		name string
		to   func(*Member) *int
	}{
		{"ELEMENT", func(r *Member) *int { return &r.Element }}, {"ROW", func(r *Member) *int { return &r.Row }},
		{"NFRAMES", func(r *Member) *int { return &r.Frames }},
	} {
		values, err := t.Int32s(c.name)
		if err != nil {
			return nil, err
		}
		for i, v := range values {
			*c.to(&m[i]) = int(v)
		}
	}
	for _, c := range []struct {
		name string
		to   func(*Member) *float64
	}{{"LIGHT", func(r *Member) *float64 { return &r.Light }}, {"LIGHTERR", func(r *Member) *float64 { return &r.LightErr }}} {
		values, err := t.Float64s(c.name)
		if err != nil {
			return nil, err
		}
		for i, v := range values {
			*c.to(&m[i]) = v
		}
	}
	if len(m) == 0 {
		return nil, fmt.Errorf("%s: table %s names no run; combine the runs again", f.Path(), MembersTable)
	}
	return m, nil
}

// unascii inverts ascii.
func unascii(s string) string {
	if strings.Contains(s, `\`) {
		if plain, err := strconv.Unquote(`"` + s + `"`); err == nil {
			return plain
		}
	}
	return s
}

// Identify is the lower-case hex SHA-256 of all headers of a file, whose DATASUM cards
// stand for the data.
func Identify(f *fitsutil.File) string {
	sum := sha256.New()
	for _, u := range f.HDUs() {
		for _, card := range u.Header.Cards() {
			fmt.Fprintf(sum, "%s=%v/%s\n", card.Key, card.Value, card.Comment) // a hash takes everything
		}
	}
	return fmt.Sprintf("%x", sum.Sum(nil))
}
