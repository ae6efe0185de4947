package nightsheet_test

import (
	"context"
	"encoding/json"
	"html"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/internal/outside"
	"mirrorloom/pipeline/nightsheet"
	"mirrorloom/pipeline/plan"
)

// targets are those whose sheets are printed: file or embedded name, profile. The last three
// take minutes, and are for make validate.
var targets = [][2]string{
	{"demo", "optical"}, {"proposal", "optical"}, {"testdata/slit.yaml", "optical"}, {"testdata/crowded.yaml", "optical"},
	{"demo-infrared", "infrared"}, {"demo-visible", "visible"}, {"testdata/long.yaml", "optical"},
}

const quick = 4 // of targets, for make test

func planned(t *testing.T, target, profile string) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "sequence")
	_, err := plan.Run(context.Background(), plan.Options{Target: target, Profile: profile, Out: dir, Sheet: nightsheet.Write})
	require.NoError(t, err)
	return dir
}

// chromium runs a browser without a window.
func chromium(t *testing.T, args ...string) string {
	t.Helper()
	return outside.Program(t, "chromium", append([]string{
		"--headless", "--no-sandbox", "--disable-gpu", "--no-first-run", "--user-data-dir=" + t.TempDir(), "--disable-background-networking",
	}, args...)...)
}

// Printed by a browser, each sheet has two pages of A4 (ISO 216: 210 x 297 mm, which is 595.3
// x 841.9 points), in fonts of its own; on its pages nothing is clipped, no two labels of a
// drawing overlap, and no word is smaller than 7 points.
func TestSheetsPrintOnTwoPages(t *testing.T) {
	printed := targets[:quick]
	if os.Getenv("MIRRORLOOM_VALIDATE") != "" {
		printed = targets
	}
	for _, target := range printed {
		t.Run(strings.TrimSuffix(filepath.Base(target[0]), ".yaml"), func(t *testing.T) {
			dir := planned(t, target[0], target[1])
			sheet := filepath.Join(dir, nightsheet.HTMLFile)
			pdf := filepath.Join(t.TempDir(), "plan.pdf")
			chromium(t, "--no-pdf-header-footer", "--print-to-pdf="+pdf, "file://"+sheet)
			info := outside.Program(t, "pdfinfo", pdf)
			require.Regexp(t, `Pages: +2\n`, info)
			require.Regexp(t, `Page size: +59[45]\.?\d* x 84[12]\.?\d* pts \(A4\)`, info)
			require.Contains(t, outside.Program(t, "pdffonts", pdf), "LiberationSans")

			for _, page := range []string{"1", "2"} {
				grey := filepath.Join(t.TempDir(), "page")
				outside.Program(t, "pdftoppm", "-gray", "-r", "50", "-f", page, "-l", page, "-singlefile", pdf, grey)
				data, err := os.ReadFile(grey + ".pgm")
				require.NoError(t, err)
				dark, light := greys(data)
				require.Greater(t, dark, 0.005, "page %s has hardly any ink", page)
				require.Greater(t, light, 0.7, "page %s has too much ink", page)
			}
			require.Empty(t, faults(t, sheet))
		})
	}
}

// greys are the parts of a picture's pixels that are darker than a third and lighter than nine
// tenths of white.
func greys(pgm []byte) (dark, light float64) {
	pixels := pgm[strings.Index(string(pgm), "\n255\n")+5:]
	for _, v := range pixels {
		if v < 85 {
			dark++
		}
		if v > 229 {
			light++
		}
	}
	return dark / float64(len(pixels)), light / float64(len(pixels))
}

