package server

import (
	"math"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestWhereAgo: asked for some seconds ago, a server says what a session of the same
// measurements knows of then (which is held against sums over all paths), with all
// that is asked of it; the drive goes on as if nobody had asked, and what cannot be told is said.
func TestWhereAgo(t *testing.T) {
	suite := &sensor.Suite{Vehicle: sensor.Vehicle{LookBackS: 5}}
	cfg := session.Config{Vehicle: "v", Space: sea().Space, Suite: suite, MaxCells: 1000, Start: session.Start{Kind: session.AtPoint, Point: middle, SigmaM: 100}}
	alone, err := session.New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	_, conn := serve(t, Config{Suites: map[string]*sensor.Suite{"boat": suite}, MaxCells: 1000})
	h := header("v")
	h.Suite = "boat"
	f, err := client.Open(limited(t), conn, client.Drive{Header: h, Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	evs := voyage(1, 11)
	for _, ev := range evs {
		if _, err := alone.Add(ev); err != nil {
			t.Fatal(err)
		}
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	for { // until all has arrived
		a, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}})
		if err == nil && a.GetPosterior().GetTime().AsTime().UnixNano() == alone.Latest().TimeNS {
			break
		}
	}
	around := wire.FromPolygon([][]geo.LonLat{{geo.FromDegrees(4.8, 52.9), geo.FromDegrees(5.2, 52.9), geo.FromDegrees(5.2, 53.1), geo.FromDegrees(4.8, 53.1)}})
	ask := &leadlinev1.WhereRequest{Vehicles: []string{"v"}, AgoS: 3, RegionFractions: []float64{0.9}, Area: around, IntegrityRisk: proto.Float64(0.01)}
	a, err := where(t, conn, ask)
	if err != nil {
		t.Fatal(err)
	}
	e, err := alone.Earlier(3)
	if err != nil {
		t.Fatal(err)
	}
	want, err := e.Look(nil)
	if err != nil {
		t.Fatal(err)
	}
	p := a.GetPosterior()
	if lon, lat := want.Mean.Degrees(); p.GetTime().AsTime().UnixNano() != want.TimeNS || p.GetMean().GetLon() != lon || p.GetMean().GetLat() != lat || p.GetRadii().GetRadius95M() != want.Radius95M {
		t.Errorf("%v, want %+v", p, want)
	}
	if p.GetHindsightS() != 3 || a.GetEnded() {
		t.Errorf("%v s of hindsight, ended %v", p.GetHindsightS(), a.GetEnded())
	}
	if x, y := p.GetProtection().GetRadiusM(), p.GetRadii().GetRadius99M(); math.Abs(x/y-1) > 0.04 || p.GetProtection().GetRisk() != 0.01 {
		t.Errorf("protection at 1 %% %v m, 99 %% radius %v m", x, y)
	}
	circle := math.Pi * p.GetRadii().GetRadius95M() * p.GetRadii().GetRadius95M()
	if r := p.GetRegions()[0]; r.GetProbability() < 0.9 || r.GetAreaM2() > 1.1*circle || r.GetAreaM2() < 0.5*circle || p.GetAreaProbability() < 0.999 {
		t.Errorf("the region of 0.9 has %v m², the 95 %% circle %v m²; %v within some 25 km", r.GetAreaM2(), circle, p.GetAreaProbability())
	}
	refused := func(what string, code codes.Code, words string, req *leadlinev1.WhereRequest) {
		t.Helper()
		if _, err := where(t, conn, req); err == nil {
			t.Errorf("%s has an answer", what)
		} else {
			wantStatus(t, what, err, code, words)
		}
	}
	refused("more than the suite's", codes.FailedPrecondition, "look_back_s, 5 s", &leadlinev1.WhereRequest{Vehicles: []string{"v"}, AgoS: 5.5})
	refused("both", codes.InvalidArgument, "leave one out", &leadlinev1.WhereRequest{Vehicles: []string{"v"}, AgoS: 1, PredictToNow: true})
	refused("never", codes.InvalidArgument, "0 to 3600", &leadlinev1.WhereRequest{Vehicles: []string{"v"}, AgoS: math.NaN()})
	alone.Flush()
	if closed, err := f.Close(); err != nil || closed.GetPosteriorSha256() != alone.Hash() {
		t.Errorf("closed: %v, %v; want hash %s", closed, err, alone.Hash())
	}
	refused("what has ended", codes.FailedPrecondition, "replay it with --smooth", ask)
}
