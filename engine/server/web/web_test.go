package web

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"connectrpc.com/connect/v2"
	"connectrpc.com/connect/v2/connecthttp"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"

	leadlinev1 "leadline/proto/leadline/v1"
)

// TestCurl proves what curl gets, in order and when something is wrong.
func TestCurl(t *testing.T) {
	b := serveBoth(t, Config{MessageBytes: 2000})
	where := b.url("Where")
	code, body := curl(t, post(where, `{"vehicles":["van 7","van 8"]}`)...)
	answer := parse[struct{ Answers []map[string]any }](t, body)
	// Fields have the names of the .proto file, and those that are empty show.
	if code != "200" || len(answer.Answers) != 2 || answer.Answers[1]["vehicle"] != "van 8" || answer.Answers[0]["posterior_sha256"] != "0123" || answer.Answers[0]["ended"] != false {
		t.Errorf("%s %s", code, body)
	}
	code, body = curl(t, post(where, `{"vehicles":["me"]}`)...)
	if !strings.Contains(body, "127.0.0.1:") {
		t.Errorf("%s: the caller's address is %s", code, body)
	}
	// Headers go both ways.
	code, body = curl(t, post(where, `{"vehicles":["v"]}`, "-H", "Said: this", "-i")...)
	if lower := strings.ToLower(body); !strings.Contains(lower, "\nseen: this") || !strings.Contains(lower, "\ntrailer-last: word") {
		t.Errorf("%s %s", code, body)
	}
	large := filepath.Join(t.TempDir(), "large.json")
	if err := os.WriteFile(large, []byte(`{"vehicles":["`+strings.Repeat("v", 2000)+`"]}`), 0o600); err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		what         string
		args         []string
		status, code string
		words        string
		reason       string
	}{
		{"a handler's error", post(where, `{"vehicles":["nobody"]}`), "404", "not_found", `no vehicle "nobody"`, "UNKNOWN_VEHICLE"},
		{"a misspelt field", post(where, `{"vehicle":["v"]}`), "400", "invalid_argument", `unknown field "vehicle"`, "BAD_FIELD"},
		{"a wrong type", post(where, `{"vehicles":7}`), "400", "invalid_argument", "line 1:13", "BAD_FIELD"},
		{"no JSON", post(where, `vehicles`), "400", "invalid_argument", "syntax error", "BAD_FIELD"},
		{"nothing", post(where, ``), "400", "invalid_argument", "zero-length payload", "BAD_FIELD"},
		{"too much", post(where, "@"+large), "429", "resource_exhausted", "2000", ""},
		{"a call over a stream", post(b.url("Feed"), `{}`), "501", "unimplemented", "call it by gRPC, on the same port", "NOT_OFFERED"},
		{"another", post(b.url("UploadMap"), `{}`), "501", "unimplemented", "call it by gRPC", "NOT_OFFERED"},
		{"a call that this server does not have", post(b.url("ListMaps"), `{}`), "501", "unimplemented", "ListMaps", ""},
		{"a call that nobody has", post(b.url("Whence"), `{}`), "501", "unimplemented", "there is no call /leadline.v1.PositionService/Whence here", "NOT_OFFERED"},
		{"too little time", post(where, `{"vehicles":["late"]}`, "-H", "Connect-Timeout-Ms: 50"), "504", "deadline_exceeded", "", ""},
	} {
		status, body := curl(t, c.args...)
		f := parse[failure](t, body)
		if status != c.status || f.Code != c.code || !strings.Contains(f.Message, c.words) || strings.Contains(f.Message, "\n") {
			t.Errorf("%s:\n got %s %s\nwant %s %s %q", c.what, status, body, c.status, c.code, c.words)
		}
		switch {
		case c.reason == "" && len(f.Details) == 0:
		case len(f.Details) != 1 || f.Details[0].Debug.Reason != c.reason || f.Details[0].Debug.Domain != "leadline.v1" || f.Details[0].Type != "google.rpc.ErrorInfo":
			t.Errorf("%s: reason %s, want %q", c.what, body, c.reason)
		}
	}
	// What is no call of Connect gets an answer of HTTP.
	for _, c := range []struct {
		what   string
		args   []string
		status string
	}{
		{"GET", []string{where}, "405"},
		{"another kind of content", []string{"-d", "vehicles=v", where}, "415"},
		{"another path", []string{fmt.Sprintf("http://%s/", b.address)}, "404"},
		{"a large head", post(where, `{}`, "-H", "Said: "+strings.Repeat("x", 30<<10)), "431"},
		{"HTTP/1.0", post(where, `{"vehicles":["v"]}`, "--http1.0"), "200"},
		{"gzip", post(where, `{"vehicles":["v"]}`, "--compressed"), "200"},
		{"a wish for HTTP/2", post(where, `{"vehicles":["v"]}`, "--http2"), "200"},
	} {
		if status, body := curl(t, c.args...); status != c.status {
			t.Errorf("%s: %s %s, want %s", c.what, status, body, c.status)
		}
	}
	// An HTTP/2 connection is gRPC's: an empty message, with its length before it.
	empty := filepath.Join(t.TempDir(), "empty")
	if err := os.WriteFile(empty, make([]byte, 5), 0o600); err != nil {
		t.Fatal(err)
	}
	code, body = curl(t, "--http2-prior-knowledge", "-D", "-", "-o", os.DevNull, "-H", "Content-Type: application/grpc", "-H", "TE: trailers", "--data-binary", "@"+empty, where)
	if !strings.HasPrefix(body, "HTTP/2 200") || !strings.Contains(body, "grpc-status: 0") {
		t.Errorf("HTTP/2: %s %s", code, body)
	}
}

