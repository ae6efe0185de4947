package report

import (
	"encoding/json"
	"fmt"
	"html"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/product"
)

// chromium runs a browser without a window.
func chromium(t *testing.T, args ...string) string {
	t.Helper()
	return outside.Program(t, "chromium", append([]string{
		"--headless", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--hide-scrollbars", "--no-first-run", "--user-data-dir=" + t.TempDir(), "--disable-background-networking",
	}, args...)...)
}

// measuring looks at a page in the browser: contents wider than the page, words of drawings
// that reach beyond them or cover each other, words that are too small, and, of the verdict,
// what ends below the first screen.
const measuring = `<script>
addEventListener('load', () => {
  const faults = [], wide = document.documentElement.clientWidth;
  if (document.documentElement.scrollWidth > wide) faults.push('wider than the page: ' + document.documentElement.scrollWidth + ' > ' + wide);
  for (const svg of document.querySelectorAll('figure svg')) {
    const r = svg.getBoundingClientRect(), unit = r.width / svg.viewBox.baseVal.width;
    if (r.right > wide + 1) faults.push('cut off: ' + svg.getAttribute('aria-label'));
    const texts = [...svg.querySelectorAll('text')].map(t => [t.textContent, t.getBoundingClientRect(), parseFloat(getComputedStyle(t).fontSize) * unit]);
    texts.forEach(([word, a, size], i) => {
      if (size < LEAST) faults.push('small: ' + word + ' ' + size);
      if (a.left < r.left - 1 || a.right > r.right + 1.5 || a.top < r.top - 2 || a.bottom > r.bottom + 2)
        faults.push('cut off: ' + word + ' of ' + svg.getAttribute('aria-label'));
      for (const [other, b] of texts.slice(i + 1))
        if (a.left < b.right - 0.5 && b.left < a.right - 0.5 && a.top < b.bottom - 3 && b.top < a.bottom - 3)
          faults.push('overlap: ' + word + ' / ' + other + ' of ' + svg.getAttribute('aria-label'));
    });
  }
  for (const e of document.querySelectorAll('.verdict h2, .reasons, .do'))
    if (e.getBoundingClientRect().bottom > SCREEN) faults.push('below the first screen: ' + e.textContent.slice(0, 40));
  const out = document.createElement('pre');
  out.id = 'faults';
  out.textContent = JSON.stringify(faults);
  document.body.append(out);
});
</script>`

// measured are the faults of a page, changed by change, in a window so wide and high; words
// of drawings are to be least px at least.
func measured(t *testing.T, page string, width, height int, least float64, change func(string) string) []string {
	t.Helper()
	script := strings.NewReplacer("LEAST", fmt.Sprint(least), "SCREEN", fmt.Sprint(height)).Replace(measuring)
	copied := filepath.Join(t.TempDir(), "measured.html")
	require.NoError(t, os.WriteFile(copied, []byte(strings.Replace(change(page), "</body>", script+"</body>", 1)), 0o666))
	dom := chromium(t, fmt.Sprintf("--window-size=%d,%d", width, height), "--virtual-time-budget=5000", "--dump-dom", "file://"+copied)
	found := regexp.MustCompile(`(?s)<pre id="faults">(.*?)</pre>`).FindStringSubmatch(dom)
	require.NotNil(t, found, "the page was not measured")
	var list []string
	require.NoError(t, json.Unmarshal([]byte(html.UnescapeString(found[1])), &list))
	return list
}

// The page suits a wide and a narrow screen and paper of A4 (ISO 216: 210 mm wide, less
// margins of 13 mm, 96 px an inch): the verdict with its reasons and cures on the first
// screen, nothing cut off or covered, words of drawings no smaller than 9 px, 7 points on
// paper.
func TestPageFits(t *testing.T) {
	for _, turn := range []float64{0, 37} {
		sc := smallScene()
		sc.rotang = turn
		dir := t.TempDir()
		page := renderPage(t, dir, sc.write(t, dir))
		asIs := func(s string) string { return s }
		require.Empty(t, measured(t, page, 1280, 800, 9, asIs))
		require.Empty(t, measured(t, page, 390, 844, 9, asIs))
		paper := func(s string) string {
			require.Contains(t, s, "@media print")
			return strings.ReplaceAll(strings.ReplaceAll(s, "@media print", "@media all"), "@media screen and", "@media print and")
		}
		require.Empty(t, measured(t, page, 695, 1024, 7*96.0/72, paper))
	}
}

