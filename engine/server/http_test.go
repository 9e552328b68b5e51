package server

import (
	"context"
	"encoding/json"
	"errors"
	"io"
	"net/http"
	"strings"
	"testing"
	"time"

	"connectrpc.com/connect/v2"
	"connectrpc.com/connect/v2/connecthttp"
	"connectrpc.com/connect/v2/connectproto"
	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// byHTTP is a client of HTTP that keeps nothing open.
func byHTTP() *http.Client {
	return &http.Client{Transport: &http.Transport{DisableKeepAlives: true}}
}

// post calls a method in JSON.
func post(t *testing.T, conn *grpc.ClientConn, method, body string) (*http.Response, []byte) {
	t.Helper()
	req, err := http.NewRequestWithContext(limited(t), http.MethodPost, "http://"+conn.Target()+method, strings.NewReader(body))
	if err != nil {
		t.Fatal(err)
	}
	req.Header.Set("Content-Type", "application/json")
	r, err := byHTTP().Do(req)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Body.Close()
	text, err := io.ReadAll(r.Body)
	if err != nil {
		t.Fatal(err)
	}
	return r, text
}

// TestSameOverHTTP proves that JSON over HTTP gets the answer that gRPC gets,
// and the same reasons, limits and version.
func TestSameOverHTTP(t *testing.T) {
	now := time.Unix(0, int64(began)).Add(time.Minute)
	_, conn := serve(t, Config{NewSession: newTally, Version: "v7", Now: func() time.Time { return now }, Limits: Limits{MessageBytes: 4000}})
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v"), Batch: 20}, voyage(2, 10)); err != nil {
		t.Fatal(err)
	}
	req := &leadlinev1.WhereRequest{Vehicles: []string{"v", "w"}}
	want, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), req)
	if err != nil {
		t.Fatal(err)
	}
	body, err := protojson.Marshal(req)
	if err != nil {
		t.Fatal(err)
	}
	r, text := post(t, conn, leadlinev1.PositionService_Where_FullMethodName, string(body))
	got := &leadlinev1.WhereResponse{}
	if err := protojson.Unmarshal(text, got); err != nil || !proto.Equal(got, want) || got.GetAnswers()[0].GetPosterior() == nil || got.GetAnswers()[1].GetFailure() == nil {
		t.Errorf("%v: got %s\nwant %v", err, text, want)
	}
	if v := r.Header.Get(versionHeader); r.StatusCode != http.StatusOK || v != "v7" {
		t.Errorf("status %s, version %q", r.Status, v)
	}
	for _, c := range []struct {
		what, method, body string
		status             int
		reason, field      string
	}{
		{"a bad field", leadlinev1.PositionService_Where_FullMethodName, `{"vehicles":["v"],"region_fractions":[2]}`, 400, "BAD_FIELD", "region_fractions"},
		{"an unknown field", leadlinev1.PositionService_Where_FullMethodName, `{"vehicle":"v"}`, 400, "BAD_FIELD", "vehicle"},
		{"too much", leadlinev1.PositionService_Where_FullMethodName, `{"vehicles":["` + strings.Repeat("v", 4000) + `"]}`, 429, "", ""},
		{"feeding", leadlinev1.PositionService_Feed_FullMethodName, `{}`, 501, "NOT_OFFERED", ""},
		{"no call", "/leadline.v1.PositionService/Whence", `{}`, 501, "NOT_OFFERED", ""},
		{"no path", "/", `{}`, 404, "", ""},
	} {
		r, text := post(t, conn, c.method, c.body)
		if r.StatusCode != c.status {
			t.Errorf("%s: status %s, want %d: %s", c.what, r.Status, c.status, text)
		}
		if c.reason == "" {
			continue
		}
		var f struct {
			Message string
			Details []struct {
				Debug struct {
					Reason, Domain string
					Metadata       map[string]string
				}
			}
		}
		if err := json.Unmarshal(text, &f); err != nil || len(f.Details) != 1 || f.Message == "" {
			t.Errorf("%s: %v, %s", c.what, err, text)
			continue
		}
		if d := f.Details[0].Debug; d.Reason != c.reason || d.Domain != domain || d.Metadata["field"] != c.field {
			t.Errorf("%s: %s, want the reason %s", c.what, text, c.reason)
		}
	}
	if r, text := post(t, conn, healthv1.Health_Check_FullMethodName, `{}`); r.StatusCode != 200 || !strings.Contains(string(text), `"SERVING"`) {
		t.Errorf("health: %s, %s", r.Status, text)
	}
}

