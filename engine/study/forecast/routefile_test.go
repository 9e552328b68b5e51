package forecast

import (
	"path/filepath"
	"strings"
	"testing"
)

const (
	bareLine = `{"type":"LineString","coordinates":[[10,50],[10.001,50.001,7]]}`
	aTrack   = `<?xml version="1.0"?><gpx version="1.1" xmlns="http://www.topografix.com/GPX/1/1"><trk><name> a  track </name>
<trkseg><trkpt lat="50" lon="10"><time>2030-05-01T12:00:00Z</time></trkpt></trkseg>
<trkseg><trkpt lat="50.001" lon="10.001"><time>2030-05-01T12:00:10.5Z</time></trkpt></trkseg></trk></gpx>`
	aRoute = `<gpx><rte><rtept lat="50" lon="10"/><rtept lat="50.001" lon="10.001"/></rte></gpx>`
)

func TestReadRoute(t *testing.T) {
	for _, c := range []struct {
		what, text, name string
		timed            bool
	}{
		{"a bare line", bareLine, "it", false},
		{"a feature", `{"type":"Feature","properties":{"name":"to work"},"geometry":` + bareLine + `}`, "to work", false},
		{"a collection", "\ufeff" + `{"type":"FeatureCollection","features":[{"type":"Feature","geometry":{"type":"Point","coordinates":[1,2]}},{"type":"Feature","properties":{"name":3},"geometry":` + bareLine + `}]}`, "it", false},
		{"a track", aTrack, "a track", true},
		{"a route", aRoute, "it", false},
		{"a track whose times fall", strings.Replace(aTrack, ":10.5Z", ":00Z", 1), "a track", false},
	} {
		r, err := ReadRoute("it", strings.NewReader(c.text))
		if err != nil {
			t.Errorf("%s: %v", c.what, err)
			continue
		}
		lon, lat := r.Points[1].Degrees()
		if len(r.Points) != 2 || lon < 10.00099 || lat < 50.00099 || r.Name != c.name || (r.Times != nil) != c.timed {
			t.Errorf("%s: %+v", c.what, r)
		}
	}
}

func TestReadRouteWrong(t *testing.T) {
	for _, c := range [][2]string{
		{"", "neither GeoJSON nor GPX"},
		{"lon,lat\n", "neither GeoJSON nor GPX"},
		{`{"type":"LineString","coordinates":[[10,50],`, "not valid JSON"},
		{`{"type":"LineString","coordinates":[[10],[11,50]]}`, "point 1 of its LineString has no longitude and latitude"},
		{`{"type":"LineString","coordinates":"far"}`, "no list of positions"},
		{`{"type":"LineString","coordinates":[[10,50],[10,50]]}`, "the route has no length"},
		{`{"type":"LineString","coordinates":[[50,100],[10,50]]}`, "point 1: position lon 50, lat 100 is not on the globe"},
		{`{"type":"Polygon","coordinates":[]}`, "holds 0 LineStrings"},
		{`{"type":"GeometryCollection","geometries":[` + bareLine + "," + bareLine + `]}`, "holds 2 LineStrings"},
		{`<gpx><trk>`, "not valid GPX"},
		{`<kml></kml>`, "not valid GPX"},
		{`<gpx></gpx>`, "holds 0 routes and tracks"},
		{`<gpx><rte><rtept lat="50"/></rte></gpx>`, "point 1 has no lat and lon"},
	} {
		_, err := ReadRoute("it", strings.NewReader(c[0]))
		if err == nil || !strings.Contains(err.Error(), c[1]) || !strings.HasPrefix(err.Error(), "it: ") || strings.Contains(err.Error(), "\n") {
			t.Errorf("%q: got %v, want %q", c[0], err, c[1])
		}
	}
}

// FuzzReadRoute: whatever the bytes, a route is usable or refused.
func FuzzReadRoute(f *testing.F) {
	for _, s := range []string{bareLine, aTrack, aRoute} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		r, err := ReadRoute("it", strings.NewReader(string(text)))
		if err != nil {
			return
		}
		if len(r.Points) < 2 || r.check() != nil || r.Times != nil && len(r.Times) != len(r.Points) {
			t.Fatalf("%q became %+v", text, r)
		}
	})
}

func TestCorpusIsThere(t *testing.T) {
	files, err := filepath.Glob("testdata/fuzz/FuzzReadRoute/*")
	if err != nil || len(files) == 0 {
		t.Fatalf("no corpus: %v", err)
	}
}
