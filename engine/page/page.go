package page

import (
	"bytes"
	"compress/gzip"
	"embed"
	"fmt"
	"io/fs"
	"mime"
	"net/http"
	"path"
	"strings"
	"sync"
)

//go:embed dist
var dist embed.FS

// policy lets the page load its own files, call its own server, and nothing
// else.
const policy = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; connect-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'"

const document = `<!doctype html>
<html lang="en">
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta name="color-scheme" content="light dark">
<title>Leadline</title>
<link rel="icon" href="data:image/svg+xml,%%3Csvg xmlns='http://www.w3.org/2000/svg' viewBox='0 0 16 16'%%3E%%3Cpath d='M8 0v9' stroke='%%23678' stroke-width='1.5'/%%3E%%3Cpath d='M5 9h6l-1 7H6z' fill='%%23678'/%%3E%%3C/svg%%3E">
<link rel="stylesheet" href="%s">
<script type="module" src="%s"></script>
<body><noscript>This page needs JavaScript. Without it, ask by command: leadline where VEHICLE.</noscript></body>
</html>
`

// file is what is served under a path.
type file struct {
	kind         string // its media type
	whole, small []byte // as it is, and in gzip
	forever      bool   // its name changes with its content
}

// files are those of the page, by path.
var files = sync.OnceValue(func() map[string]file {
	out := map[string]file{}
	var script, style string
	list, err := fs.ReadDir(dist, "dist")
	if err != nil {
		panic("page: " + err.Error()) // it is part of the program
	}
	for _, f := range list {
		text, err := dist.ReadFile("dist/" + f.Name())
		if err != nil {
			panic("page: " + err.Error())
		}
		switch path.Ext(f.Name()) {
		case ".js":
			script = f.Name()
		case ".css":
			style = f.Name()
		}
		out["/"+f.Name()] = pack(text, mediaType(f.Name()), path.Ext(f.Name()) != ".txt")
	}
	out["/"] = pack(fmt.Appendf(nil, document, style, script), "text/html; charset=utf-8", false)
	return out
})

func mediaType(name string) string {
	switch path.Ext(name) { // the machine's own table may be wrong
	case ".js":
		return "text/javascript; charset=utf-8"
	case ".css":
		return "text/css; charset=utf-8"
	}
	return mime.TypeByExtension(path.Ext(name))
}

func pack(text []byte, kind string, forever bool) file {
	var small bytes.Buffer
	w, err := gzip.NewWriterLevel(&small, gzip.BestCompression)
	if err != nil {
		panic("page: " + err.Error()) // the level is one
	}
	_, _ = w.Write(text) // a buffer takes all
	_ = w.Close()
	return file{kind: kind, whole: text, small: small.Bytes(), forever: forever}
}

// Handler serves the page.
func Handler() http.Handler { return http.HandlerFunc(serve) }

func serve(w http.ResponseWriter, r *http.Request) {
	h := w.Header()
	h.Set("Content-Security-Policy", policy)
	h.Set("X-Content-Type-Options", "nosniff")
	h.Set("Referrer-Policy", "no-referrer")
	h.Set("Cross-Origin-Opener-Policy", "same-origin")
	h.Set("Cross-Origin-Resource-Policy", "same-origin")
	f, ok := files()[r.URL.Path]
	if !ok {
		http.Error(w, "nothing is here: the page is at /, and calls of the API are POST", http.StatusNotFound)
		return
	}
	if r.Method != http.MethodGet && r.Method != http.MethodHead {
		h.Set("Allow", "GET, HEAD")
		http.Error(w, "the page can only be read: GET", http.StatusMethodNotAllowed)
		return
	}
	h.Set("Content-Type", f.kind)
	h.Set("Cache-Control", "no-cache")
	if f.forever {
		h.Set("Cache-Control", "public, max-age=31536000, immutable")
	}
	h.Add("Vary", "Accept-Encoding")
	body := f.whole
	if strings.Contains(r.Header.Get("Accept-Encoding"), "gzip") {
		body = f.small
		h.Set("Content-Encoding", "gzip")
	}
	h.Set("Content-Length", fmt.Sprint(len(body)))
	if r.Method == http.MethodGet {
		_, _ = w.Write(body)
	}
}
