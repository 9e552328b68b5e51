package server

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestListVehicles proves that pages hold every vehicle once and in order,
// also while vehicles go, and what is said of each.
func TestListVehicles(t *testing.T) {
	now := time.Unix(0, int64(began)).Add(time.Minute)
	lake := sea()
	lake.Name = "lake"
	_, conn := serve(t, Config{
		NewSession: newTally, Now: func() time.Time { return now }, Maps: []Map{sea(), lake}, Suites: map[string]*sensor.Suite{"boat": {}},
	})
	ask := leadlinev1.NewPositionServiceClient(conn)
	for i := range 7 {
		h := header(fmt.Sprint("v", i))
		h.Suite = "boat"
		if i%2 == 1 {
			h.Map = "lake"
		}
		if _, err := fed(limited(t), conn, client.Drive{Header: h, Name: "d"}, voyage(uint64(i), i)); err != nil {
			t.Fatal(err)
		}
	}
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("waiting"), Drive: "first"})
	list := func(onMap string, size uint32) (names []string) {
		req := &leadlinev1.ListVehiclesRequest{Map: onMap, PageSize: size}
		for {
			r, err := ask.ListVehicles(limited(t), req)
			if err != nil {
				t.Fatal(err)
			}
			if size > 0 && len(r.GetVehicles()) > int(size) {
				t.Errorf("a page of %d holds %d", size, len(r.GetVehicles()))
			}
			for _, v := range r.GetVehicles() {
				names = append(names, v.GetVehicle())
			}
			if req.PageToken = r.GetNextPageToken(); req.PageToken == "" {
				return names
			}
		}
	}
	all := []string{"v0", "v1", "v2", "v3", "v4", "v5", "v6", "waiting"}
	for _, size := range []uint32{0, 1, 3, 8, 1000} {
		if got := list("", size); !slices.Equal(got, all) {
			t.Errorf("pages of %d: %q", size, got)
		}
	}
	if got := list("lake", 2); !slices.Equal(got, []string{"v1", "v3", "v5"}) {
		t.Errorf("on the lake: %q", got)
	}
	r, err := ask.ListVehicles(limited(t), &leadlinev1.ListVehiclesRequest{PageSize: 2, PageToken: "djU"}) // after v5
	if err != nil || len(r.GetVehicles()) != 2 || r.GetNextPageToken() != "" {
		t.Fatalf("the last page: %v, %v", r, err)
	}
	v, w := r.GetVehicles()[0], r.GetVehicles()[1]
	if v.GetVehicle() != "v6" || v.GetDrive() != "d" || v.GetMap() != "sea" || v.GetSuite() != "boat" || v.GetMapFingerprint() != sea().Space.Fingerprint() ||
		v.GetStatus() != leadlinev1.Status_STATUS_UNSURE || v.GetTime().AsTime().UnixNano() != int64(began+6e9) || v.GetAgeS() != 54 ||
		!v.GetOpenedAt().AsTime().Equal(now) || v.GetConnected() || !v.GetEnded() || v.GetNewerMapFingerprint() != "" {
		t.Errorf("v6 is described as %v", v)
	}
	if w.GetVehicle() != "waiting" || w.GetStatus() != leadlinev1.Status_STATUS_UNSPECIFIED || w.GetTime() != nil || !w.GetConnected() || w.GetEnded() {
		t.Errorf("waiting is described as %v", w)
	}
	if err := st.Send(ending); err != nil {
		t.Fatal(err)
	}
	for what, c := range map[string]struct {
		req   *leadlinev1.ListVehiclesRequest
		code  codes.Code
		words string
	}{
		"a large page": {&leadlinev1.ListVehiclesRequest{PageSize: 1001}, codes.InvalidArgument, "page_size 1001: at most 1000"},
		"no token":     {&leadlinev1.ListVehiclesRequest{PageToken: "*"}, codes.InvalidArgument, "page_token is none"},
		"no map":       {&leadlinev1.ListVehiclesRequest{Map: "moon"}, codes.NotFound, `no map "moon" here: known are "lake", "sea"`},
	} {
		_, err := ask.ListVehicles(limited(t), c.req)
		wantStatus(t, what, err, c.code, c.words)
	}
}

