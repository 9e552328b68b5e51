package roadfile

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"strconv"
)

// geometry takes the lines of a geometry object.
func (g *geoJSON) geometry(s rawGeometry, t tags, name string, depth int) error {
	switch s.Type {
	case "LineString":
		return g.lineString(s.Coordinates, t, name)
	case "MultiLineString":
		lines, err := elements(s.Coordinates)
		if err != nil {
			return err
		}
		for i, l := range lines {
			if err := g.lineString(l, t, name); err != nil {
				return fmt.Errorf("line %d: %w", i, err)
			}
		}
		return nil
	case "GeometryCollection":
		if depth >= maxNesting {
			return fmt.Errorf("geometry collections are nested more than %d deep", maxNesting)
		}
		var list []rawGeometry
		if err := json.Unmarshal(s.Geometries, &list); err != nil {
			return fmt.Errorf("its geometries are no array of geometry objects: %w", err)
		}
		for i, x := range list {
			if err := g.geometry(x, t, name, depth+1); err != nil {
				return fmt.Errorf("geometry %d: %w", i, err)
			}
		}
		return nil
	case "Point", "MultiPoint":
		g.notes.Points++
		return nil
	case "Polygon", "MultiPolygon":
		g.notes.Areas++
		return nil
	}
	return fmt.Errorf("its geometry has type %q, which is none of GeoJSON's; roads are LineString or MultiLineString", s.Type)
}

func (g *geoJSON) lineString(raw json.RawMessage, t tags, name string) error {
	points, err := elements(raw)
	if err != nil {
		return err
	}
	if len(points) == 0 {
		g.notes.NoGeometry++
		return nil
	}
	if len(points) > maxPerLine {
		return fmt.Errorf("a line with %d vertices: more than %d are not read; split it", len(points), maxPerLine)
	}
	wanted := g.wanted(t)
	g.nodes, g.heights = g.nodes[:0], g.heights[:0]
	for i, p := range points {
		lon, lat, height, err := position(p)
		if err != nil {
			return fmt.Errorf("vertex %d: %w", i, err)
		}
		if wanted {
			g.nodes = append(g.nodes, g.node(lon, lat))
			g.heights = append(g.heights, height)
		}
	}
	if !wanted {
		return nil
	}
	g.notes.unknown(t, name)
	a := t.attributes()
	return g.add(g.nodes, g.heights, name, a, t.direction(a))
}

// elements splits a JSON array, which is known to be valid JSON, without
// looking into what it holds.
func elements(raw json.RawMessage) ([]json.RawMessage, error) {
	raw = bytes.TrimSpace(raw)
	if len(raw) < 2 || raw[0] != '[' {
		return nil, fmt.Errorf("its coordinates are %.40s, want an array", orMissing(raw))
	}
	var list []json.RawMessage
	depth, start, quoted := 0, 1, false
	for i := 1; i < len(raw); i++ {
		b := raw[i]
		switch {
		case quoted:
			if b == '\\' {
				i++
			} else if b == '"' {
				quoted = false
			}
		case b == '"':
			quoted = true
		case b == '[' || b == '{':
			depth++
		case depth > 0 && (b == ']' || b == '}'):
			depth--
		case depth == 0 && (b == ',' || b == ']'):
			x := bytes.TrimSpace(raw[start:i])
			if len(x) > 0 {
				list = append(list, x)
			}
			start = i + 1
		}
	}
	return list, nil
}

func orMissing(raw []byte) string {
	if len(raw) == 0 {
		return "missing"
	}
	return string(raw)
}

// position reads [longitude, latitude] or [longitude, latitude, height, ...].
func position(raw json.RawMessage) (lon, lat, height float64, err error) {
	if len(raw) < 2 || raw[0] != '[' {
		return 0, 0, 0, fmt.Errorf("%.40s is no position, want [longitude, latitude]", raw)
	}
	height = math.NaN()
	inner := raw[1 : len(raw)-1]
	for i := range 3 {
		field, rest, more := bytes.Cut(inner, []byte{','})
		x, err := strconv.ParseFloat(string(bytes.TrimSpace(field)), 64)
		if err != nil || math.IsInf(x, 0) || math.IsNaN(x) {
			return 0, 0, 0, fmt.Errorf("%.60s is no position, want numbers [longitude, latitude]", raw)
		}
		switch i {
		case 0:
			lon = x
		case 1:
			lat = x
		case 2:
			height = x
		}
		inner = rest
		if !more {
			if i == 0 {
				return 0, 0, 0, fmt.Errorf("%.60s has one number, want [longitude, latitude]", raw)
			}
			break
		}
	}
	if err := checkPlace(lon, lat); err != nil {
		return 0, 0, 0, err
	}
	// Nothing on Earth's surface is farther from sea level.
	if math.Abs(height) > 20000 {
		return 0, 0, 0, fmt.Errorf("height %v m is not on this Earth: heights are in metres", height)
	}
	return lon, lat, height, nil
}

// checkPlace refuses what is not on the globe.
func checkPlace(lon, lat float64) error {
	switch {
	case math.Abs(lon) <= 180 && math.Abs(lat) <= 90:
		return nil
	case math.Abs(lon) <= 90 && math.Abs(lat) <= 180:
		return fmt.Errorf("longitude %v, latitude %v is not on the globe: they look swapped, longitude comes first", lon, lat)
	case math.Abs(lon) > 1000 || math.Abs(lat) > 1000:
		return fmt.Errorf("longitude %v, latitude %v is not on the globe: they look like metres; reproject to WGS 84 degrees", lon, lat)
	}
	return fmt.Errorf("longitude %v, latitude %v is not on the globe: longitude must be within ±180, latitude within ±90 degrees", lon, lat)
}