// TestBadOrigin proves that the configuration is checked here, too.
func TestBadOrigin(t *testing.T) {
	if _, err := New(Config{Maps: []Map{sea()}, Origins: []string{"*"}}); err == nil || !strings.Contains(err.Error(), `origin "*"`) {
		t.Errorf("got %v", err)
	}
}

// TestShutdownCutsOffHTTP proves that a stream over HTTP which does not end by
// itself, as that of the health service, holds Shutdown up only until its
// context is done, and that its handler is over then.
func TestShutdownCutsOffHTTP(t *testing.T) {
	s, conn := serve(t, Config{NewSession: newTally})
	c := connect.NewClient(connecthttp.NewTransport(byHTTP(), "http://"+conn.Target()))
	st, err := c.CallServerStream(limited(t), connect.Spec{StreamType: connect.StreamTypeServer, Procedure: healthv1.Health_Watch_FullMethodName}, &healthv1.HealthCheckRequest{})
	if err != nil {
		t.Fatal(err)
	}
	defer st.Close()
	var m healthv1.HealthCheckResponse
	if err := st.Receive(&m); err != nil || m.GetStatus() != healthv1.HealthCheckResponse_SERVING {
		t.Errorf("health: %v, %v", &m, err)
	}
	ctx, cancel := context.WithTimeout(context.Background(), 100*time.Millisecond)
	defer cancel()
	if err := s.Shutdown(ctx); !errors.Is(err, context.DeadlineExceeded) {
		t.Errorf("shutdown: %v, want that it was cut off", err)
	}
	for st.Receive(&m) == nil { // the last word may be that it does not serve
	}
}

// TestFollowOverHTTP proves that a page can follow a vehicle to its drive's end,
// and is told when the server stops.
func TestFollowOverHTTP(t *testing.T) {
	s, conn := serve(t, Config{NewSession: newTally})
	c := connect.NewClient(connecthttp.NewTransport(byHTTP(), "http://"+conn.Target()))
	st, err := c.CallServerStream(limited(t), connect.Spec{StreamType: connect.StreamTypeServer, Procedure: leadlinev1.PositionService_Follow_FullMethodName}, &leadlinev1.FollowRequest{Vehicles: []string{"v"}})
	if err != nil {
		t.Fatal(err)
	}
	defer st.Close()
	evs := voyage(2, 10)
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v"), Batch: 3}, evs); err != nil {
		t.Fatal(err)
	}
	posteriors := 0
	for {
		var m leadlinev1.FollowResponse
		if err := st.Receive(&m); err != nil {
			t.Fatal(err)
		}
		if f := m.GetFarewell(); f != nil {
			if f.GetPosteriorSha256() != tallied(evs) || posteriors == 0 {
				t.Errorf("after %d posteriors: %v, want the hash %s", posteriors, f, tallied(evs))
			}
			break
		}
		posteriors++
	}
	stopped := make(chan error, 1)
	go func() { stopped <- s.Shutdown(limited(t)) }()
	err = st.Receive(&leadlinev1.FollowResponse{})
	if code := connect.CodeOf(err); code != connect.CodeUnavailable {
		t.Errorf("the stream ended with %v", err)
	} else if info := reasonOf(t, err); info.GetReason() != "STOPPING" {
		t.Errorf("the stream ended for %v", info)
	}
	if err := <-stopped; err != nil {
		t.Errorf("shutdown: %v", err)
	}
}

// reasonOf reads the reason out of Connect's error.
func reasonOf(t *testing.T, err error) *errdetails.ErrorInfo {
	t.Helper()
	var ce *connect.Error
	if !errors.As(err, &ce) || len(ce.Details()) == 0 {
		t.Fatalf("%v has no reason", err)
	}
	m, err := connectproto.UnmarshalErrorDetail(ce.Details()[0])
	if err != nil {
		t.Fatal(err)
	}
	return m.(*errdetails.ErrorInfo)
}
