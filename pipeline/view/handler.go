package view

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"slices"
	"strings"
	"time"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/rowfile"
)

// answer writes what was asked for. An error that was found before the first byte is
// answered by a sentence.
type answer func(w http.ResponseWriter, r *http.Request, q *query) error

// badQuery marks what the request got wrong.
type badQuery struct{ error }

// longest is how long one answer may take, waiting for its turn included.
const longest = 50 * time.Second

// Handler answers requests to host, such as "127.0.0.1:40123". See the package's
// documentation.
func (v *Viewer) Handler(host string) http.Handler {
	routes := map[string]http.Handler{}
	for path, a := range map[string]answer{
		"/api/run": v.getRun, "/api/progress": v.getProgress, "/api/ledger": v.getLedger, "/api/field": v.getField,
		"/api/picture": v.getPicture, "/api/picture.png": v.getPicturePNG, "/api/picture.csv": v.getPictureCSV,
		"/api/spectrum": v.getSpectrum, "/api/spectrum.csv": v.getSpectrumCSV, "/api/line": v.getLine,
	} {
		routes[path] = v.api(a)
	}
	return guard(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if h := routes[r.URL.Path]; h != nil {
			h.ServeHTTP(w, r)
			return
		}
		servePage(w, r)
	}), host)
}

// hosts are the names of host: a browser may be given either.
func hosts(host string) []string {
	all := []string{host}
	if port, ok := strings.CutPrefix(host, "127.0.0.1:"); ok {
		all = append(all, "localhost:"+port)
	}
	return all
}

// securityHeaders of every answer. Scripts and styles come from files alone, and nothing
// is asked of another server.
var securityHeaders = map[string]string{
	"Content-Security-Policy": "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data: blob:; " +
		"connect-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'",
	"X-Content-Type-Options":       "nosniff",
	"Referrer-Policy":              "no-referrer",
	"Cross-Origin-Resource-Policy": "same-origin",
	"Cross-Origin-Opener-Policy":   "same-origin",
}

// guard lets only requests through that may be answered.
func guard(next http.Handler, host string) http.Handler {
	allowed := hosts(host)
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		for name, value := range securityHeaders {
			w.Header().Set(name, value)
		}
		switch {
		case !slices.Contains(allowed, r.Host):
			refuse(w, http.StatusForbidden, "this page is served as http://"+host+" alone; open it there")
		case r.Method != http.MethodGet && r.Method != http.MethodHead:
			w.Header().Set("Allow", "GET, HEAD")
			refuse(w, http.StatusMethodNotAllowed, "only GET and HEAD are answered here")
		case len(r.URL.Path) > mostPath:
			refuse(w, http.StatusNotFound, "there is nothing of that name here")
		default:
			next.ServeHTTP(w, r)
		}
	})
}

// mostPath is longer than any path here.
const mostPath = 256

// refuse answers with a status and a sentence.
func refuse(w http.ResponseWriter, status int, sentence string) {
	w.Header().Set("Content-Type", "application/json; charset=utf-8")
	w.Header().Set("Cache-Control", "no-store")
	w.WriteHeader(status)
	// A reader that has gone away is no error of ours.
	_ = json.NewEncoder(w).Encode(map[string]string{"error": sentence})
}

// api answers a query. Foreign pages cannot make this machine compute: browsers say where
// a request comes from.
func (v *Viewer) api(a answer) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if site := r.Header.Get("Sec-Fetch-Site"); site == "cross-site" || site == "same-site" {
			refuse(w, http.StatusForbidden, "this is answered to its own page alone")
			return
		}
		ctx, cancel := context.WithTimeout(r.Context(), longest)
		defer cancel()
		w.Header().Set("Cache-Control", "no-store")
		q := parseQuery(r.URL.RawQuery)
		err := q.err
		if err == nil {
			err = a(w, r.WithContext(ctx), q)
		} else {
			err = badQuery{err}
		}
		if err != nil {
			v.fail(w, r, err)
		}
	})
}

// fail answers what went wrong.
func (v *Viewer) fail(w http.ResponseWriter, r *http.Request, err error) {
	var bad badQuery
	switch {
	case errors.As(err, &bad):
		refuse(w, http.StatusBadRequest, bad.Error())
	case r.Context().Err() != nil:
		// Nobody waits for it any more.
	case errors.Is(err, context.DeadlineExceeded):
		refuse(w, http.StatusServiceUnavailable, fmt.Sprintf("it takes longer than %v; ask for less, or again when what is kept of the run has been made", longest))
	default:
		refuse(w, http.StatusInternalServerError, err.Error())
	}
}

// ofFile tells whether an error is the cube's, not the query's.
func ofFile(err error) bool {
	var file *fitsutil.Error
	return errors.As(err, &file) || errors.Is(err, rowfile.ErrDamaged) || errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded)
}

// compute does work when its turn has come; where what is kept turns out to be damaged,
// once more without it. Errors that are not the cube's are the query's.
func (v *Viewer) compute(ctx context.Context, work func() error) error {
	done, err := v.turn(ctx)
	if err != nil {
		return err
	}
	defer done()
	v.busy.Add(1)
	defer v.busy.Add(-1)
	if err = work(); v.damaged(err) {
		err = work()
	}
	if err != nil && !ofFile(err) {
		return badQuery{err}
	}
	return err
}

// reply writes an answer as JSON.
func reply(w http.ResponseWriter, value any) error {
	text, err := json.Marshal(value)
	if err != nil {
		return err
	}
	w.Header().Set("Content-Type", "application/json; charset=utf-8")
	// A reader that has gone away is no error of ours.
	_, _ = w.Write(text)
	return nil
}
