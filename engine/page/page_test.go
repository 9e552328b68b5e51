package page_test

import (
	"compress/gzip"
	"io"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"leadline/engine/page"
)

// TestServe proves what the page's files are served with, and that all of them
// together are small.
func TestServe(t *testing.T) {
	get := func(method, path, encoding string) *http.Response {
		r := httptest.NewRequest(method, path, nil)
		if encoding != "" {
			r.Header.Set("Accept-Encoding", encoding)
		}
		w := httptest.NewRecorder()
		page.Handler().ServeHTTP(w, r)
		return w.Result()
	}
	text := func(r *http.Response) string {
		b, err := io.ReadAll(r.Body)
		if err != nil {
			t.Fatal(err)
		}
		return string(b)
	}
	html := text(get("GET", "/", ""))
	between := func(before string) string {
		_, after, ok := strings.Cut(html, before)
		name, _, _ := strings.Cut(after, `"`)
		if !ok || name == "" {
			t.Fatalf("no %s in %s", before, html)
		}
		return "/" + name
	}
	bytes := 0
	for _, path := range []string{"/", between(`stylesheet" href="`), between(`module" src="`)} {
		whole, small := get("GET", path, ""), get("GET", path, "br, gzip")
		packed := text(small)
		bytes += len(packed)
		unpacked, err := gzip.NewReader(strings.NewReader(packed))
		if err != nil {
			t.Fatal(err)
		}
		b, err := io.ReadAll(unpacked)
		if err != nil || string(b) != text(whole) {
			t.Errorf("%s: what is packed is not what is served plain: %v", path, err)
		}
		h := small.Header
		forever := strings.Contains(h.Get("Cache-Control"), "immutable")
		if h.Get("Content-Encoding") != "gzip" || whole.Header.Get("Content-Encoding") != "" || h.Get("Vary") != "Accept-Encoding" || forever != (path != "/") {
			t.Errorf("%s: %v", path, h)
		}
		if p := h.Get("Content-Security-Policy"); !strings.HasPrefix(p, "default-src 'none'; script-src 'self'; style-src 'self';") || strings.Contains(p, "unsafe") || h.Get("X-Content-Type-Options") != "nosniff" {
			t.Errorf("%s: %v", path, h)
		}
		if head := get("HEAD", path, ""); text(head) != "" || head.StatusCode != 200 {
			t.Errorf("HEAD %s: %v", path, head.StatusCode)
		}
	}
	if t.Logf("%d bytes in gzip", bytes); bytes > 150_000 {
		t.Errorf("%d bytes in gzip: at most 150 kB", bytes)
	}
	for path, status := range map[string]int{"/nothing": 404, "/dist": 404, "/../page.go": 404, "/favicon.ico": 404} {
		if r := get("GET", path, ""); r.StatusCode != status || !strings.Contains(text(r), "the page is at /") {
			t.Errorf("%s: %d", path, r.StatusCode)
		}
	}
	if r := get("POST", "/", ""); r.StatusCode != 405 || r.Header.Get("Allow") != "GET, HEAD" {
		t.Errorf("POST: %d", r.StatusCode)
	}
}
