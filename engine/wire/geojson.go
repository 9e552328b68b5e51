package wire

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"

	"leadline/engine/geo"
	leadlinev1 "leadline/proto/leadline/v1"
)

// MaxGeoJSON bounds an area's file, in bytes: MaxPoints points in full digits.
const MaxGeoJSON = 1 << 20

// geoJSON is what an area may be: a Polygon, or the one Polygon of features.
type geoJSON struct {
	Type        string
	Coordinates json.RawMessage
	Geometry    *geoJSON
	Features    []geoJSON
}

// PolygonFromGeoJSON finds the only polygon of a GeoJSON text (RFC 7946).
func PolygonFromGeoJSON(text []byte) (*leadlinev1.Polygon, error) {
	if len(text) > MaxGeoJSON {
		return nil, fmt.Errorf("the file has over %d bytes: simplify the outline", MaxGeoJSON)
	}
	var g geoJSON
	d := json.NewDecoder(bytes.NewReader(text))
	if err := d.Decode(&g); err != nil {
		return nil, fmt.Errorf("byte %d: not valid JSON: %w", d.InputOffset(), err)
	}
	var rings [][][]float64
	switch {
	case g.Type == "FeatureCollection" && len(g.Features) == 1:
		g = g.Features[0]
	case g.Type == "FeatureCollection":
		return nil, fmt.Errorf("it has %d features: give one with a Polygon", len(g.Features))
	}
	if g.Type == "Feature" && g.Geometry != nil {
		g = *g.Geometry
	}
	if g.Type != "Polygon" {
		return nil, fmt.Errorf("it holds a %.40q: give one Polygon", g.Type)
	}
	if err := json.Unmarshal(g.Coordinates, &rings); err != nil {
		return nil, errors.New("coordinates are no list of rings of [lon, lat]")
	}
	area := make([][]geo.LonLat, len(rings))
	for i, ring := range rings {
		for j, c := range ring {
			if len(c) < 2 {
				return nil, fmt.Errorf("ring %d, point %d has %d numbers: want [lon, lat]", i, j, len(c))
			}
			p := geo.FromDegrees(c[0], c[1])
			if err := p.Check(); err != nil {
				return nil, fmt.Errorf("ring %d, point %d: %w", i, j, err)
			}
			area[i] = append(area[i], p)
		}
	}
	p := FromPolygon(area)
	if _, err := Area(p); err != nil {
		return nil, err
	}
	return p, nil
}