// TestEndDrive proves that a drive that is ended in its vehicle's place comes
// to what the vehicle's own end would, once, and that its stream is told.
func TestEndDrive(t *testing.T) {
	_, conn := serve(t, Config{MaxCells: 10000})
	ask := leadlinev1.NewPositionServiceClient(conn)
	evs := voyage(1, 5)
	want, err := fed(limited(t), conn, client.Drive{Header: header("own")}, evs)
	if err != nil {
		t.Fatal(err)
	}
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	if err := st.Send(batch(1, evs...)); err != nil {
		t.Fatal(err)
	}
	if m, err := st.Recv(); err != nil || m.GetReceipt().GetSequence() != 1 {
		t.Fatalf("%v, %v", m, err)
	}
	_, err = ask.EndDrive(limited(t), &leadlinev1.EndDriveRequest{Vehicle: "v", Drive: "other"})
	wantStatus(t, "another drive", err, codes.AlreadyExists, `is on drive "d", not "other"`)
	_, err = ask.EndDrive(limited(t), &leadlinev1.EndDriveRequest{Vehicle: "w"})
	wantStatus(t, "no vehicle", err, codes.NotFound, `no vehicle "w"`)
	_, err = ask.EndDrive(limited(t), &leadlinev1.EndDriveRequest{})
	wantStatus(t, "no name", err, codes.InvalidArgument, "vehicle is missing")
	for range 2 {
		r, err := ask.EndDrive(limited(t), &leadlinev1.EndDriveRequest{Vehicle: "v", Drive: "d"})
		if err != nil {
			t.Fatal(err)
		}
		c := r.GetClosed()
		if c.GetPosteriorSha256() != want.GetPosteriorSha256() || c.GetPosteriors() != want.GetPosteriors() || c.GetAccepted() != uint64(len(evs)) {
			t.Errorf("closed %v, want %v", c, want)
		}
	}
	m, err := st.Recv()
	if err != nil || m.GetClosed().GetPosteriorSha256() != want.GetPosteriorSha256() {
		t.Errorf("the stream is told %v, %v", m, err)
	}
	if _, err := st.Recv(); !errors.Is(err, io.EOF) {
		t.Errorf("the stream ends with %v", err)
	}
	if r, err := ask.ListVehicles(limited(t), &leadlinev1.ListVehiclesRequest{}); err != nil || !r.GetVehicles()[1].GetEnded() {
		t.Errorf("listed: %v, %v", r, err)
	}
}

// TestEndDriveUnseen proves that who ends a drive and may not ask where its vehicle is
// gets no position with the answer; the vehicle itself and who may ask do.
func TestEndDriveUnseen(t *testing.T) {
	conn, token := tokenServer(t, Config{MaxCells: 10000})
	ask := leadlinev1.NewPositionServiceClient(conn)
	feed := func(name string) {
		t.Helper()
		f, err := client.Open(showing(t, token(name, "roles", "vehicle")), conn, client.Drive{Header: header(name), Name: "d"})
		if err != nil {
			t.Fatal(err)
		}
		for _, ev := range voyage(1, 5) {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		if err := f.Leave(); err != nil {
			t.Fatal(err)
		}
	}
	for _, c := range []struct {
		vehicle, caller string
		roles           any
		seen            bool
	}{
		{"a", "a", "vehicle", true},
		{"b", "clerk", "administrator", false},
		{"c", "chief", []string{"administrator", "dispatcher"}, true},
	} {
		feed(c.vehicle)
		for range 2 { // the second is told of a drive that has ended
			r, err := ask.EndDrive(showing(t, token(c.caller, "roles", c.roles)), &leadlinev1.EndDriveRequest{Vehicle: c.vehicle})
			if err != nil {
				t.Fatal(err)
			}
			if got := r.GetClosed(); (got.GetPosterior() != nil) != c.seen || got.GetPosteriors() == 0 || got.GetPosteriorSha256() == "" {
				t.Errorf("%s as %v: %v", c.vehicle, c.roles, got)
			}
		}
	}
}

// TestSuites proves that a server's suites can be had as files.
func TestSuites(t *testing.T) {
	boat, err := sensor.ParseSuite("boat", []byte("sensors:\n  - {name: log, kind: speed}\n"))
	if err != nil {
		t.Fatal(err)
	}
	_, conn := serve(t, Config{NewSession: newTally, Suites: map[string]*sensor.Suite{"boat": boat, "anchor": {}}})
	ask := leadlinev1.NewPositionServiceClient(conn)
	l, err := ask.ListSuites(limited(t), &leadlinev1.ListSuitesRequest{})
	if err != nil || !slices.Equal(l.GetSuites(), []string{"anchor", "boat"}) {
		t.Errorf("listed %v, %v", l, err)
	}
	for kind, limit := range map[leadlinev1.MapKind]string{
		leadlinev1.MapKind_MAP_KIND_UNSPECIFIED: "alert_limit_m: 25", leadlinev1.MapKind_MAP_KIND_ROADS: "alert_limit_m: 25", leadlinev1.MapKind_MAP_KIND_HEIGHTS: "alert_limit_m: 556",
	} {
		d, err := ask.DescribeSuite(limited(t), &leadlinev1.DescribeSuiteRequest{Suite: "boat", Kind: kind})
		if err != nil {
			t.Fatal(err)
		}
		again, err := sensor.ParseSuite("boat", []byte(d.GetYaml()))
		sum := sha256.Sum256([]byte(d.GetYaml()))
		if err != nil || again.Sensors[0].Name != "log" || !strings.Contains(d.GetYaml(), limit) || d.GetFingerprint() != hex.EncodeToString(sum[:]) || d.GetName() != "boat" {
			t.Errorf("%v: %v, %v", kind, d, err)
		}
	}
	_, err = ask.DescribeSuite(limited(t), &leadlinev1.DescribeSuiteRequest{Suite: "tank"})
	wantStatus(t, "no suite", err, codes.NotFound, `no suite "tank" here: known are "anchor", "boat"`)
	_, err = ask.DescribeSuite(limited(t), &leadlinev1.DescribeSuiteRequest{})
	wantStatus(t, "no name", err, codes.InvalidArgument, "suite is missing")
	_, err = ask.DescribeSuite(limited(t), &leadlinev1.DescribeSuiteRequest{Suite: "boat", Kind: 9})
	wantStatus(t, "no kind", err, codes.InvalidArgument, "kind 9")
}