// The measuring sees what it is to find.
func TestMeasuringSeesFaults(t *testing.T) {
	bad := `<!DOCTYPE html><body><div class="verdict"><h2 style="margin-top:900px">low</h2></div><div style="width:2000px">wide</div>
<figure><svg viewBox="0 0 50 20" style="width:400px;height:160px" aria-label="x"><text x="0" y="10" style="font-size:8px">one</text><text x="3" y="10" style="font-size:8px">two</text>
<text x="45" y="10" style="font-size:8px">beyond</text><text x="30" y="18" style="font-size:1px">tiny</text></svg></figure></body>`
	list := strings.Join(measured(t, bad, 1280, 800, 9, func(s string) string { return s }), "\n")
	for _, want := range []string{"wider than the page", "small: tiny", "overlap: one / two", "cut off: beyond", "below the first screen: low"} {
		require.Contains(t, list, want)
	}
}

var boxes = regexp.MustCompile(`<word xMin="([-\d.]+)" yMin="([-\d.]+)" xMax="([-\d.]+)" yMax="([-\d.]+)">`)

// Printed by a browser, every word lies within the margins of A4 (595.3 x 841.9 points, 13 mm
// are 36.9), each figure on one page, and the paper beside them stays white, in grey too.
func TestPagePrints(t *testing.T) {
	dir := t.TempDir()
	page := renderPage(t, dir, smallScene().write(t, dir))
	pdf := filepath.Join(dir, "page.pdf")
	chromium(t, "--no-pdf-header-footer", "--print-to-pdf="+pdf, "file://"+filepath.Join(dir, product.ReportFile))
	const margin, wide, high = 36.8, 595.3, 841.9
	text := outside.Program(t, "pdftotext", "-bbox", pdf, "-")
	all := boxes.FindAllStringSubmatch(text, -1)
	require.Greater(t, len(all), 300)
	for _, m := range all {
		var at [4]float64
		for i := range at {
			var err error
			at[i], err = strconv.ParseFloat(m[i+1], 64)
			require.NoError(t, err)
		}
		require.True(t, at[0] > margin-2 && at[2] < wide-margin+2 && at[1] > margin-4 && at[3] < high-margin+4, "%v", m)
	}
	// As many axes on paper as on the page.
	plain := strings.Join(strings.Fields(outside.Program(t, "pdftotext", pdf, "-")), " ")
	for _, name := range []string{"chi-square of dark columns that the fit has not seen", "decode of a dark column / its standard deviation", "UTC on 2031-03-14, hours"} {
		require.Equal(t, strings.Count(page, ">"+name+"<"), strings.Count(plain, name), name)
	}
	picture := filepath.Join(dir, "grey")
	outside.Program(t, "pdftoppm", "-gray", "-r", "40", "-f", "1", "-l", "1", "-singlefile", pdf, picture)
	pgm, err := os.ReadFile(picture + ".pgm")
	require.NoError(t, err)
	var columns, rows int
	_, err = fmt.Sscanf(string(pgm), "P5\n%d %d\n255\n", &columns, &rows)
	require.NoError(t, err)
	pixels := pgm[len(pgm)-columns*rows:]
	dark, edge := 0, 18 // of 40 an inch: 32 points
	for i, v := range pixels {
		x, y := i%columns, i/columns
		if x < edge || x >= columns-edge || y < edge || y >= rows-edge {
			require.Greater(t, v, byte(250), "ink in the margin at %d, %d", x, y)
		} else if v < 85 {
			dark++
		}
	}
	require.Greater(t, dark, 500, "hardly any ink")
}
