package view

import (
	"embed"
	"io/fs"
	"net/http"
	"path"
	"strings"
)

// pageFiles are what the browser gets: nothing of them is made by a build.
//
//go:embed page
var pageFiles embed.FS

// contentTypes of page files.
var contentTypes = map[string]string{
	".html":  "text/html; charset=utf-8",
	".css":   "text/css; charset=utf-8",
	".js":    "text/javascript; charset=utf-8",
	".mjs":   "text/javascript; charset=utf-8",
	".svg":   "image/svg+xml",
	".png":   "image/png",
	".woff2": "font/woff2",
	".txt":   "text/plain; charset=utf-8",
	".md":    "text/plain; charset=utf-8",
}

// servePage answers / by page/index.html and /page/NAME by that file.
func servePage(w http.ResponseWriter, r *http.Request) {
	name := strings.TrimPrefix(r.URL.Path, "/")
	if name == "" {
		name = "page/index.html"
	}
	if !strings.HasPrefix(name, "page/") || !fs.ValidPath(name) {
		refuse(w, http.StatusNotFound, "there is nothing of that name here")
		return
	}
	text, err := pageFiles.ReadFile(name)
	if err != nil {
		refuse(w, http.StatusNotFound, "there is nothing of that name here")
		return
	}
	kind := contentTypes[path.Ext(name)]
	if kind == "" {
		kind = "text/plain; charset=utf-8"
	}
	w.Header().Set("Content-Type", kind)
	w.Header().Set("Cache-Control", "no-cache")
	// A reader that has gone away is no error of ours.
	_, _ = w.Write(text)
}
