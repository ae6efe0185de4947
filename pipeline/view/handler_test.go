package view

import (
	"encoding/json"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/require"

	"mirrorloom/pipeline/product"
)

func TestRunAnswer(t *testing.T) {
	v := plainViewer(t, runFolder(t, "run0"))
	var a struct {
		Name, Object, Verdict, Unit string
		CanTrust                    string `json:"can_trust"`
		Elements, Rows, Voxels      int
		WavelengthNM                []float64 `json:"wavelength_nm"`
		WCS                         wcsAnswer
		ArcsecElement               float64 `json:"arcsec_element"`
		NorthDeg                    float64 `json:"north_deg"`
		Parity                      int
		Flags                       []flagAnswer
		Layers                      []string
		Reasons                     []string
		CubeSHA                     string `json:"cube_sha256"`
	}
	answered(t, v, "/api/run", &a)
	require.Equal(t, "run0", a.Name)
	require.Equal(t, v.schema.Elements, a.Elements)
	require.Len(t, a.WavelengthNM, a.Voxels)
	require.Contains(t, []string{"yes", "look", "no"}, a.CanTrust)
	require.NotEmpty(t, a.Verdict)
	require.NotEmpty(t, a.Reasons)
	require.Len(t, a.Flags, len(product.Flags()))
	require.True(t, a.Flags[0].Bad)
	require.Equal(t, v.plain.SHA, a.CubeSHA)
	// The centre of the field lies at CRPIX: FITS Standard 4.0, section 8.
	at := v.plain.Position(a.WCS.CRPIX[0]-1, a.WCS.CRPIX[1]-1)
	require.InDelta(t, a.WCS.CRVAL[0], at.RADeg, 1e-9)
	require.InDelta(t, a.WCS.CRVAL[1], at.DecDeg, 1e-9)

	var all struct {
		Combined bool
		Runs     int
	}
	answered(t, plainViewer(t, runFolder(t, "all")), "/api/run", &all)
	require.True(t, all.Combined)
	require.Equal(t, 2, all.Runs)
}

func TestLedgerAndField(t *testing.T) {
	run := runCopy(t)
	v := plainViewer(t, run)
	var ledger []map[string]any
	answered(t, v, "/api/ledger", &ledger)
	require.Len(t, ledger, len(v.ledger))
	require.Equal(t, v.ledger[0].File, ledger[0]["file"])
	var some, whole struct {
		Signal, Good []*float64
		Whole        bool
		EndRow       int `json:"end_row"`
	}
	answered(t, v, "/api/field", &some)
	require.False(t, some.Whole)
	answered(t, readyViewer(t, run), "/api/field", &whole)
	require.True(t, whole.Whole)
	require.Equal(t, v.schema.Rows, some.EndRow, "the tiny field has fewer rows than are read")
	for l, x := range whole.Signal {
		if x == nil {
			require.Nil(t, some.Signal[l])
			continue
		}
		require.InEpsilon(t, *x, *some.Signal[l], 1e-12)
		require.Equal(t, *whole.Good[l], *some.Good[l])
	}
}

// A folder without run.json and ledger.csv, such as a cube.fits alone, can be looked at.
func TestCubeAlone(t *testing.T) {
	dir := t.TempDir()
	text, err := os.ReadFile(filepath.Join(runFolder(t, "run0"), product.CubeFile))
	require.NoError(t, err)
	path := filepath.Join(dir, product.CubeFile)
	require.NoError(t, os.WriteFile(path, text, 0o644))
	v := plainViewer(t, path)
	var a runAnswer
	answered(t, v, "/api/run", &a)
	require.Equal(t, "look", a.CanTrust)
	require.Equal(t, "[]", get(t, v, "/api/ledger").Body.String())
	require.NoError(t, os.WriteFile(filepath.Join(dir, product.RunFile), []byte("{"), 0o644))
	_, err = open(path)
	require.ErrorContains(t, err, product.RunFile)
	_, err = open(t.TempDir())
	require.ErrorIs(t, err, os.ErrNotExist)
}

// sentence of a refusal.
func refusal(t *testing.T, w *httptest.ResponseRecorder) string {
	t.Helper()
	var a struct{ Error string }
	require.NoError(t, json.Unmarshal(w.Body.Bytes(), &a))
	require.NotEmpty(t, a.Error)
	require.NotContains(t, a.Error, "\n")
	return a.Error
}

