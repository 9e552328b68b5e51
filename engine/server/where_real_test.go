package server

import (
	"math"
	"testing"

	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

var _ Asker = (*session.Session)(nil)

// TestQuestionsOfASession proves that a real session's answers agree with one
// another: a region holds what it says, by Inside; the protection radius at
// 1 % is the 99 % radius; and the suite's risk gives the posterior's own.
func TestQuestionsOfASession(t *testing.T) {
	if testing.Short() {
		t.Skip("one caller at a time: not with -short")
	}
	_, conn := serve(t, Config{})
	closed, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(12, 5))
	if err != nil {
		t.Fatal(err)
	}
	r, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}, RegionFractions: []float64{0.9}, IntegrityRisk: proto.Float64(0.01)})
	if err != nil {
		t.Fatal(err)
	}
	p := r.GetPosterior()
	sum := 0.0
	for _, polygon := range p.GetRegions()[0].GetPolygons() {
		in, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}, Area: polygon})
		if err != nil {
			t.Fatal(err)
		}
		sum += in.GetPosterior().GetAreaProbability()
	}
	// Of a Gaussian, 90 % lie within 2.146 sigma. A pixel is about a third of a
	// sigma: a region that is one wider all around, which whole pixels may be,
	// holds 1 - exp(-2.48²/2) = 0.954.
	if says := p.GetRegions()[0].GetProbability(); says < 0.9 || sum < 0.9 || sum > 0.955 {
		t.Errorf("the region says %v and holds %v", says, sum)
	}
	// Radii are at most 2 % too large.
	if a, b := p.GetProtection().GetRadiusM(), p.GetRadii().GetRadius99M(); math.Abs(a/b-1) > 0.04 {
		t.Errorf("protection radius at 1 %%: %v m, 99 %% radius %v m", a, b)
	}
	own := closed.GetPosterior().GetProtection()
	again, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}, IntegrityRisk: proto.Float64(own.GetRisk())})
	if err != nil || !proto.Equal(again.GetPosterior().GetProtection(), own) {
		t.Errorf("protection at the suite's risk %v, %v; the posterior's %v", again.GetPosterior().GetProtection(), err, own)
	}
	all := wire.FromPolygon([][]geo.LonLat{{geo.FromDegrees(4.8, 52.9), geo.FromDegrees(5.2, 52.9), geo.FromDegrees(5.2, 53.1), geo.FromDegrees(4.8, 53.1)}})
	in, err := where(t, conn, &leadlinev1.WhereRequest{Vehicles: []string{"v"}, Area: all})
	if err != nil || math.Abs(in.GetPosterior().GetAreaProbability()-1) > 1e-6 {
		t.Errorf("probability of everywhere: %v, %v", in.GetPosterior().GetAreaProbability(), err)
	}
}