// client makes a client of Connect's, and closes what it has open.
func client(b *both, options ...connecthttp.Option) (*connect.Client, func()) {
	transport := &http.Transport{}
	return connect.NewClient(connecthttp.NewTransport(&http.Client{Transport: transport}, "http://"+b.address, options...)), transport.CloseIdleConnections
}

// followed opens a Follow and returns its stream.
func followed(t *testing.T, ctx context.Context, c *connect.Client, vehicles ...string) connect.ClientStream {
	t.Helper()
	st, err := c.CallServerStream(ctx, connect.Spec{StreamType: connect.StreamTypeServer, Procedure: leadlinev1.PositionService_Follow_FullMethodName}, &leadlinev1.FollowRequest{Vehicles: vehicles})
	if err != nil {
		t.Fatal(err)
	}
	return st
}

// TestProtocols proves that streams and errors arrive by Connect, by gRPC-Web,
// in binary and JSON, and beside them by gRPC itself.
func TestProtocols(t *testing.T) {
	b := serveBoth(t, Config{})
	for what, options := range map[string][]connecthttp.Option{
		"Connect": nil, "Connect in JSON": {connecthttp.WithProtoJSON()},
		"gRPC-Web": {connecthttp.WithGRPCWeb()}, "gRPC-Web in JSON": {connecthttp.WithGRPCWeb(), connecthttp.WithProtoJSON()},
		"gzip": {connecthttp.WithSendGzip()},
	} {
		c, done := client(b, options...)
		defer done()
		st := followed(t, t.Context(), c, "a", "b")
		for i := range uint64(6) {
			var m leadlinev1.FollowResponse
			if err := st.Receive(&m); err != nil || m.GetVehicle() != "aaabbb"[i:i+1] || m.GetSkipped() != i%3 {
				t.Errorf("%s: message %d is %v, %v", what, i, &m, err)
			}
		}
		if err := st.Receive(&leadlinev1.FollowResponse{}); !errors.Is(err, io.EOF) {
			t.Errorf("%s: ended with %v", what, err)
		}
		_ = st.Close()
		err := c.CallUnary(t.Context(), connect.Spec{Procedure: leadlinev1.PositionService_Where_FullMethodName}, &leadlinev1.WhereRequest{Vehicles: []string{"nobody"}}, &leadlinev1.WhereResponse{})
		var ce *connect.Error
		if !errors.As(err, &ce) || ce.Code() != connect.CodeNotFound || len(ce.Details()) != 1 || ce.Details()[0].Type != "google.rpc.ErrorInfo" {
			t.Errorf("%s: %v", what, err)
		}
	}
	_, err := leadlinev1.NewPositionServiceClient(b.conn).Where(t.Context(), &leadlinev1.WhereRequest{Vehicles: []string{"nobody"}})
	if st := status.Convert(err); st.Code() != codes.NotFound || len(st.Details()) != 1 {
		t.Errorf("gRPC: %v", err)
	}
}

