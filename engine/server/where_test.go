package server

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// asked is a tally that answers questions from what it is asked.
type asked struct{ Session }

var _ Asker = asked{}

func (asked) Region(f float64) (*summary.Region, error) {
	if f == 0.5 {
		return nil, fmt.Errorf("not today")
	}
	return &summary.Region{
		Level: f, Holds: f + 0.01, AreaM2: 1000 * f, PixelM: 3,
		Polygons: [][][]geo.LonLat{{{middle, geo.FromDegrees(6, 53), geo.FromDegrees(6, 54), middle}}},
	}, nil
}

func (asked) Inside(polygon [][]geo.LonLat) (float64, error) { return polygon[0][1].Lon, nil }

func (asked) Protection(risk float64) (summary.Protection, error) {
	return summary.Protection{Risk: risk, Bounded: risk > 1e-6, RadiusM: 1 / risk, Reason: "so sure of itself"}, nil
}

// TestQuestions proves that what a question asks reaches the session and comes
// back.
func TestQuestions(t *testing.T) {
	_, conn := serve(t, Config{NewSession: func(c session.Config) (Session, error) {
		s, err := newTally(c)
		return asked{s}, err
	}})
	evs := voyage(11, 5)
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, evs); err != nil {
		t.Fatal(err)
	}
	corner, risk := geo.FromDegrees(0.25, 53), 1e-5
	r, err := where(t, conn, &leadlinev1.WhereRequest{
		Vehicles: []string{"v"}, RegionFractions: []float64{0.6, 0.9}, IntegrityRisk: proto.Float64(risk),
		Area: wire.FromPolygon([][]geo.LonLat{{middle, corner, geo.FromDegrees(5, 54)}}),
	})
	if err != nil {
		t.Fatal(err)
	}
	p := r.GetPosterior()
	if len(p.GetRegions()) != 2 || p.GetRegions()[1].GetFraction() != 0.9 || p.GetRegions()[0].GetProbability() != 0.61 ||
		p.GetRegions()[1].GetAreaM2() != 900 || p.GetRegions()[0].GetPixelM() != 3 {
		t.Errorf("regions: %v", p.GetRegions())
	}
	rings, err := wire.Polygon(p.GetRegions()[0].GetPolygons()[0])
	if err != nil || len(rings) != 1 || len(rings[0]) != 4 || rings[0][3] != middle {
		t.Errorf("polygon: %v, %v", rings, err)
	}
	if p.GetAreaProbability() != corner.Lon {
		t.Errorf("probability of the area: %v, want %v", p.GetAreaProbability(), corner.Lon)
	}
	if p.GetProtection().GetRisk() != risk || p.GetProtection().GetRadiusM() != 1/risk {
		t.Errorf("protection: %v", p.GetProtection())
	}
	if r.GetPosteriorSha256() != tallied(evs) || !r.GetEnded() {
		t.Errorf("answer: %v", r)
	}
	r, err = where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}, IntegrityRisk: proto.Float64(1e-9)})
	if err != nil || r.GetPosterior().Protection.RadiusM != nil || r.GetPosterior().GetProtection().GetUnboundedReason() == "" {
		t.Errorf("an unbounded radius: %v, %v", r.GetPosterior().GetProtection(), err)
	}
	if r.GetPosterior().AreaProbability != nil || r.GetPosterior().Regions != nil {
		t.Errorf("what was not asked: %v", r)
	}
	_, err = where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}, RegionFractions: []float64{0.5}})
	wantStatus(t, "an answer that fails", err, codes.InvalidArgument, "region_fractions: 0.5: not today")
}

// TestBadQuestions proves that each wrong question has its own answer.
func TestBadQuestions(t *testing.T) {
	_, conn := serve(t, Config{})
	openRaw(t, conn, &leadlinev1.Open{Header: header("silent"), Drive: "d"})
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(9, 5)); err != nil {
		t.Fatal(err)
	}
	corner := wire.FromPosition(geo.FromDegrees(5, 53))
	for _, c := range []struct {
		req   *leadlinev1.WhereRequest
		code  codes.Code
		words string
	}{
		{&leadlinev1.WhereRequest{}, codes.InvalidArgument, "vehicles is empty"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"ghost"}}, codes.NotFound, `no vehicle "ghost" here`},
		{&leadlinev1.WhereRequest{Vehicles: []string{strings.Repeat("x", 1<<20)}}, codes.InvalidArgument, "vehicles[0] is 1048576 bytes long"},
		{&leadlinev1.WhereRequest{Vehicles: []string{""}}, codes.InvalidArgument, "vehicles[0] is empty"},
		{&leadlinev1.WhereRequest{Vehicles: make([]string, 101)}, codes.InvalidArgument, "101 vehicles: at most 100"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"silent"}}, codes.FailedPrecondition, "no posterior yet"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"v"}, RegionFractions: []float64{0.5, 1}}, codes.InvalidArgument, "region_fractions: 1: it must be above 0 and below 1"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"v"}, RegionFractions: []float64{math.NaN()}}, codes.InvalidArgument, "region_fractions: NaN"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"v"}, RegionFractions: make([]float64, 9)}, codes.InvalidArgument, "9 region_fractions: at most 8"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"v"}, IntegrityRisk: proto.Float64(0)}, codes.InvalidArgument, "integrity_risk 0"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"v"}, Area: &leadlinev1.Polygon{}}, codes.InvalidArgument, "area: no ring"},
		{&leadlinev1.WhereRequest{Vehicles: []string{"v"}, Area: &leadlinev1.Polygon{Rings: []*leadlinev1.Ring{{Points: []*leadlinev1.Position{corner, corner}}}}}, codes.InvalidArgument, "rings[0] has 2 points"},
	} {
		_, err := where(t, conn, c.req)
		wantStatus(t, fmt.Sprintf("%.100v", c.req), err, c.code, c.words)
		if len(err.Error()) > 2000 {
			t.Errorf("%.100v: an answer of %d bytes", c.req, len(err.Error()))
		}
	}
}
