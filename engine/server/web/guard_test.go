package web

import (
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
)

// TestNew proves that a configuration without sense is an error in words.
func TestNew(t *testing.T) {
	for _, c := range []struct {
		cfg   Config
		words string
	}{
		{Config{}, "must be positive"},
		{Config{MessageBytes: 1, Connections: -1}, "must be positive"},
		{Config{MessageBytes: 1, Connections: 1, Origins: []string{"map.example"}}, `origin "map.example": give scheme`},
		{Config{MessageBytes: 1, Connections: 1, Origins: []string{"*"}}, `origin "*": give scheme`},
		{Config{MessageBytes: 1, Connections: 1, Origins: []string{"https://map.example/page"}}, "give scheme"},
	} {
		if _, err := New(c.cfg); err == nil || !strings.Contains(err.Error(), c.words) {
			t.Errorf("%+v: %v, want %q", c.cfg, err, c.words)
		}
	}
}

// TestOrigins proves which pages may call, from which browsers' requests.
func TestOrigins(t *testing.T) {
	b := serveBoth(t, Config{Origins: []string{"https://map.example", "http://127.0.0.1:8080"}, Page: http.HandlerFunc(func(w http.ResponseWriter, _ *http.Request) {
		_, _ = w.Write([]byte("a page"))
	})})
	for _, c := range []struct {
		what, method, path, host string
		headers                  map[string]string
		status                   int
		allowed                  string // the answer's Access-Control-Allow-Origin
	}{
		{"no browser", "POST", "Where", "127.0.0.1:7700", nil, 200, ""},
		{"no browser, by IPv6", "POST", "Where", "[::1]:7700", nil, 200, ""},
		{"no browser, by name", "POST", "Where", "LocalHost:7700", nil, 200, ""},
		{"no port", "POST", "Where", "localhost", nil, 200, ""},
		{"a page of this server", "POST", "Where", "127.0.0.1:7700", map[string]string{"Origin": "http://127.0.0.1:7700"}, 200, ""},
		{"the same in a new browser", "POST", "Where", "127.0.0.1:7700", map[string]string{"Origin": "http://127.0.0.1:7700", "Sec-Fetch-Site": "same-origin"}, 200, ""},
		{"a known origin", "POST", "Where", "127.0.0.1:7700", map[string]string{"Origin": "https://map.example", "Sec-Fetch-Site": "cross-site"}, 200, "https://map.example"},
		{"a known origin's question", "OPTIONS", "Where", "127.0.0.1:7700", map[string]string{"Origin": "https://map.example", "Access-Control-Request-Method": "POST", "Access-Control-Request-Headers": "content-type"}, 204, "https://map.example"},
		{"the origin's name as this server's", "POST", "Where", "map.example", nil, 200, ""},
		{"a stranger", "POST", "Where", "127.0.0.1:7700", map[string]string{"Origin": "https://evil.example"}, 403, ""},
		{"a stranger in a new browser", "POST", "Where", "127.0.0.1:7700", map[string]string{"Origin": "https://evil.example", "Sec-Fetch-Site": "cross-site"}, 403, ""},
		{"a stranger's question", "OPTIONS", "Where", "127.0.0.1:7700", map[string]string{"Origin": "https://evil.example", "Access-Control-Request-Method": "POST"}, 204, ""},
		{"another port of a known host", "POST", "Where", "127.0.0.1:7700", map[string]string{"Origin": "http://127.0.0.1:8081"}, 403, ""},
		{"an origin without a name", "POST", "Where", "127.0.0.1:7700", map[string]string{"Origin": "null"}, 403, ""},
		{"a stranger's name that points here", "POST", "Where", "evil.example:7700", map[string]string{"Origin": "http://evil.example:7700", "Sec-Fetch-Site": "same-origin"}, 403, ""},
		{"the same, reading", "GET", "", "evil.example:7700", nil, 403, ""},
		{"the page", "GET", "", "127.0.0.1:7700", nil, 200, ""},
		{"a link to the page", "GET", "", "127.0.0.1:7700", map[string]string{"Sec-Fetch-Site": "cross-site"}, 200, ""},
	} {
		path := "/"
		if c.path != "" {
			path = "/leadline.v1.PositionService/" + c.path
		}
		r := httptest.NewRequest(c.method, path, strings.NewReader(`{"vehicles":["v"]}`))
		r.Host = c.host
		r.Header.Set("Content-Type", "application/json")
		for k, v := range c.headers {
			r.Header.Set(k, v)
		}
		w := httptest.NewRecorder()
		b.web.ServeHTTP(w, r)
		if w.Code != c.status || w.Header().Get("Access-Control-Allow-Origin") != c.allowed || w.Header().Get("Vary") != "Origin" && w.Code != 403 {
			t.Errorf("%s: %d, allowed %q, %s; want %d and %q", c.what, w.Code, w.Header().Get("Access-Control-Allow-Origin"), w.Body, c.status, c.allowed)
		}
		if w.Code == 403 && (!strings.Contains(w.Body.String(), "permission_denied") || !strings.Contains(w.Body.String(), "--origin")) {
			t.Errorf("%s: %s does not say what to do", c.what, w.Body)
		}
	}
	if code, body := curl(t, b.url("")[:len("http://")+len(b.address)]+"/"); code != "200" || body != "a page" {
		t.Errorf("the page is %s %s", code, body)
	}
}
