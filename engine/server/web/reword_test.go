package web

import (
	"io"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
)

// TestReworded: what the library says of a request that is no message becomes
// what was wrong and what to do, with a reason of the API.
func TestReworded(t *testing.T) {
	for _, c := range []struct{ said, reason, field, words string }{
		{`unmarshal message: proto: (line 1:2): unknown field "vehicle"`, "BAD_FIELD", "vehicle", `unknown field "vehicle": give fields`},
		{`unmarshal message: proto: syntax error (line 1:14): unexpected token`, "BAD_FIELD", "", "no message of this call: syntax error (line 1:14)"},
		{`unmarshal message: unexpected EOF`, "BAD_FIELD", "", "whole JSON object"},
		{`unmarshal message: proto: (line 1:30): invalid value for double field risk: "x"`, "BAD_FIELD", "", "field risk"},
		{`unmarshal message: proto: (line 1:2): unknown field "` + strings.Repeat("é", 1e6) + `"`, "BAD_FIELD", strings.Repeat("é", 223) + "…", "unknown field"},
		{`something else`, "BAD_FIELD", "", "something else"},
	} {
		st := reworded(c.said)
		info := st.Details()[0].(*errdetails.ErrorInfo)
		if info.GetReason() != c.reason || info.GetMetadata()["field"] != c.field || !strings.Contains(st.Message(), c.words) || len(st.Message()) > 1000 || strings.Contains(st.Message(), "unmarshal") {
			t.Errorf("%s: %s, %v", c.said, st.Message(), info)
		}
	}
}

// TestContentType: a call whose body is of another type, or of none, is 415 and
// says what to send; what is no call is left alone.
func TestContentType(t *testing.T) {
	s, err := New(Config{MessageBytes: 1000, Connections: 1, Log: slog.New(slog.DiscardHandler)})
	if err != nil {
		t.Fatal(err)
	}
	for given, readable := range map[string]bool{"": false, "text/plain": false, "application/json; charset=utf-8": true, "application/connect+json": true, "application/grpc-web-text": true} {
		r := httptest.NewRequest(http.MethodPost, "/leadline.v1.PositionService/Where", strings.NewReader("{}"))
		r.Header.Set("Content-Type", given)
		w := httptest.NewRecorder()
		if got := !s.unreadable(w, r); got != readable {
			t.Errorf("%q: readable %v", given, got)
		}
		if body, _ := io.ReadAll(w.Result().Body); !readable && (w.Code != http.StatusUnsupportedMediaType || !strings.Contains(string(body), "say application/json") || !strings.Contains(string(body), "invalid_argument")) {
			t.Errorf("%q: %d, %s", given, w.Code, body)
		}
	}
	if s.unreadable(httptest.NewRecorder(), httptest.NewRequest(http.MethodPost, "/page", nil)) {
		t.Error("a page is refused")
	}
}
