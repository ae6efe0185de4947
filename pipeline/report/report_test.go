package report

import (
	"bytes"
	"context"
	"encoding/xml"
	"errors"
	"fmt"
	"html"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/fitsutil"
	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/product"
)

// renderPage writes a page and gives its text.
func renderPage(t *testing.T, dir string, in Input) string {
	t.Helper()
	require.NoError(t, Write(t.Context(), dir, in))
	text, err := os.ReadFile(filepath.Join(dir, product.ReportFile))
	require.NoError(t, err)
	return string(text)
}

// contains is require.Contains without the whole page in its message.
func contains(t *testing.T, page, part string) {
	t.Helper()
	require.True(t, strings.Contains(page, part), "the page lacks %q", part)
}

// void elements of HTML have no end tag (HTML Standard, 13.1.2).
var void = map[string]bool{"meta": true, "img": true, "br": true}

// checkHTML demands that every tag is closed in order.
func checkHTML(t *testing.T, page string) {
	t.Helper()
	d := xml.NewDecoder(strings.NewReader(page))
	d.Strict, d.Entity = false, xml.HTMLEntity
	var open []string
	for {
		token, err := d.RawToken()
		if err == io.EOF {
			break
		}
		require.NoError(t, err)
		switch tag := token.(type) {
		case xml.StartElement:
			if !void[tag.Name.Local] {
				open = append(open, tag.Name.Local)
			}
		case xml.EndElement:
			require.NotEmpty(t, open, tag.Name.Local)
			require.Equal(t, open[len(open)-1], tag.Name.Local)
			open = open[:len(open)-1]
		}
	}
	require.Empty(t, open)
}

var drawings = regexp.MustCompile(`(?s)<svg class="(chart|picture)".*?</svg>`)

var bitmaps = regexp.MustCompile(`href="data[^"]*"`)

// checkSVG demands that every drawing is XML by itself, and so many charts and pictures.
func checkSVG(t *testing.T, page string, number int) {
	t.Helper()
	all := drawings.FindAllString(page, -1)
	require.Len(t, all, number)
	for _, s := range all {
		d := xml.NewDecoder(strings.NewReader(s))
		for {
			if _, err := d.Token(); err != nil {
				require.ErrorIs(t, err, io.EOF, s)
				break
			}
		}
		plain := bitmaps.ReplaceAllString(s, "") // base64 may spell anything
		require.NotRegexp(t, `NaN|Inf|#-`, plain)
	}
}

// withoutUnit are names of axes that have no unit: counts and ratios.
var withoutUnit = []string{
	"element", "detector row", "science step", "chi-square", "chi-square of dark columns that the fit has not seen", "throughput", "part of all",
	"decode of a dark column / its standard deviation", "S/N reached / S/N forecast", "electrons", "electrons a voxel",
}

var (
	figures  = regexp.MustCompile(`(?s)<figure.*?</figure>`)
	captions = regexp.MustCompile(`(?s)<figcaption[^>]*>(.*?)</figcaption>`)
	names    = regexp.MustCompile(`(?s)<g class="name">(.*?)</g>`)
	words    = regexp.MustCompile(`<text[^>]*>([^<]*)</text>`)
)

// checkFigures demands of every figure a caption, a name for those who cannot see it, and
// names of its axes with their units.
func checkFigures(t *testing.T, page string) {
	t.Helper()
	all := figures.FindAllString(page, -1)
	require.NotEmpty(t, all)
	for _, f := range all {
		caption := captions.FindStringSubmatch(f)
		require.NotNil(t, caption, f[:min(len(f), 200)])
		require.Greater(t, len(strings.Fields(caption[1])), 3, caption[1])
		if !drawings.MatchString(f) {
			contains(t, f, "Too few good voxels to draw")
			continue
		}
		require.Regexp(t, `aria-label="[^"]+"`, f)
		named := 0
		for _, g := range names.FindAllStringSubmatch(f, -1) {
			for _, w := range words.FindAllStringSubmatch(g[1], -1) {
				named++
				name := html.UnescapeString(w[1])
				require.True(t, slices.Contains(withoutUnit, name) || regexp.MustCompile(`, (nm|px|%|hours)$`).MatchString(name), "the axis %q has no unit", name)
			}
		}
		require.Positive(t, named, caption[1])
	}
}

