package main

import (
	"fmt"
	"io"
	"os"

	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// readArea reads a polygon from a GeoJSON file that a flag names.
func readArea(flag, path string) (*leadlinev1.Polygon, error) {
	if err := exists(path); err != nil {
		return nil, fmt.Errorf("%s: %w", flag, err)
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", flag, err)
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, wire.MaxGeoJSON+1))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", flag, err)
	}
	p, err := wire.PolygonFromGeoJSON(text)
	if err != nil {
		return nil, fmt.Errorf("%s %s: %w", flag, path, err)
	}
	return p, nil
}