func TestBadQueries(t *testing.T) {
	v := plainViewer(t, runFolder(t, "run0"))
	circle := "/api/spectrum?shape=circle&j=11&y=7&r_arcsec=1"
	corners := strings.Repeat("1,1,2,1,2,2,1,2,", 17)
	for _, c := range []struct{ target, says string }{
		{"/api/picture?layer=colour", "layer"},
		{"/api/picture?from=5&to=4", "from"},
		{"/api/picture?from=-1", "from"},
		{"/api/picture?to=100000", "to"},
		{"/api/picture?from=1.5", "from"},
		{"/api/picture?from=1&from=2", "once"},
		{"/api/picture?sampled=yes", "sampled"},
		{"/api/picture?colour=1", "colour"},
		{"/api/picture?a;b=%zz", "read"},
		{"/api/picture?layer=" + strings.Repeat("x", mostQuery), "characters"},
		{"/api/picture.png?low=3&high=3", "low"},
		{"/api/picture.png?low=NaN", "low"},
		{"/api/spectrum", "shape"},
		{"/api/spectrum?shape=star", "shape"},
		{"/api/spectrum?shape=circle&j=11&y=7", "r_arcsec"},
		{"/api/spectrum?shape=circle&j=11&y=7&r_arcsec=-1", "above 0"},
		{"/api/spectrum?shape=circle&j=11&y=7&r_arcsec=Inf", "r_arcsec"},
		{"/api/spectrum?shape=circle&j=1e300&y=7&r_arcsec=1", "element"},
		{"/api/spectrum?shape=circle&j=900&y=7&r_arcsec=1", "no voxel"},
		{circle + "&inner_arcsec=2", "outer_arcsec"},
		{circle + "&inner_arcsec=3&outer_arcsec=2", "inner"},
		{circle + "&optimal=2", "optimal"},
		{circle + "&points=1,2", "points"},
		{"/api/spectrum?shape=polygon&points=1,1,2,2", "corner"},
		{"/api/spectrum?shape=polygon&points=1,1,9,9,9,1,1,9", "cross"},
		{"/api/spectrum?shape=polygon&points=" + corners + "1,1", "at most"},
		{"/api/spectrum?shape=box&j0=1&y0=1&j1=1&y1=2", "area"},
		{"/api/line?shape=circle&j=11&y=7&r_arcsec=1", "rest_nm"},
		{"/api/line?shape=circle&j=11&y=7&r_arcsec=1&rest_nm=900", "nm"},
		{"/api/line?shape=circle&j=11&y=7&r_arcsec=1&rest_nm=1,2,3,4,5,6,7,8,9", "at most"},
		{"/api/line?shape=circle&j=11&y=7&r_arcsec=1&from=3&to=4&continuum=9", "nm"},
		{"/api/run?x=1", "nothing"},
	} {
		w := get(t, v, c.target)
		require.Equal(t, http.StatusBadRequest, w.Code, "%s: %s", c.target, w.Body.String())
		require.Contains(t, refusal(t, w), c.says, c.target)
	}
}

func TestOnlyItsOwnHost(t *testing.T) {
	v := plainViewer(t, runFolder(t, "run0"))
	ask := func(method, target, host string, header ...string) *httptest.ResponseRecorder {
		r := httptest.NewRequest(method, target, nil)
		r.Host = host
		for i := 0; i < len(header); i += 2 {
			r.Header.Set(header[i], header[i+1])
		}
		w := httptest.NewRecorder()
		v.Handler("127.0.0.1:40123").ServeHTTP(w, r)
		return w
	}
	for _, good := range []string{"127.0.0.1:40123", "localhost:40123"} {
		require.Equal(t, http.StatusOK, ask("GET", "/", good).Code)
		require.Equal(t, http.StatusOK, ask("HEAD", "/api/run", good).Code)
	}
	for _, bad := range []string{"", "127.0.0.1", "127.0.0.1:40124", "evil.example", "evil.example:40123", "127.0.0.1.evil.example:40123", "localhost", "[::1]:40123", "0.0.0.0:40123"} {
		w := ask("GET", "/api/run", bad)
		require.Equal(t, http.StatusForbidden, w.Code, bad)
		require.NotContains(t, w.Body.String(), "run0")
	}
	for _, method := range []string{"POST", "PUT", "DELETE", "OPTIONS", "PATCH", "TRACE", "CONNECT"} {
		w := ask(method, "/api/run", "127.0.0.1:40123")
		require.Equal(t, http.StatusMethodNotAllowed, w.Code, method)
		require.Equal(t, "GET, HEAD", w.Header().Get("Allow"))
	}
	require.Equal(t, http.StatusForbidden, ask("GET", "/api/run", "localhost:40123", "Sec-Fetch-Site", "cross-site").Code)
	require.Equal(t, http.StatusOK, ask("GET", "/api/run", "localhost:40123", "Sec-Fetch-Site", "same-origin").Code)
	require.Equal(t, http.StatusOK, ask("GET", "/", "localhost:40123", "Sec-Fetch-Site", "cross-site").Code, "a link in a mail")
}