func TestPage(t *testing.T) {
	dir := t.TempDir()
	in := smallScene().write(t, dir)
	page := renderPage(t, dir, in)
	checkHTML(t, page)
	checkSVG(t, page, 15)
	checkFigures(t, page)
	require.Less(t, len(page), 3<<20)
	for _, part := range []string{
		"Can this cube be trusted?", "Look at these places first.", "lacking is step 19", "Exit code 3",
		"40 elements × 60 detector rows × 50 wavelengths", "all 50 wavelengths", "18 rows that are ok",
		in.Run.Inputs[0].SHA256, "recipe.arc.use", "536870912", "1.08 GB/s", "step 7 is served by f00007.fits", "vacuum wavelength, nm",
	} {
		contains(t, page, part)
	}
	// A warning that is a reason as well is said once among what to look at.
	require.Equal(t, 1, strings.Count(page, "<li>1 science frame is missing"))
	require.True(t, page == renderPage(t, dir, in), "the page differs from run to run")
	entries, err := os.ReadDir(dir)
	require.NoError(t, err)
	require.Len(t, entries, 2) // cube.fits and the page
}

// The page asks nothing of a network and runs nothing.
func TestPageIsSelfContained(t *testing.T) {
	dir := t.TempDir()
	page := renderPage(t, dir, smallScene().write(t, dir))
	for _, name := range []string{"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"} { // names, never fetched
		page = strings.ReplaceAll(page, name, "")
	}
	require.Empty(t, regexp.MustCompile(`<[^>]*\son[a-z]+\s*=`).FindString(page), "event attributes")
	for _, forbidden := range []string{"http:", "https:", "<script", "<link", "@import", "url(h", "<iframe", "<img"} {
		require.False(t, strings.Contains(page, forbidden), forbidden)
	}
	for _, m := range regexp.MustCompile(`(?:src|href)="([^"]*)"`).FindAllStringSubmatch(page, -1) {
		if anchor, here := strings.CutPrefix(m[1], "#"); here {
			contains(t, page, fmt.Sprintf(`id="%s"`, anchor))
			continue
		}
		require.True(t, strings.HasPrefix(m[1], "data:image/png;base64,"), m[1])
	}
}

// Names from outside are shown as they are and never become tags.
func TestPageEscapes(t *testing.T) {
	hostile := `"><img src=x onerror=alert(1)><script>alert('&')</script></style></svg>`
	sc := smallScene()
	dir := t.TempDir()
	in := sc.write(t, dir)
	in.Schema.Object, in.Profile = hostile+"1", hostile+"2"
	in.Ledger[0].Verdict, in.Ledger[0].File, in.Ledger[0].Note = product.Unreadable, hostile+"3", hostile+"4"
	in.Ledger[1].File, in.Ledger[1].MaskID = hostile+"5", hostile+"6"
	in.Run.Settings[hostile+"7"] = hostile + "8"
	in.Run.Settings["list"] = []any{hostile + "9"}
	in.Run.Inputs[0].File = hostile + "10"
	in.Run.Warnings, in.Degraded = append(in.Run.Warnings, hostile+"11"), []string{hostile + "12"}
	in.Run.Stages[0].Name, in.Run.Version, in.Run.CPULevel = hostile+"13", hostile+"14", hostile+"15"
	page := renderPage(t, dir, in)
	checkHTML(t, page)
	checkSVG(t, page, 15)
	require.False(t, strings.Contains(page, "<script"))
	require.False(t, strings.Contains(page, "<img"))
	text := html.UnescapeString(page)
	for i := 1; i <= 15; i++ {
		if i == 9 { // JSON text in a cell
			contains(t, text, `\u003cscript\u003e`)
			continue
		}
		contains(t, text, fmt.Sprintf("%s%d", hostile, i))
	}
}

// Compass, scale, picture and spectrum against wcslib, astropy and numpy.
func TestCrosscheckPage(t *testing.T) {
	for _, rotang := range []float64{0, 37} {
		for _, parity := range []int{1, -1} {
			sc := smallScene()
			sc.rotang, sc.parity = rotang, parity
			dir := t.TempDir()
			page := renderPage(t, dir, sc.write(t, dir))
			require.Equal(t, "ok\n", outside.Python(t, "report_page.py", dir), "rotang %g, parity %d", rotang, parity)
			// The bright star is found where the scene has it, to half a voxel.
			found := regexp.MustCompile(`the brightest place: element \d+, row \d+; ([\d.]+)″ east and ([\d.]+)″ north of`).FindStringSubmatch(page)
			require.NotNil(t, found)
			for i, want := range []float64{starEast, starNorth} {
				got, err := strconv.ParseFloat(found[i+1], 64)
				require.NoError(t, err)
				require.InDelta(t, want, got, 0.35) // half a voxel's diagonal, rounded
			}
		}
	}
}

