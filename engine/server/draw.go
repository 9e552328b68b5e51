package server

import (
	"context"

	"google.golang.org/grpc/status"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Roads are the lines of a road map, for drawing: edges by their number, each
// with its points in the map's frame.
type Roads interface {
	Charts() int
	Polyline(chart int32) (eastM, northM []float64)
	// Twin is the same road in the other direction, -1 if there is none.
	Twin(chart int32) int32
	Name(chart int32) string
	Class(chart int32) string
	Tunnel(chart int32) bool
	Bridge(chart int32) bool
}

// drawnAtOnce is how many drawings are made at once: each reads a whole map.
const drawnAtOnce = 2

// DrawMap gives what of a map can be drawn: see the .proto file.
func (s *Server) DrawMap(ctx context.Context, req *leadlinev1.DrawMapRequest) (*leadlinev1.DrawMapResponse, error) {
	if req.GetMap() == "" {
		return nil, badField("map", "map is missing: give the name of a map")
	}
	detail := req.GetDetailM()
	if !(detail >= 0 && detail <= 1e6) {
		return nil, badField("detail_m", "draw: detail_m %v: it must be from 0 to 1e6", detail)
	}
	m := s.atlas.acquire(req.GetMap())
	if m == nil {
		return nil, s.unknownMap(req.GetMap())
	}
	defer s.releaseMap(m)
	frame := m.Space.Frame()
	box, err := rectangle(frame, req)
	if err != nil {
		return nil, err
	}
	select {
	case s.drawing <- struct{}{}:
		defer func() { <-s.drawing }()
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
	out := &leadlinev1.DrawMapResponse{
		Map: m.Name, Fingerprint: m.Space.Fingerprint(), Kind: m.kind(), Origin: wire.FromPosition(frame.Origin()), DetailM: detail,
	}
	if m.Roads != nil {
		err = m.drawRoads(ctx, out, box)
	} else if p, ok := m.Space.(filter.PlaneSpace); ok {
		err = drawRelief(ctx, out, p, box)
	}
	if err != nil {
		return nil, status.FromContextError(err).Err()
	}
	return out, nil
}

// rectangle is the box of a frame around the rectangle that is asked for; nil
// for all.
func rectangle(frame geo.Frame, req *leadlinev1.DrawMapRequest) (*geo.Box, error) {
	if req.GetSouthWest() == nil && req.GetNorthEast() == nil {
		return nil, nil
	}
	sw, err := wire.Position(req.GetSouthWest())
	if err != nil {
		return nil, badField("south_west", "draw: south_west: %v", err)
	}
	ne, err := wire.Position(req.GetNorthEast())
	if err != nil {
		return nil, badField("north_east", "draw: north_east: %v", err)
	}
	if !(sw.Lon <= ne.Lon && sw.Lat <= ne.Lat) {
		return nil, badField("north_east", "draw: north_east is south or west of south_west: exchange them")
	}
	for name, p := range map[string]geo.LonLat{"south_west": sw, "north_east": ne} {
		if farM(frame.Origin(), p) > 2*maxMapM {
			return nil, badField(name, "draw: %s is more than %g km from the map's middle: ask for less", name, 2*maxMapM/1e3)
		}
	}
	// The sides bend in the frame, so points along them count.
	const n = 8
	box := geo.EmptyBox()
	for i := range n + 1 {
		for j := range n + 1 {
			u, v := float64(i)/n, float64(j)/n
			box = box.Extend(frame.Forward(geo.LonLat{Lon: sw.Lon + float64(u*(ne.Lon-sw.Lon)), Lat: sw.Lat + float64(v*(ne.Lat-sw.Lat))}))
		}
	}
	return &box, nil
}

// touches reports whether two boxes have a point in common.
func touches(a, b geo.Box) bool {
	return a.Min.E <= b.Max.E && b.Min.E <= a.Max.E && a.Min.N <= b.Max.N && b.Min.N <= a.Max.N
}