// TestInterceptors proves that those of the gRPC server run here, too.
func TestInterceptors(t *testing.T) {
	var seen []string
	b := serveBoth(t, Config{
		Unary: func(ctx context.Context, req any, info *grpc.UnaryServerInfo, handler grpc.UnaryHandler) (any, error) {
			seen = append(seen, info.FullMethod)
			if req.(*leadlinev1.WhereRequest).GetPredictToNow() {
				return nil, status.Error(codes.PermissionDenied, "not you")
			}
			return handler(ctx, req)
		},
		Stream: func(srv any, ss grpc.ServerStream, info *grpc.StreamServerInfo, handler grpc.StreamHandler) error {
			seen = append(seen, info.FullMethod)
			return handler(srv, ss)
		},
	})
	if code, body := curl(t, post(b.url("Where"), `{"vehicles":["v"]}`)...); code != "200" {
		t.Errorf("%s %s", code, body)
	}
	if code, body := curl(t, post(b.url("Where"), `{"predictToNow":true}`)...); code != "403" || !strings.Contains(body, "not you") {
		t.Errorf("%s %s", code, body)
	}
	c, done := client(b)
	defer done()
	st := followed(t, t.Context(), c, "v")
	for st.Receive(&leadlinev1.FollowResponse{}) == nil {
	}
	_ = st.Close()
	if got := strings.Join(seen, " "); got != "/leadline.v1.PositionService/Where /leadline.v1.PositionService/Where /leadline.v1.PositionService/Follow" {
		t.Errorf("seen: %s", got)
	}
}

// TestHeadersFirst proves that headers which an interceptor sends before the
// request is read do not cost the request, and that they come before there is
// anything to say.
func TestHeadersFirst(t *testing.T) {
	b := serveBoth(t, Config{Stream: func(srv any, ss grpc.ServerStream, _ *grpc.StreamServerInfo, handler grpc.StreamHandler) error {
		if err := ss.SendHeader(metadata.Pairs("version", "7")); err != nil {
			return err
		}
		return handler(srv, ss)
	}})
	request := filepath.Join(t.TempDir(), "request")
	if err := os.WriteFile(request, []byte("\x00\x00\x00\x00\x12"+`{"vehicles":["v"]}`), 0o600); err != nil {
		t.Fatal(err)
	}
	code, body := curl(t, "-i", "-H", "Content-Type: application/connect+json", "--data-binary", "@"+request, b.url("Follow"))
	if code != "200" || strings.Count(body, `"vehicle":"v"`) != 3 || !strings.Contains(body, "Version: 7") || strings.Contains(body, "error") {
		t.Errorf("%s %q", code, body)
	}
	silent := dial(t, b.address, "POST /leadline.v1.PositionService/Follow HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/connect+json\r\nContent-Length: 7\r\n\r\n\x00\x00\x00\x00\x02{}")
	<-b.entered
	_ = silent.SetReadDeadline(time.Now().Add(30 * time.Second))
	if r, err := http.ReadResponse(bufio.NewReader(silent), nil); err != nil || r.Header.Get("Version") != "7" {
		t.Errorf("a stream with nothing to say answers %v, %v", r, err)
	}
	silent.Close()
	if err := <-b.over; err == nil {
		t.Error("a stream whose reader went away ended well")
	}
}

