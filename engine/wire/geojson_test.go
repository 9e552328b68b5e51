package wire

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// FuzzPolygonFromGeoJSON proves that no file panics, and that what is taken is a polygon on
// the globe.
func FuzzPolygonFromGeoJSON(f *testing.F) {
	f.Add([]byte(`{"type":"Polygon","coordinates":[[[0,0],[1,0],[1,1],[0,0]]]}`))
	f.Add([]byte(`{"type":"FeatureCollection","features":[{"type":"Feature","properties":{},"geometry":{"type":"Polygon","coordinates":[[[0,0],[1,0],[1,1]],[[0.1,0.1],[0.2,0.1],[0.2,0.2]]]}}]}`))
	f.Add([]byte(`{"type":"Polygon","coordinates":[[[0,95],[1,0],[1,1]]]}`))
	f.Add([]byte(`{"type":"Polygon"}`))
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) > 1<<14 {
			return
		}
		p, err := PolygonFromGeoJSON(text)
		if err != nil {
			if strings.TrimSpace(err.Error()) == "" {
				t.Error("an error without a word")
			}
			return
		}
		for _, r := range p.GetRings() {
			if len(r.GetPoints()) < 3 {
				t.Errorf("a ring of %d points", len(r.GetPoints()))
			}
			for _, q := range r.GetPoints() {
				if !(math.Abs(q.GetLat()) <= 90.0000001 && math.Abs(q.GetLon()) <= 180.0000001) {
					t.Error(fmt.Sprint(q))
				}
			}
		}
	})
}
