package bench

import (
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"fmt"
	"io/fs"
	"net/http"
	"path"

	"tenthmark/session"
)

// What the browser gets: plain files, no build step, nothing from elsewhere.
//
//go:embed page
var pageFiles embed.FS

//go:embed openapi.json
var openAPIText []byte

func (b *Bench) openAPI(c *call) error {
	c.w.Header().Set("Content-Type", "application/json")
	_, _ = c.w.Write(openAPIText) // whoever asked may have gone
	return nil
}

var pageTypes = map[string]string{
	".html": "text/html; charset=utf-8", ".css": "text/css; charset=utf-8", ".js": "text/javascript; charset=utf-8", ".svg": "image/svg+xml",
}

// pages serves the bench page. A browser asks each time whether a file is still the
// same, so that a page never meets a daemon of another version.
func (b *Bench) pages() http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if r.Method != http.MethodGet && r.Method != http.MethodHead {
			b.refuse(w, r, session.Refuse("wrong-method", "Pages are only read.", "Calls are under /api/v1."))
			return
		}
		name := r.URL.Path
		if name == "/" {
			name = "/index.html"
		}
		text, err := fs.ReadFile(pageFiles, path.Join("page", name))
		kind, known := pageTypes[path.Ext(name)]
		if err != nil || !known {
			b.refuse(w, r, session.Refuse("unknown-page", fmt.Sprintf("There is no page %s.", r.URL.Path), "The bench is at /."))
			return
		}
		sum := sha256.Sum256(text)
		tag := `"` + hex.EncodeToString(sum[:12]) + `"`
		w.Header().Set("Content-Type", kind)
		w.Header().Set("ETag", tag)
		w.Header().Set("Cache-Control", "no-cache")
		if r.Header.Get("If-None-Match") == tag {
			w.WriteHeader(http.StatusNotModified)
			return
		}
		_, _ = w.Write(text) // whoever asked may have gone
	})
}