// TestFollowerGoes proves that a stream ends when its reader closes the
// connection, breaks it off, or lets its time pass, and none before, though the
// time for a request's body is long over.
func TestFollowerGoes(t *testing.T) {
	quick := usual
	quick.body, quick.head, quick.idle = 50*time.Millisecond, 50*time.Millisecond, 50*time.Millisecond
	b := serveBoth(t, Config{times: quick})
	for what, code := range map[string]codes.Code{"cancels": codes.Canceled, "is late": codes.DeadlineExceeded, "breaks off": codes.Canceled} {
		ctx, cancel := context.WithCancel(t.Context())
		switch what {
		case "is late":
			ctx, cancel = context.WithTimeout(t.Context(), 300*time.Millisecond)
		case "breaks off":
			c := dial(t, b.address, "POST /leadline.v1.PositionService/Follow HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/connect+json\r\nContent-Length: 7\r\n\r\n\x00\x00\x00\x00\x02{}")
			<-b.entered
			time.AfterFunc(150*time.Millisecond, func() { c.Close() })
		}
		if what != "breaks off" {
			c, done := client(b)
			defer done()
			st := followed(t, ctx, c)
			<-b.entered
			if what == "cancels" {
				time.AfterFunc(150*time.Millisecond, cancel)
			}
			if err := st.Receive(&leadlinev1.FollowResponse{}); codes.Code(connect.CodeOf(err)) != code {
				t.Errorf("%s: the reader gets %v", what, err)
			}
			_ = st.Close()
		}
		// One that is late hangs up at the same moment.
		if err := <-b.over; status.Code(err) != code && status.Code(err) != codes.Canceled {
			t.Errorf("%s: the stream ended with %v", what, err)
		}
		cancel()
	}
}

// TestSlowClients proves that who sends or reads too slowly loses the
// connection, and holds nobody up meanwhile.
func TestSlowClients(t *testing.T) {
	b := serveBoth(t, Config{times: times{head: 300 * time.Millisecond, body: 300 * time.Millisecond, write: 300 * time.Millisecond, idle: 300 * time.Millisecond}})
	call := "POST /leadline.v1.PositionService/Where HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\nContent-Length: 18\r\n\r\n"
	conns := map[string]net.Conn{
		"a byte":             dial(t, b.address, "G"),
		"half a head":        dial(t, b.address, call[:60]),
		"a head":             dial(t, b.address, call),
		"half a body":        dial(t, b.address, call+`{"vehicles"`),
		"garbage":            dial(t, b.address, "\x16\x03\x01\x02\x00\x01\xfc\x03\x03\r\n\r\n"),
		"another version":    dial(t, b.address, "GET / HTTP/9.9\r\nHost: localhost\r\n\r\n"),
		"a call, then quiet": dial(t, b.address, call+`{"vehicles":["v"]}`),
		// HTTP/2 without gRPC is ended by grpc-go.
		"garbage in HTTP/2": dial(t, b.address, preface+"\x00\x00\x00\xff\xff\xff\xff\xff\xff garbage"),
	}
	endless := dial(t, b.address, "POST /leadline.v1.PositionService/Follow HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/connect+json\r\nContent-Length: 29\r\n\r\n\x00\x00\x00\x00\x18"+`{"vehicles":["endless"]} `)
	if code, body := curl(t, post(b.url("Where"), `{"vehicles":["v"]}`)...); code != "200" {
		t.Errorf("beside them: %s %s", code, body)
	}
	if err := <-b.over; err == nil {
		t.Error("the stream that nobody reads ended well")
	}
	for what, c := range conns {
		ended(t, what, c)
	}
	_ = endless.SetReadDeadline(time.Now().Add(30 * time.Second))
	if n, err := io.Copy(io.Discard, endless); n == 0 || errors.Is(err, os.ErrDeadlineExceeded) {
		t.Errorf("a reader that slept got %d bytes, %v", n, err)
	}
}

