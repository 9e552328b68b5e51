package server

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"maps"
	"math"
	"slices"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/status"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/study/forecast"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Bounds of a forecast. One at a time, since it takes a processor, for as long
// as somebody waits for an answer; and no route whose matching to roads, which
// cannot be cut short, takes more than some seconds of that.
const (
	forecastsAtOnce   = 1
	forecastBudget    = time.Minute
	maxRouteFileBytes = 2 << 20
	maxRoutePoints    = 10_000
	maxRouteM         = 100e3
	maxRouteS         = 4 * 3600
	plannedStartM     = 10 // how well a start is known, unless it is said; practice
)

// errBudget ends a forecast that takes too long.
var errBudget = full("forecast_s", int(forecastBudget.Seconds()),
	"forecast: it was not ready after %.0f s: give a shorter route, or set no_ambiguity, or run `leadline forecast` on another machine", forecastBudget.Seconds())

// Forecast says beforehand how good positions will be: see the .proto file.
func (s *Server) Forecast(req *leadlinev1.ForecastRequest, stream grpc.ServerStreamingServer[leadlinev1.ForecastResponse]) error {
	if req.GetMap() == "" {
		return badField("map", "forecast: map is missing: give the name of a map")
	}
	m := s.atlas.acquire(req.GetMap())
	if m == nil {
		return s.unknownMap(req.GetMap())
	}
	defer s.releaseMap(m)
	suite, err := s.planned(req)
	if err != nil {
		return err
	}
	route, field, err := plannedRoute(req)
	if err != nil {
		return err
	}
	ctx, cancel := context.WithTimeoutCause(stream.Context(), forecastBudget, errBudget)
	defer cancel()
	stop := func() error {
		select {
		case <-s.draining:
			return errStopping
		case <-ctx.Done():
			return context.Cause(ctx)
		default:
			return nil
		}
	}
	tell := func(done, total int) error {
		return stream.Send(&leadlinev1.ForecastResponse{News: &leadlinev1.ForecastResponse_Progress{
			Progress: &leadlinev1.ForecastProgress{Done: uint32(done), Total: uint32(total)},
		}})
	}
	if err := tell(0, 1); err != nil {
		return err
	}
	select {
	case s.forecasting <- struct{}{}:
	case <-s.draining:
		return errStopping
	case <-ctx.Done():
		return ended(ctx, context.Cause(ctx))
	}
	var gone error
	f, err := func() (*leadlinev1.Forecast, error) {
		defer func() { <-s.forecasting }()
		path, err := forecast.NewPath(m.Space, route, req.GetSpeedMps())
		if err != nil {
			return nil, badField(field, "forecast: %s: %v", field, err)
		}
		plan, err := forecast.NewPlan(path, suite, nil, startSigma(req))
		if err != nil {
			return nil, refuse(leadlinev1.Reason_REASON_BAD_START, about{"map": m.Name, "suite": req.GetSuite()}, "forecast: %v", err)
		}
		f, err := forecast.Of(plan, forecast.Options{
			LimitM: req.GetLimitM(), NoAmbiguity: req.GetNoAmbiguity(), MaxCells: s.cfg.MaxCells, Stop: stop,
			Progress: func(done, total int) { gone = errors.Join(gone, tell(done, total)) },
		})
		if err != nil {
			return nil, ended(ctx, err)
		}
		f.Route = route.Name
		return fromForecast(f), nil
	}()
	switch {
	case err != nil:
		return err
	case gone != nil:
		return gone
	}
	return stream.Send(&leadlinev1.ForecastResponse{News: &leadlinev1.ForecastResponse_Forecast{Forecast: f}})
}

// ended words why a forecast has ended before its time.
func ended(ctx context.Context, err error) error {
	switch {
	case errors.Is(err, errStopping):
		return errStopping
	case errors.Is(err, errBudget):
		return errBudget
	case ctx.Err() != nil:
		return status.FromContextError(ctx.Err()).Err()
	}
	return refuse(leadlinev1.Reason_REASON_BAD_START, nil, "forecast: %v", err)
}

// planned checks the figures of a request, and finds its suite.
func (s *Server) planned(req *leadlinev1.ForecastRequest) (*sensor.Suite, error) {
	for _, n := range []struct {
		field  string
		v      float64
		lo, hi float64
		given  bool
	}{
		{"speed_mps", req.GetSpeedMps(), 0.1, 1000, req.GetSpeedMps() != 0},
		{"start_sigma_m", startSigma(req), 0.001, 1e6, true},
		{"limit_m", req.GetLimitM(), 0.01, 1e6, req.LimitM != nil},
	} {
		if n.given && !(n.v >= n.lo && n.v <= n.hi) {
			return nil, badField(n.field, "forecast: %s is %v: it must be from %v to %v", n.field, n.v, n.lo, n.hi)
		}
	}
	suite := s.cfg.Suites[req.GetSuite()]
	if suite == nil {
		return nil, refuse(leadlinev1.Reason_REASON_UNKNOWN_SUITE, about{"suite": req.GetSuite()}, "there is no suite %q here: known are %s",
			clip(req.GetSuite()), known(slices.Sorted(maps.Keys(s.cfg.Suites))))
	}
	return suite, nil
}

