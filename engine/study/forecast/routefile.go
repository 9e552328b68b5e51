package forecast

import (
	"bytes"
	"encoding/json"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"strings"
	"time"

	"leadline/engine/geo"
)

// Bounds of a route file.
const (
	maxRouteBytes  = 64 << 20
	maxRoutePoints = 1_000_000
)

// Route is a planned way as a file says it.
type Route struct {
	Name   string
	Points []geo.LonLat
	// Times are when the points are reached; nil unless the file says so of all.
	Times []time.Time
}

// ReadRoute reads a route: the one LineString of a GeoJSON text (RFC 7946), bare
// or in features, or the one route or track of a GPX text (GPX 1.0 and 1.1), whose
// segments are joined; the times of its points are kept if all have one and they
// rise. name is used in errors and for a route that has none.
func ReadRoute(name string, r io.Reader) (*Route, error) {
	text, err := io.ReadAll(io.LimitReader(r, maxRouteBytes+1))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	if len(text) > maxRouteBytes {
		return nil, fmt.Errorf("%s: the file has over %d bytes: simplify the route", name, maxRouteBytes)
	}
	text = bytes.TrimLeft(bytes.TrimPrefix(text, []byte("\ufeff")), " \t\r\n")
	out := &Route{Name: name}
	switch {
	case bytes.HasPrefix(text, []byte("{")):
		err = out.readGeoJSON(text)
	case bytes.HasPrefix(text, []byte("<")):
		err = out.readGPX(text)
	default:
		err = errors.New("it is neither GeoJSON nor GPX by its first character: give a LineString, or a GPX route or track")
	}
	if err == nil {
		err = out.check()
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", name, err)
	}
	return out, nil
}

func (r *Route) check() error {
	if len(r.Points) > maxRoutePoints {
		return fmt.Errorf("the route has %d points: at most %d are allowed", len(r.Points), maxRoutePoints)
	}
	differ := 0
	for i, p := range r.Points {
		if err := p.Check(); err != nil {
			return fmt.Errorf("point %d: %w", i+1, err)
		}
		if i > 0 && p != r.Points[i-1] {
			differ++
		}
	}
	if differ == 0 {
		return errors.New("the route has no length: it needs two points that differ")
	}
	return nil
}

type routeJSON struct {
	Type        string
	Coordinates json.RawMessage
	Geometry    *routeJSON
	Geometries  []routeJSON
	Features    []routeJSON
	Properties  struct{ Name any }
}

// lines collects the LineStrings below a node.
func (g *routeJSON) lines(name string, found *[]Route, depth int) error {
	if n, ok := g.Properties.Name.(string); ok && n != "" {
		name = n
	}
	if depth > 8 {
		return errors.New("it is nested too deeply")
	}
	if g.Type == "LineString" {
		var at [][]float64
		if err := json.Unmarshal(g.Coordinates, &at); err != nil {
			return fmt.Errorf("the coordinates of its LineString are no list of positions: %w", err)
		}
		r := Route{Name: name}
		for i, c := range at {
			if len(c) < 2 {
				return fmt.Errorf("point %d of its LineString has no longitude and latitude", i+1)
			}
			r.Points = append(r.Points, geo.FromDegrees(c[0], c[1]))
		}
		*found = append(*found, r)
		return nil
	}
	for _, of := range [][]routeJSON{g.Geometries, g.Features} {
		for i := range of {
			if err := of[i].lines(name, found, depth+1); err != nil {
				return err
			}
		}
	}
	if g.Geometry != nil {
		return g.Geometry.lines(name, found, depth+1)
	}
	return nil
}

func (r *Route) readGeoJSON(text []byte) error {
	var g routeJSON
	d := json.NewDecoder(bytes.NewReader(text))
	if err := d.Decode(&g); err != nil {
		return fmt.Errorf("byte %d: not valid JSON: %w", d.InputOffset(), err)
	}
	var found []Route
	if err := g.lines(r.Name, &found, 0); err != nil {
		return err
	}
	if len(found) != 1 {
		return fmt.Errorf("it holds %d LineStrings: a route is one; put others into files of their own", len(found))
	}
	*r = found[0]
	return nil
}

type gpxPoint struct {
	Lat  *float64 `xml:"lat,attr"`
	Lon  *float64 `xml:"lon,attr"`
	Time string   `xml:"time"`
}

type gpxText struct {
	XMLName xml.Name `xml:"gpx"`
	Routes  []struct {
		Name   string     `xml:"name"`
		Points []gpxPoint `xml:"rtept"`
	} `xml:"rte"`
	Tracks []struct {
		Name     string `xml:"name"`
		Segments []struct {
			Points []gpxPoint `xml:"trkpt"`
		} `xml:"trkseg"`
	} `xml:"trk"`
}

func (r *Route) readGPX(text []byte) error {
	var g gpxText
	d := xml.NewDecoder(bytes.NewReader(text))
	if err := d.Decode(&g); err != nil {
		return fmt.Errorf("byte %d: not valid GPX: %s", d.InputOffset(), strings.Join(strings.Fields(err.Error()), " "))
	}
	if n := len(g.Routes) + len(g.Tracks); n != 1 {
		return fmt.Errorf("it holds %d routes and tracks: a route is one; put others into files of their own", n)
	}
	var points []gpxPoint
	var name string
	if len(g.Routes) == 1 {
		name, points = g.Routes[0].Name, g.Routes[0].Points
	} else {
		name = g.Tracks[0].Name
		for _, s := range g.Tracks[0].Segments {
			points = append(points, s.Points...)
		}
	}
	if name = strings.Join(strings.Fields(name), " "); name != "" {
		r.Name = name
	}
	timed := true
	for i, p := range points {
		if p.Lat == nil || p.Lon == nil {
			return fmt.Errorf("point %d has no lat and lon", i+1)
		}
		r.Points = append(r.Points, geo.FromDegrees(*p.Lon, *p.Lat))
		t, err := time.Parse(time.RFC3339Nano, strings.TrimSpace(p.Time))
		if err != nil || i > 0 && timed && !t.After(r.Times[i-1]) {
			timed = false
		}
		r.Times = append(r.Times, t)
	}
	if !timed {
		r.Times = nil
	}
	return nil
}
