package nightsheet

import (
	"bytes"
	_ "embed"
	"encoding/base64"
	"fmt"
	"html"
	"html/template"
	"io"
	"slices"
	"strings"
)

//go:embed page.html
var pageText string

//go:embed style.css
var styleText string

var pageTemplate = template.Must(template.New("sheet").Parse(pageText))

// page is what the template shows.
type page struct {
	*Sheet
	Style        template.CSS
	Title        string
	SHA          string
	VerdictLines int

	// Page 1. LeftHeight is that of the two columns, points.
	Advice        string
	LeftHeight    string
	Where, Limits []fact
	Times         []kindRow
	Data          string
	Night, Sky    template.HTML
	FieldNote     string
	Warned        []string
	MoreWarnings  int
	SNR, Spectra  template.HTML
	MoreWanted    int
	// Page 2. NotesHeight is that of the two columns, points.
	Table       []runRow
	TableNote   string
	Sizes       []sizeRow
	SizesNote   string
	DeviceRows  []deviceRow
	DeviceNote  string
	NotesHeight string
	Caution     string
}

// titlePoints is the size of the target's name.
const titlePoints = 15

// WriteHTML writes plan.html.
func (s *Sheet) WriteHTML(w io.Writer) error {
	l, err := newLayout(s)
	if err != nil {
		return err
	}
	p := &page{Sheet: s, Style: template.CSS(fontsPlace + styleText), SHA: s.SequenceSHA[:min(16, len(s.SequenceSHA))]}
	p.Title = l.bold.Fit(s.Target, titlePoints, pageWidth-150)
	l.first(p)
	l.second(p)
	var body bytes.Buffer
	if err := pageTemplate.Execute(&body, p); err != nil {
		return fmt.Errorf("%s: %w", HTMLFile, err)
	}
	// The fonts get the characters of the page as it is without them.
	fonts, err := l.fonts(body.String())
	if err != nil {
		return err
	}
	_, err = io.WriteString(w, strings.Replace(body.String(), fontsPlace, string(fonts), 1))
	return err
}

// fontsPlace is where the fonts go in the style.
const fontsPlace = "/* fonts */"

// fonts are the two weights with the characters of a text.
func (l *layout) fonts(text string) (template.CSS, error) {
	runes := []rune(html.UnescapeString(text))
	slices.Sort(runes)
	used := string(slices.Compact(runes))
	var css strings.Builder
	for _, f := range []struct {
		weight int
		subset func(string) ([]byte, error)
	}{{400, l.regular.Subset}, {700, l.bold.Subset}} {
		data, err := f.subset(used)
		if err != nil {
			return "", err
		}
		fmt.Fprintf(&css, "@font-face{font-family:sheet;font-weight:%d;src:url(data:font/ttf;base64,%s) format('truetype')}\n", f.weight, base64.StdEncoding.EncodeToString(data))
	}
	return template.CSS(css.String()), nil
}