func startSigma(req *leadlinev1.ForecastRequest) float64 {
	if req.StartSigmaM == nil {
		return plannedStartM
	}
	return req.GetStartSigmaM()
}

// plannedRoute reads the route of a request, and says which field it is in.
func plannedRoute(req *leadlinev1.ForecastRequest) (route *forecast.Route, field string, err error) {
	switch r := req.GetRoute().(type) {
	case *leadlinev1.ForecastRequest_RouteFile:
		field = "route_file"
		if n := len(r.RouteFile); n > maxRouteFileBytes {
			return nil, field, badField(field, "forecast: route_file has %d bytes: at most %d are taken; simplify the route", n, maxRouteFileBytes)
		}
		if route, err = forecast.ReadRoute("route_file", bytes.NewReader(r.RouteFile)); err != nil {
			return nil, field, badField(field, "forecast: %v", err)
		}
	case *leadlinev1.ForecastRequest_RoutePoints:
		field = "route_points"
		route = &forecast.Route{}
		for i, p := range r.RoutePoints.GetPoints() {
			at, err := wire.Position(p)
			if err != nil {
				return nil, field, badField(fmt.Sprintf("route_points.points[%d]", i), "forecast: route_points.points[%d]: %v", i, err)
			}
			route.Points = append(route.Points, at)
		}
		if len(route.Points) < 2 {
			return nil, field, badField(field, "forecast: route_points has %d points: give two at least", len(route.Points))
		}
	default:
		return nil, "", badField("route", "forecast: the route is missing: give route_file or route_points")
	}
	if n := len(route.Points); n > maxRoutePoints {
		return nil, field, badField(field, "forecast: %s has %d points: at most %d are taken; simplify the route", field, n, maxRoutePoints)
	}
	if req.GetSpeedMps() == 0 && route.Times == nil {
		return nil, field, badField("speed_mps", "forecast: speed_mps is missing, and %s has no times of its own: give metres a second", field)
	}
	lengthM := 0.0
	for i := 1; i < len(route.Points); i++ {
		m, _, err := geo.WGS84.Distance(route.Points[i-1], route.Points[i])
		if err != nil { // to the other side of the globe
			m = math.Inf(1)
		}
		lengthM += m
	}
	if !(lengthM <= maxRouteM) {
		return nil, field, badField(field, "forecast: %s is %.0f km long: at most %.0f are forecast; cut it", field, lengthM/1000, maxRouteM/1000)
	}
	lasts, slow := lengthM/req.GetSpeedMps(), "speed_mps"
	if !(req.GetSpeedMps() > 0) {
		lasts, slow = route.Times[len(route.Times)-1].Sub(route.Times[0]).Seconds(), field
	}
	if lasts > maxRouteS {
		return nil, field, badField(slow, "forecast: by %s the route takes %.1f hours: at most %d are forecast; cut it, or be faster", slow, lasts/3600, maxRouteS/3600)
	}
	return route, field, nil
}

// fromForecast is a forecast as the API has it. Radii without a bound do not
// occur in it: a limit ends at 1e6 m, and the recursion's covariances are finite.
func fromForecast(f *forecast.Forecast) *leadlinev1.Forecast {
	out := &leadlinev1.Forecast{
		Route: f.Route, LengthM: f.LengthM, DurationS: f.DurationS, LimitM: f.LimitM, IntegrityRisk: f.Risk, LeftOut: f.LeftOut,
		WorstRadius95M: f.WorstM, WorstAtM: f.WorstAtM, MedianRadius95M: f.MedianM, BeyondLimit: f.Beyond, ProtectionBeyondLimit: f.Unprotected,
		MostAmbiguous: f.MostAmbiguous,
	}
	for _, name := range slices.Sorted(maps.Keys(f.RatesHz)) {
		out.Rates = append(out.Rates, &leadlinev1.SensorRate{Sensor: name, Hz: f.RatesHz[name]})
	}
	at := func(lon, lat float64) *leadlinev1.Position { return &leadlinev1.Position{Lon: &lon, Lat: &lat} }
	for _, x := range f.Samples {
		out.Samples = append(out.Samples, &leadlinev1.ForecastSample{
			WayM: x.WayM, TimeS: x.TimeS, Position: at(x.Lon, x.Lat), Radius95M: x.Radius95M, ProtectionM: x.BoundProtectionM,
		})
	}
	for _, a := range f.Alike {
		out.Alike = append(out.Alike, &leadlinev1.AlikeStretch{FromM: a.FromM, ToM: a.ToM, Ambiguity: a.Ambiguity, LocatedM: a.LocatedM})
	}
	for _, w := range f.Weak {
		m := &leadlinev1.WeakStretch{FromM: w.FromM, ToM: w.ToM, Radius95M: w.Radius95M, WorstAtM: w.WorstM}
		for _, h := range w.Help {
			m.Help = append(m.Help, &leadlinev1.StretchHelp{
				What: h.What, Position: at(h.Lon, h.Lat), WayM: h.WayM, SigmaM: h.SigmaM,
				BeforeM: h.BeforeM, AfterM: h.AfterM, WeakBeforeM: h.WeakBeforeM, WeakAfterM: h.WeakAfterM,
			})
		}
		out.Weak = append(out.Weak, m)
	}
	return out
}