// measuring looks at a page in the browser: boxes whose contents are higher or wider than they
// are, words of drawings that reach beyond them or overlap, small words.
const measuring = `<script>
const faults = [];
document.fonts.ready.then(() => {
  for (const e of document.querySelectorAll('.page, .column, .columns, header, h1, h2, p, td, th')) {
    if (e.scrollHeight > e.clientHeight + 1 || e.scrollWidth > e.clientWidth + 1)
      if (getComputedStyle(e).display !== 'inline' && e.clientHeight > 0)
        faults.push('clipped: ' + e.className + ' ' + e.tagName + ' ' + e.scrollHeight + ' > ' + e.clientHeight + ', ' + e.scrollWidth + ' > ' + e.clientWidth + ' ' + e.textContent.slice(0, 40));
  }
  for (const page of document.querySelectorAll('.page')) {
    const r = page.getBoundingClientRect();
    for (const e of page.querySelectorAll('*')) {
      const b = e.getBoundingClientRect();
      if (b.width > 0 && !e.closest('svg') && (b.bottom > r.bottom + 1 || b.right > r.right + 1 || b.left < r.left - 1))
        faults.push('beyond the page: ' + e.tagName + ' ' + e.textContent.slice(0, 40));
    }
  }
  for (const e of document.querySelectorAll('body *')) {
    const own = [...e.childNodes].some(n => n.nodeType === 3 && n.textContent.trim());
    if (own && !e.closest('style,script') && parseFloat(getComputedStyle(e).fontSize) * (e.closest('svg') ? 4 / 3 : 1) < 7 * 4 / 3 - 0.01)
      faults.push('small: ' + e.textContent.slice(0, 40));
  }
  for (const svg of document.querySelectorAll('svg')) {
    const r = svg.getBoundingClientRect();
    const texts = [...svg.querySelectorAll('text')].map(t => [t.textContent, t.getBoundingClientRect()]);
    texts.forEach(([word, a], i) => {
      if (a.left < r.left - 0.7 || a.right > r.right + 1.5 || a.top < r.top - 2 || a.bottom > r.bottom + 2)
        faults.push('cut off: ' + word);
      for (const [other, b] of texts.slice(i + 1))
        if (a.left < b.right - 0.5 && b.left < a.right - 0.5 && a.top < b.bottom - 2.5 && b.top < a.bottom - 2.5)
          faults.push('overlap: ' + word + ' / ' + other);
    });
  }
  const out = document.createElement('pre');
  out.id = 'faults';
  out.textContent = JSON.stringify(faults);
  document.body.append(out);
});
</script>`

// faults are what measuring finds, "" where it did not come to an end.
func faults(t *testing.T, sheet string) []string {
	t.Helper()
	text, err := os.ReadFile(sheet)
	require.NoError(t, err)
	require.NotContains(t, string(text), "<script")
	copied := filepath.Join(t.TempDir(), "measured.html")
	require.NoError(t, os.WriteFile(copied, []byte(strings.Replace(string(text), "</body>", measuring+"</body>", 1)), 0o666))
	dom := chromium(t, "--virtual-time-budget=5000", "--dump-dom", "file://"+copied)
	found := regexp.MustCompile(`(?s)<pre id="faults">(.*?)</pre>`).FindStringSubmatch(dom)
	require.NotNil(t, found, "the page was not measured")
	var list []string
	require.NoError(t, json.Unmarshal([]byte(html.UnescapeString(found[1])), &list))
	return list
}

// The measuring sees what it is to find.
func TestMeasuringSeesFaults(t *testing.T) {
	path := filepath.Join(t.TempDir(), "bad.html")
	require.NoError(t, os.WriteFile(path, []byte(`<!DOCTYPE html><body><section class="page" style="height:50pt;width:200pt;overflow:hidden">
<p style="font-size:6pt">tiny</p><div style="height:90pt">high</div>
<svg viewBox="0 0 50 20" style="width:50pt;height:20pt"><text x="0" y="10" style="font-size:8px">one</text><text x="3" y="10" style="font-size:8px">two</text><text x="40" y="10" style="font-size:8px">beyond</text></svg>
</section></body>`), 0o666))
	list := strings.Join(faults(t, path), "\n")
	for _, want := range []string{"clipped: page", "beyond the page: DIV", "small: tiny", "overlap: one / two", "cut off: beyond"} {
		require.Contains(t, strings.ToLower(list), strings.ToLower(want))
	}
}