// TestTooManyConnections proves that one more is told so, that the log hears of
// it, and that gRPC has room beside.
func TestTooManyConnections(t *testing.T) {
	b := serveBoth(t, Config{Connections: 2})
	ask := func(c net.Conn) string {
		t.Helper()
		fmt.Fprintf(c, "GET / HTTP/1.1\r\nHost: localhost\r\n\r\n")
		r, err := http.ReadResponse(bufio.NewReader(c), nil)
		if err != nil {
			t.Fatal(err)
		}
		defer r.Body.Close()
		text, err := io.ReadAll(r.Body)
		if err != nil {
			t.Fatal(err)
		}
		return fmt.Sprint(r.StatusCode, " ", string(text))
	}
	first, second := dial(t, b.address, ""), dial(t, b.address, "")
	ask(first)
	ask(second)
	if got := ask(dial(t, b.address, "")); got != "503 the server has all its HTTP connections: try later.\n" {
		t.Errorf("a third gets %q", got)
	}
	if _, err := leadlinev1.NewPositionServiceClient(b.conn).Where(t.Context(), &leadlinev1.WhereRequest{}); err != nil {
		t.Errorf("gRPC: %v", err)
	}
	first.Close()
	for i := 0; ; i++ { // the server must notice that
		if got := ask(dial(t, b.address, "")); strings.HasPrefix(got, "404") {
			break
		} else if i > 200 {
			t.Fatalf("when one has gone: %s", got)
		}
		time.Sleep(50 * time.Millisecond)
	}
	if n := bytes.Count(b.log.Bytes(), []byte("too many at once")); n != 1 {
		t.Errorf("the log has %d lines of it:\n%s", n, b.log)
	}
}

// TestShutdown proves that a call that is being answered is answered, that
// streams are ended, and that nothing new is taken.
func TestShutdown(t *testing.T) {
	b := serveBoth(t, Config{})
	type got struct {
		status int
		err    error
	}
	answered := make(chan got, 1)
	transport := &http.Transport{}
	defer transport.CloseIdleConnections()
	go func() {
		r, err := (&http.Client{Transport: transport}).Post(b.url("Where"), "application/json", strings.NewReader(`{"vehicles":["slow"]}`))
		if err != nil {
			answered <- got{err: err}
			return
		}
		r.Body.Close()
		answered <- got{r.StatusCode, nil}
	}()
	<-b.entered
	c, done := client(b)
	defer done()
	st := followed(t, t.Context(), c)
	<-b.entered
	stopped := make(chan error, 1)
	go func() { stopped <- b.web.Shutdown(t.Context()) }()
	close(b.draining)
	if err := st.Receive(&leadlinev1.FollowResponse{}); connect.CodeOf(err) != connect.CodeUnavailable {
		t.Errorf("the stream ended with %v", err)
	}
	_ = st.Close()
	close(b.leave)
	if r := <-answered; r.status != 200 || r.err != nil {
		t.Errorf("the call that was on its way: %+v", r)
	}
	if err := <-stopped; err != nil {
		t.Errorf("shutdown: %v", err)
	}
	if c, err := net.Dial("tcp", b.address); err == nil {
		c.Close()
		t.Error("after shutdown a connection was taken")
	}
}

// TestShutdownGivesUp proves that Close breaks off what Shutdown waits for.
func TestShutdownGivesUp(t *testing.T) {
	b := serveBoth(t, Config{})
	c, done := client(b)
	defer done()
	st := followed(t, t.Context(), c)
	<-b.entered
	ctx, cancel := context.WithTimeout(t.Context(), 50*time.Millisecond)
	defer cancel()
	if err := b.web.Shutdown(ctx); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("shutdown: %v", err)
	}
	b.web.Close()
	if err := <-b.over; status.Code(err) != codes.Canceled {
		t.Errorf("the stream ended with %v", err)
	}
	_ = st.Close()
}

// TestPanic proves that a defect ends one call, and is in the log.
func TestPanic(t *testing.T) {
	b := serveBoth(t, Config{})
	transport := &http.Transport{}
	defer transport.CloseIdleConnections()
	if r, err := (&http.Client{Transport: transport}).Post(b.url("Where"), "application/json", strings.NewReader(`{"vehicles":["broken"]}`)); err == nil {
		r.Body.Close()
		t.Errorf("a broken call is answered with %s", r.Status)
	}
	if code, body := curl(t, post(b.url("Where"), `{"vehicles":["v"]}`)...); code != "200" {
		t.Errorf("the next call: %s %s", code, body)
	}
	if !strings.Contains(b.log.String(), "a defect") {
		t.Errorf("the log says %q", b.log)
	}
}