// Every answer has the headers, whatever became of it.
func TestSecurityHeaders(t *testing.T) {
	v := plainViewer(t, runFolder(t, "run0"))
	for _, target := range []string{"/", "/page/view.js", "/api/run", "/api/picture", "/api/picture?from=x", "/none"} {
		h := get(t, v, target).Header()
		policy := h.Get("Content-Security-Policy")
		for _, part := range []string{"default-src 'none'", "script-src 'self'", "style-src 'self'", "img-src 'self' data: blob:", "connect-src 'self'"} {
			require.Contains(t, policy, part, target)
		}
		require.NotContains(t, policy, "unsafe")
		require.Equal(t, "nosniff", h.Get("X-Content-Type-Options"))
		require.Equal(t, "no-referrer", h.Get("Referrer-Policy"))
		require.Equal(t, "same-origin", h.Get("Cross-Origin-Resource-Policy"))
		require.NotEmpty(t, h.Get("Content-Type"))
	}
	page := get(t, v, "/").Body.String()
	require.Contains(t, page, "<!doctype html>")
	require.NotContains(t, page, "<style", "styles come from files")
	require.NotContains(t, page, "style=", "styles come from files")
}

// No path leads to a file of the run or of the disk.
func TestPathsLeadNowhereElse(t *testing.T) {
	dir := runFolder(t, "run0")
	v := plainViewer(t, dir)
	for _, path := range []string{
		"/run.json", "/cube.fits", "/page", "/page/", "/page/.", "/page/../viewer.go", "/page/%2e%2e/viewer.go", "/../page/index.html", "//page/index.html",
		"/page//index.html", "/page/index.html/", "/" + dir + "/run.json", "/etc/passwd", "/page/..%2f..%2f..%2fetc/passwd", "/page/\\..\\viewer.go", "/api", "/api/", "/api/run/", "/API/run",
		"/page/%00", "/" + strings.Repeat("a", 4000),
	} {
		require.Equal(t, http.StatusNotFound, get(t, v, path).Code, path)
	}
}

// FuzzQuery: whatever is asked is answered by 200, 400, 404 or 405, and refusals are a sentence.
func FuzzQuery(f *testing.F) {
	v := plainViewer(f, runFolder(f, "run0"))
	for _, c := range spectrumCases {
		f.Add("GET", "/api/spectrum", c.query)
		f.Add("GET", "/api/line", c.query+"&rest_nm=500&free=1&from=3&to=9&continuum=497-498")
	}
	for _, path := range []string{"/", "/page/view.js", "/api/run", "/api/ledger", "/api/field", "/api/progress"} {
		f.Add("HEAD", path, "")
	}
	f.Add("POST", "/api/run", "")
	f.Add("GET", "/api/picture", "layer=sn&from=1&to=30&sampled=1")
	f.Add("GET", "/api/picture.png", "layer=scale&low=0&high=1e9")
	f.Add("GET", "/api/picture.csv", "layer=flags")
	f.Add("GET", "/api/spectrum.csv", "shape=circle&j=NaN&y=1e999&r_arcsec=0x1p-2")
	h := v.Handler(host)
	f.Fuzz(func(t *testing.T, method, path, rawQuery string) {
		r := httptest.NewRequest(http.MethodGet, "/", nil)
		r.Method, r.Host, r.URL.Path, r.URL.RawQuery = method, host, path, rawQuery
		w := httptest.NewRecorder()
		h.ServeHTTP(w, r)
		switch w.Code {
		case http.StatusOK:
		case http.StatusBadRequest, http.StatusNotFound, http.StatusMethodNotAllowed:
			refusal(t, w)
		default:
			t.Fatalf("status %d: %s", w.Code, w.Body.String())
		}
		require.NotEmpty(t, w.Header().Get("Content-Security-Policy"), fmt.Sprint(w.Code))
	})
}
