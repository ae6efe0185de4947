package extract

import (
	"context"
	"fmt"
	"io"
	"math"
	"path/filepath"
	"slices"
	"strings"

	"mirrorloom/fitsutil"
)

// Names of the products of maps of lines.
const (
	LinesFITS = "lines.fits"
	LinesCSV  = "lines.csv"
	LinesPlot = "lines.png"
)

// LinesAnswer sums up the lines, by aperture or over the field.
type LinesAnswer struct {
	// Pixels were fitted, Faint of them below the S/N asked for, Failed had data but
	// no fit; absent for an aperture.
	Pixels int          `json:"pixels,omitempty"`
	Faint  int          `json:"faint,omitempty"`
	Failed int          `json:"failed,omitempty"`
	Status int          `json:"status"`
	Lines  []LineAnswer `json:"lines"`
	Unit   string       `json:"unit"`
}

// LineAnswer is a line; of a map, the medians over the pixels above the S/N.
type LineAnswer struct {
	RestNM      float64  `json:"rest_nm"`
	Flux        *float64 `json:"flux"`
	FluxErr     *float64 `json:"flux_error"`
	Velocity    *float64 `json:"velocity_km_s"`
	VelocityErr *float64 `json:"velocity_error_km_s"`
	Width       *float64 `json:"width_km_s"`
	WidthErr    *float64 `json:"width_error_km_s"`
}

func lineAnswers(lines []Line) []LineAnswer {
	var all []LineAnswer
	for _, l := range lines {
		all = append(all, LineAnswer{l.RestNM, known(l.Flux), known(l.FluxErr), known(l.Velocity), known(l.VelocityErr), known(l.Width), known(l.WidthErr)})
	}
	return all
}

// lineValues are the columns and images of lines, in their order.
func lineValues(unit string) []struct {
	name, unit string
	of         func(*Line) float64
} {
	return []struct {
		name, unit string
		of         func(*Line) float64
	}{
		{"FLUX", unit, func(l *Line) float64 { return l.Flux }},
		{"FLUX_ERROR", unit, func(l *Line) float64 { return l.FluxErr }},
		{"FLUX_NAIVE_ERROR", unit, func(l *Line) float64 { return l.FluxNaiveErr }},
		{"VELOCITY", "km/s", func(l *Line) float64 { return l.Velocity }},
		{"VELOCITY_ERROR", "km/s", func(l *Line) float64 { return l.VelocityErr }},
		{"WIDTH", "km/s", func(l *Line) float64 { return l.Width }},
		{"WIDTH_ERROR", "km/s", func(l *Line) float64 { return l.WidthErr }},
	}
}

func (c *Cube) runLines(ctx context.Context, opts Options) (*LinesAnswer, error) {
	m, err := c.Lines(ctx, *opts.Lines, func(done int) { opts.Progress("lines", done, c.Rows) })
	if err != nil {
		return nil, err
	}
	if err := c.writeLines(opts.Out, m); err != nil {
		return nil, err
	}
	return m.answer(), nil
}

func (m *LineMap) answer() *LinesAnswer {
	a := &LinesAnswer{Unit: m.Unit}
	for _, s := range m.Status {
		switch {
		case s == Fitted:
			a.Pixels++
		case s&NotSettled != 0:
			a.Failed++
		case s&BelowMinSN != 0:
			a.Pixels++
			a.Faint++
		}
	}
	middle := make([]Line, len(m.Options.RestNM))
	for i := range middle {
		of := func(get func(*Line) float64) float64 {
			var all []float64
			for at := range m.Lines {
				if line := &m.Lines[at][i]; !math.IsNaN(line.Velocity) {
					all = append(all, get(line))
				}
			}
			if len(all) == 0 {
				return math.NaN()
			}
			return median(all)
		}
		middle[i] = Line{
			RestNM: m.Options.RestNM[i],
			Flux:   of(func(l *Line) float64 { return l.Flux }), FluxErr: of(func(l *Line) float64 { return l.FluxErr }),
			Velocity: of(func(l *Line) float64 { return l.Velocity }), VelocityErr: of(func(l *Line) float64 { return l.VelocityErr }),
			Width: of(func(l *Line) float64 { return l.Width }), WidthErr: of(func(l *Line) float64 { return l.WidthErr }),
		}
	}
	a.Lines = lineAnswers(middle)
	return a
}