func TestNoCube(t *testing.T) {
	dir := t.TempDir()
	in := smallScene().input(smallScene().schema(t))
	page := renderPage(t, dir, in)
	checkHTML(t, page)
	contains(t, page, "This run made no cube.fits")
	contains(t, page, "Can this element cube be trusted?")
}

// A cube without a single good voxel still gets its page, and its pictures where there is
// light.
func TestNothingGood(t *testing.T) {
	sc := scene{elements: 1, rows: 4, planes: 3, parity: 1, object: "nothing"}
	dir := t.TempDir()
	in := sc.write(t, dir)
	rewriteFlags(t, dir, sc, product.FlagNoData)
	page := renderPage(t, dir, in)
	checkHTML(t, page)
	checkSVG(t, page, 8) // none of light
	contains(t, page, "there is nothing to draw")
	contains(t, page, "<td>NODATA</td><td class=\"n\">1</td><td class=\"n\">100 %</td>")

	rewriteFlags(t, dir, sc, product.FlagLost)
	page = renderPage(t, dir, in)
	checkHTML(t, page)
	checkFigures(t, page)
	contains(t, page, "No voxel of this cube is good.")
	contains(t, page, "White-light picture")
	contains(t, page, "<td>LOST</td><td class=\"n\">16</td><td class=\"n\">100 %</td>")
}

// The smallest cubes: a picture of one place, charts of one or two voxels.
func TestSmallestCubes(t *testing.T) {
	for _, sc := range []scene{{elements: 1, rows: 1, planes: 1}, {elements: 1, rows: 1, planes: 2}, {elements: 2, rows: 5, planes: 3}, {elements: 200, rows: 2, planes: 2}} {
		sc.parity = 1
		dir := t.TempDir()
		in := sc.write(t, dir)
		rewriteFlags(t, dir, sc, 0)
		page := renderPage(t, dir, in)
		checkHTML(t, page)
		contains(t, page, `class="picture"`)
	}
}

// rewriteFlags writes the cube again with a signal of its place everywhere and
// the same flags.
func rewriteFlags(t *testing.T, dir string, sc scene, flag int16) {
	t.Helper()
	specs, err := sc.schema(t).Images()
	require.NoError(t, err)
	n := sc.elements * sc.rows * sc.planes
	signal, ones, flags := make([]float32, n), make([]float32, n), make([]int16, n)
	for i := range n {
		signal[i], ones[i], flags[i] = float32(i), 1, flag
	}
	var hdus []any
	for i, data := range []any{signal, ones, flags, ones} {
		hdus = append(hdus, &fitsutil.ImageData{Name: specs[i].Name, Header: specs[i].Header, Axes: specs[i].Axes, Data: data})
	}
	require.NoError(t, fitsutil.WriteFile(filepath.Join(dir, product.CubeFile), fitsutil.NewHeader(), hdus...))
}

func TestWriteFails(t *testing.T) {
	sc := smallScene()
	dir := t.TempDir()
	in := sc.write(t, dir)
	path := filepath.Join(dir, product.CubeFile)
	whole, err := os.ReadFile(path)
	require.NoError(t, err)
	var fault *fitsutil.Error
	for _, c := range []struct {
		name, part string
		bytes      []byte
	}{
		{"no FITS file", path, []byte("no cube")},
		{"cut short", path, whole[:len(whole)/2]},
		{"no FLAGS", "FLAGS", bytes.ReplaceAll(whole, []byte("'FLAGS   '"), []byte("'FLACS   '"))},
		{"no WCS", "CD2_1", bytes.ReplaceAll(whole, []byte("CD2_1   "), []byte("CX2_1   "))},
	} {
		require.NoError(t, os.WriteFile(path, c.bytes, 0o644))
		err := Write(t.Context(), dir, in)
		require.ErrorAs(t, err, &fault, c.name)
		require.ErrorContains(t, err, c.part)
		require.NoFileExists(t, filepath.Join(dir, product.ReportFile))
	}
	require.NoError(t, os.WriteFile(path, whole, 0o644))
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	require.True(t, errors.Is(Write(ctx, dir, in), context.Canceled))
	require.NoFileExists(t, filepath.Join(dir, product.ReportFile))
	require.ErrorAs(t, Write(t.Context(), filepath.Join(dir, "gone"), in), &fault)
}
