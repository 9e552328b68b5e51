package server

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
	"testing"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/study/forecast"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// towed is a suite that drifts with the way.
func towed(t *testing.T) *sensor.Suite {
	t.Helper()
	s, err := sensor.ParseSuite("towed", []byte("sensors:\n  - {name: log, kind: displacement, noise: {sigma_m_per_sqrt_m: 0.5}}\n"))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// eastward asks for so many km to the east at 10 m/s.
func eastward(km float64) *leadlinev1.ForecastRequest {
	lon := 5 + km*1000/math.Cos(53*math.Pi/180)/111_300
	return &leadlinev1.ForecastRequest{Map: "sea", Suite: "towed", SpeedMps: 10, LimitM: proto.Float64(40), NoAmbiguity: true, Route: &leadlinev1.ForecastRequest_RouteFile{
		RouteFile: fmt.Appendf(nil, `{"type":"LineString","coordinates":[[5,53],[%.9f,53]]}`, lon),
	}}
}

// forecastBy asks, and returns the news in their order.
func forecastBy(ctx context.Context, conn *grpc.ClientConn, req *leadlinev1.ForecastRequest) (news []*leadlinev1.ForecastResponse, err error) {
	st, err := leadlinev1.NewPositionServiceClient(conn).Forecast(ctx, req)
	for err == nil {
		var m *leadlinev1.ForecastResponse
		if m, err = st.Recv(); err == nil {
			news = append(news, m)
		}
	}
	if errors.Is(err, io.EOF) {
		err = nil
	}
	return news, err
}

// TestForecast proves that what the server foresees is what the study does, with
// the route as a file and as points, that it tells how far it is, and that a
// refusal says which field is wrong.
func TestForecast(t *testing.T) {
	suite := towed(t)
	_, conn := serve(t, Config{MaxCells: 1000, Suites: map[string]*sensor.Suite{"towed": suite, "none": {}}})
	req := eastward(3)
	news, err := forecastBy(limited(t), conn, req)
	if err != nil || len(news) < 3 {
		t.Fatalf("%d news, %v", len(news), err)
	}
	done := uint32(0)
	for i, m := range news[:len(news)-1] {
		p := m.GetProgress()
		if p == nil || p.GetDone() < done || p.GetDone() > p.GetTotal() {
			t.Errorf("news %d: %v after %d", i, m, done)
		}
		done = p.GetDone()
	}
	got := news[len(news)-1].GetForecast()
	route, err := forecast.ReadRoute("route_file", strings.NewReader(string(req.GetRouteFile())))
	if err != nil {
		t.Fatal(err)
	}
	path, err := forecast.NewPath(sea().Space, route, 10)
	if err != nil {
		t.Fatal(err)
	}
	plan, err := forecast.NewPlan(path, suite, nil, 10)
	if err != nil {
		t.Fatal(err)
	}
	want, err := forecast.Of(plan, forecast.Options{LimitM: 40, NoAmbiguity: true, MaxCells: 1000})
	if err != nil {
		t.Fatal(err)
	}
	want.Route = route.Name
	if !proto.Equal(got, fromForecast(want)) {
		t.Errorf("got %v\nwant %v", got, fromForecast(want))
	}
	if len(got.GetWeak()) != 1 || len(got.GetWeak()[0].GetHelp()) == 0 || math.Abs(got.GetLengthM()-3000) > 10 {
		t.Errorf("a way that drifts beyond its limit has %v, %v m", got.GetWeak(), got.GetLengthM())
	}

	points := proto.CloneOf(req)
	drawn := &leadlinev1.RoutePoints{}
	for _, p := range route.Points {
		drawn.Points = append(drawn.Points, wire.FromPosition(p))
	}
	points.Route = &leadlinev1.ForecastRequest_RoutePoints{RoutePoints: drawn}
	if news, err = forecastBy(limited(t), conn, points); err != nil || news[len(news)-1].GetForecast().GetWorstRadius95M() != got.GetWorstRadius95M() {
		t.Errorf("by points: %v", err)
	}

	for what, k := range map[string]struct {
		change func(*leadlinev1.ForecastRequest)
		code   codes.Code
		words  string
	}{
		"an unknown map":   {func(r *leadlinev1.ForecastRequest) { r.Map = "moon" }, codes.NotFound, `no map "moon"`},
		"an unknown suite": {func(r *leadlinev1.ForecastRequest) { r.Suite = "tank" }, codes.NotFound, `no suite "tank"`},
		"no sensors":       {func(r *leadlinev1.ForecastRequest) { r.Suite = "none" }, codes.InvalidArgument, "forecast: the suite declares no sensors"},
		"no speed":         {func(r *leadlinev1.ForecastRequest) { r.SpeedMps = 0 }, codes.InvalidArgument, "speed_mps is missing"},
		"too slow":         {func(r *leadlinev1.ForecastRequest) { r.SpeedMps = 0.1 }, codes.InvalidArgument, "8.4 hours"},
		"no route":         {func(r *leadlinev1.ForecastRequest) { r.Route = nil }, codes.InvalidArgument, "route_file or route_points"},
		"too long":         {func(r *leadlinev1.ForecastRequest) { r.Route = eastward(101).Route }, codes.InvalidArgument, "101 km long"},
		"off the map":      {func(r *leadlinev1.ForecastRequest) { r.Route = eastward(30).Route }, codes.InvalidArgument, "lies off the map"},
		"a large file": {func(r *leadlinev1.ForecastRequest) {
			r.Route = &leadlinev1.ForecastRequest_RouteFile{RouteFile: make([]byte, maxRouteFileBytes+1)}
		}, codes.InvalidArgument, "at most 2097152 are taken"},
		"one point": {func(r *leadlinev1.ForecastRequest) {
			r.Route = &leadlinev1.ForecastRequest_RoutePoints{RoutePoints: &leadlinev1.RoutePoints{Points: []*leadlinev1.Position{wire.FromPosition(geo.FromDegrees(5, 53))}}}
		}, codes.InvalidArgument, "give two at least"},
	} {
		wrong := proto.CloneOf(req)
		k.change(wrong)
		_, err := forecastBy(limited(t), conn, wrong)
		wantStatus(t, what, err, k.code, k.words)
		if said := status.Convert(err).Message(); strings.Contains(said, "rpc error") {
			t.Errorf("%s: said twice: %s", what, said)
		}
	}
}

// TestForecastGivenUp proves that a forecast which is given up ends and makes
// room for the next, and that a server which stops ends it.
func TestForecastGivenUp(t *testing.T) {
	s, conn := serve(t, Config{MaxCells: 200_000, Suites: map[string]*sensor.Suite{"towed": towed(t)}})
	long := eastward(19) // with twenty searches: minutes
	long.NoAmbiguity = false
	ctx, cancel := context.WithCancel(limited(t))
	begin := func(ctx context.Context) grpc.ServerStreamingClient[leadlinev1.ForecastResponse] {
		st, err := leadlinev1.NewPositionServiceClient(conn).Forecast(ctx, long)
		for err == nil {
			var m *leadlinev1.ForecastResponse
			if m, err = st.Recv(); m.GetProgress().GetDone() > 0 {
				return st
			}
		}
		t.Fatal(err)
		return nil
	}
	begin(ctx)
	cancel()
	if news, err := forecastBy(limited(t), conn, eastward(1)); err != nil || news[len(news)-1].GetForecast() == nil {
		t.Errorf("after one that was given up: %v", err)
	}
	st := begin(limited(t))
	ended := make(chan error, 1)
	go func() { ended <- s.Shutdown(limited(t)) }()
	for {
		if _, err := st.Recv(); err != nil {
			wantStatus(t, "while the server stops", err, codes.Unavailable, "the server stops")
			break
		}
	}
	if err := <-ended; err != nil {
		t.Error(err)
	}
}