// lineCards say what was fitted.
func (o *LineOptions) cards() []card {
	tied := "one velocity and width for all lines"
	if o.Free {
		tied = "a velocity and width for each line"
	}
	cards := []card{
		{"NLINES", len(o.RestNM), "lines, along axis 3 of the maps"},
		{"TIED", tied, ""},
		{"FITWIN", o.WindowNM, "nm on both sides of the lines"},
		{"VELMID", o.VelocityKmS, "km/s, searched around"},
		{"VELRANGE", o.RangeKmS, "km/s, on both sides"},
		{"MINSN", o.MinSN, "S/N of the flux for velocity and width"},
	}
	for i, nm := range o.RestNM {
		cards = append(cards, card{fmt.Sprintf("REST%d", i+1), nm, "nm at rest, in vacuum"})
	}
	return cards
}

// hasValues tells whether there is something to draw.
func hasValues(values []float32) bool {
	return slices.ContainsFunc(values, func(v float32) bool { return !isNaN(v) })
}

// writeLines writes maps and text into dir, and a picture if there is something to draw. The maps have the axes
// (element, row, line).
func (c *Cube) writeLines(dir string, m *LineMap) error {
	primary, err := c.primary(m.Options.cards()...)
	if err != nil {
		return err
	}
	var hdus []any
	n, lines := m.Elements*m.Rows, len(m.Options.RestNM)
	for _, v := range lineValues(m.Unit) {
		h, err := c.imageHeader(v.unit)
		if err != nil {
			return err
		}
		data := make([]float32, n*lines)
		for at := range m.Lines {
			for i := range m.Lines[at] {
				data[i*n+at] = float32(v.of(&m.Lines[at][i]))
			}
		}
		hdus = append(hdus, &fitsutil.ImageData{Name: v.name, Header: h, Axes: []int{m.Elements, m.Rows, lines}, Data: data})
	}
	h, err := c.imageHeader("")
	if err != nil {
		return err
	}
	status := h.Clone()
	if err := status.Set("STATUS", statusWords, ""); err != nil {
		return err
	}
	bits := make([]int16, n)
	for i, s := range m.Status {
		bits[i] = int16(s)
	}
	axes := []int{m.Elements, m.Rows}
	hdus = append(hdus, &fitsutil.ImageData{Name: "CHI2", Header: h, Axes: axes, Data: m.Chi2}, &fitsutil.ImageData{Name: "STATUS", Header: status, Axes: axes, Data: bits})
	if err := fitsutil.WriteFile(filepath.Join(dir, LinesFITS), primary, hdus...); err != nil {
		return err
	}
	if err := fitsutil.WriteAtomic(filepath.Join(dir, LinesCSV), func(w io.Writer) error { return c.linesCSV(w, m) }); err != nil {
		return err
	}
	velocity := make([]float32, n)
	for at := range velocity {
		velocity[at] = float32(m.Lines[at][0].Velocity)
	}
	if !hasValues(velocity) {
		return nil
	}
	return fitsutil.WriteAtomic(filepath.Join(dir, LinesPlot), func(w io.Writer) error {
		return c.drawMap(w, velocity, fmt.Sprintf("velocity of the line at %g nm (km/s)", m.Options.RestNM[0]))
	})
}

// linesCSV writes a row for each line that was fitted.
func (c *Cube) linesCSV(w io.Writer, m *LineMap) error {
	head := []string{"element", "row", "ra (deg)", "dec (deg)", "rest (nm)"}
	for _, v := range lineValues(m.Unit) {
		head = append(head, fmt.Sprintf("%s (%s)", strings.ToLower(strings.ReplaceAll(v.name, "_", " ")), v.unit))
	}
	rows := [][]string{append(head, "chi2", "status")}
	for at, lines := range m.Lines {
		for i := range lines {
			if math.IsNaN(lines[i].Flux) {
				continue
			}
			row := append(c.placeFields(at), number(lines[i].RestNM))
			for _, v := range lineValues(m.Unit) {
				row = append(row, number(v.of(&lines[i])))
			}
			rows = append(rows, append(row, number(float64(m.Chi2[at])), fmt.Sprint(m.Status[at])))
		}
	}
	return writeRows(w, rows)
}
