package roadfile

import (
	"fmt"
	"math"
	"reflect"
	"strings"
	"testing"

	"leadline/network"
)

// parse reads a text.
func parse(tb testing.TB, text string, opt Options) (*network.Map, Notes, error) {
	tb.Helper()
	return ReadFrom(strings.NewReader(text), opt)
}

func mustParse(tb testing.TB, text string, opt Options) (*network.Map, Notes) {
	tb.Helper()
	m, notes, err := parse(tb, text, opt)
	if err != nil {
		tb.Fatalf("%v\n%s", err, text)
	}
	return m, notes
}

// lonLat is a place, given in metres from 30° W, 45° N, in degrees to 1e-9.
func lonLat(east, north float64) string {
	return fmt.Sprintf("[%.9f,%.9f]", -30+east/78846.8, 45+north/111131.8)
}

// feature is a LineString feature with the given properties and east, north
// pairs in metres.
func feature(properties string, eastNorth ...float64) string {
	var p []string
	for i := 0; i < len(eastNorth); i += 2 {
		p = append(p, lonLat(eastNorth[i], eastNorth[i+1]))
	}
	return fmt.Sprintf(`{"type":"Feature","properties":{%s},"geometry":{"type":"LineString","coordinates":[%s]}}`,
		properties, strings.Join(p, ","))
}

func collection(features ...string) string {
	return `{"type":"FeatureCollection","features":[` + strings.Join(features, ",\n") + `]}`
}

// TestGeoJSONShapes proves that every form RFC 7946 allows is read.
func TestGeoJSONShapes(t *testing.T) {
	line := `[[-30,45],[-30.001,45.001]]`
	other := `[[-30.001,45.001],[-30.002,45.002,17.5]]`
	for name, text := range map[string]string{
		"bare line":             `{"type":"LineString","coordinates":` + line + `}`,
		"members in any order":  `{"coordinates":` + line + `,"bbox":[1,2,3,4],"type":"LineString"}`,
		"bare lines":            `{"type":"MultiLineString","coordinates":[` + line + `,` + other + `]}`,
		"bare collection":       `{"type":"GeometryCollection","geometries":[{"type":"Point","coordinates":[1,2]},{"type":"LineString","coordinates":` + line + `}]}`,
		"feature":               `{"type":"Feature","id":7,"properties":null,"geometry":{"type":"LineString","coordinates":` + line + `}}`,
		"features before type":  `{"features":[{"type":"Feature","properties":{},"geometry":{"type":"LineString","coordinates":` + line + `}}],"type":"FeatureCollection"}`,
		"a byte order mark":     "\ufeff \n" + `{"type":"LineString","coordinates":` + line + `}`,
		"foreign members":       `{"type":"LineString","coordinates":` + line + `,"x":{"y":[1,"]"]}}`,
		"null geometry beside":  collection(`{"type":"Feature","properties":{},"geometry":null}`, feature("", 0, 0, 100, 0)),
		"a crs of the old kind": `{"type":"LineString","crs":{"type":"name","properties":{"name":"urn:ogc:def:crs:OGC:1.3:CRS84"}},"coordinates":` + line + `}`,
	} {
		t.Run(name, func(t *testing.T) {
			m, notes := mustParse(t, text, Options{})
			if m.Charts() < 2 || notes.Lines < 1 {
				t.Errorf("%d charts, %+v", m.Charts(), notes)
			}
		})
	}
}

// TestBadGeoJSON proves that bad input gets one error that says where it is
// and what is wrong.
func TestBadGeoJSON(t *testing.T) {
	good := feature("", 0, 0, 100, 0)
	deep := `{"type":"LineString","coordinates":[[-30,45],[-30.001,45]]}`
	for range maxNesting + 1 {
		deep = `{"type":"GeometryCollection","geometries":[` + deep + `]}`
	}
	for _, c := range []struct{ name, text, want string }{
		{"empty", "", "the file is empty"},
		{"white space", " \n\t", "white space"},
		{"something else", "PK\x03\x04", "neither GeoJSON, nor OpenStreetMap"},
		{"an array", "[1,2]", "an object in braces"},
		{"truncated", collection(good, good)[:200], "truncated"},
		{"broken", `{"type":"FeatureCollection","features":[{"type":"Feature" "x"]}`, "not valid JSON"},
		{"trailing", good + good, "more after the end"},
		{"no type", `{"coordinates":[[1,2],[3,4]]}`, `type ""`},
		{"unknown type", `{"type":"Topology","arcs":[]}`, `"Topology"`},
		{"features of something else", `{"type":"Feature","features":[]}`, "features member"},
		{"no features", `{"type":"FeatureCollection"}`, "no features member"},
		{"features that are none", `{"type":"FeatureCollection","features":3}`, "not an array"},
		{"a feature that is none", collection(good, `{"type":"LineString"}`), "feature 1: its type is"},
		{"nothing but points", collection(`{"type":"Feature","properties":{},"geometry":{"type":"Point","coordinates":[1,2]}}`), "no roads found"},
		{"no lines at all", collection(), "no roads found"},
		{"swapped", collection(good, `{"type":"Feature","properties":{},"geometry":{"type":"LineString","coordinates":[[45,-130],[45,-131]]}}`), "feature 1: vertex 0: longitude 45, latitude -130 is not on the globe: they look swapped"},
		{"metres", `{"type":"LineString","coordinates":[[500000,4649776],[500100,4649776]]}`, "look like metres"},
		{"off the globe", `{"type":"LineString","coordinates":[[-30,45],[190,45]]}`, "vertex 1: longitude 190, latitude 45 is not on the globe"},
		{"huge number", `{"type":"LineString","coordinates":[[-30,45],[1e999,45]]}`, "vertex 1: [1e999,45] is no position"},
		{"null for a number", `{"type":"LineString","coordinates":[[-30,45],[null,45]]}`, "vertex 1"},
		{"one number", `{"type":"LineString","coordinates":[[-30,45],[-30]]}`, "vertex 1: [-30] has one number"},
		{"text for a position", `{"type":"LineString","coordinates":[[-30,45],"x"]}`, "vertex 1"},
		{"coordinates missing", `{"type":"LineString"}`, "coordinates are missing"},
		{"coordinates an object", `{"type":"LineString","coordinates":{"a":1}}`, "want an array"},
		{"a height in space", `{"type":"LineString","coordinates":[[-30,45,1e6],[-30,45.1,0]]}`, "vertex 0: height"},
		{"nested too deep", deep, "nested more than 8 deep"},
		{"brackets without end", `{"type":"LineString","coordinates":` + strings.Repeat("[", 100000), "at byte"},
		{"another crs", `{"type":"LineString","crs":{"type":"name","properties":{"name":"EPSG:3857"}},"coordinates":[[1,2],[3,4]]}`, "reproject"},
		{"a line of no length", `{"type":"LineString","coordinates":[[-30,45],[-30,45]]}`, "no roads found"},
		{"stray coordinates", collection(good, `{"type":"Feature","properties":{},"geometry":{"type":"LineString","coordinates":[[0,0],[0,0.001]]}}`), "stray coordinates"},
		{"properties that are none", collection(`{"type":"Feature","properties":[1],"geometry":null}`), "feature 0: its properties"},
		{"no_turn_to without ids", collection(feature(`"no_turn_to":[{}]`, 0, 0, 100, 0)), "feature 0: no_turn_to"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, _, err := parse(t, c.text, Options{})
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Fatalf("error is %v, want one with %q", err, c.want)
			}
			if strings.Contains(err.Error(), "\n") || len(err.Error()) > 400 {
				t.Errorf("the error is not one readable line: %v", err)
			}
		})
	}
	if _, _, err := parse(t, collection(good), Options{MaxBytes: 50}); err == nil || !strings.Contains(err.Error(), "truncated") {
		t.Errorf("beyond the size bound: %v", err)
	}
	if _, _, err := Read(townPath, Options{MaxBytes: 50}); err == nil || !strings.Contains(err.Error(), "raise the bound") {
		t.Errorf("beyond the size bound: %v", err)
	}
	for _, opt := range []Options{{JoinM: math.NaN()}, {JoinM: 51}, {MaxBytes: -1}, {Map: network.Options{CellM: -1}}, {Map: network.Options{UTurnWeight: 1}}} {
		if _, _, err := parse(t, collection(good), opt); err == nil {
			t.Errorf("options %+v were accepted", opt)
		}
	}
}

// ways returns for each road the directions in which it may be driven, by the
// heading of its first chart in quarters: "E", "W", "EW".
func ways(m *network.Map) string {
	s := ""
	for c := range int32(m.Charts()) {
		a, b := m.Ends(c)
		if b.E > a.E {
			s += "E"
		} else {
			s += "W"
		}
	}
	return s
}

// TestOneWay proves how oneway is read, -1 and what is implied included.
func TestOneWay(t *testing.T) {
	for properties, want := range map[string]string{
		``:                                     "EW",
		`"oneway":"no"`:                        "EW",
		`"oneway":"yes"`:                       "E",
		`"oneway":true`:                        "E",
		`"oneway":1`:                           "E",
		`"oneway":"-1"`:                        "W",
		`"oneway":-1`:                          "W",
		`"oneway":"reversible"`:                "EW",
		`"oneway":"perhaps"`:                   "EW",
		`"highway":"motorway"`:                 "E",
		`"highway":"motorway","oneway":"no"`:   "EW",
		`"junction":"roundabout"`:              "E",
		`"junction":"circular","oneway":"-1"`:  "W",
		`"highway":"primary","oneway":"false"`: "EW",
	} {
		m, _ := mustParse(t, collection(feature(properties, 0, 0, 100, 0)), Options{})
		if got := ways(m); got != want {
			t.Errorf("{%s} is open %s, want %s", properties, got, want)
		}
	}
}

// TestSpeedLimit proves how maxspeed is read.
func TestSpeedLimit(t *testing.T) {
	for v, want := range map[string]float64{
		"50": 50 / 3.6, "30 mph": 30 * 0.44704, "30mph": 30 * 0.44704, "80 km/h": 80 / 3.6, "10 knots": 18.52 / 3.6,
		"": 0, "none": 0, "walk": 0, "GB:nsl_single": 0, "-5": 0, "1e9": 0, "NaN": 0, "50;70": 0,
	} {
		if got := speedLimit(v); math.Abs(got-want) > 1e-12 {
			t.Errorf("%q is %v m/s, want %v", v, got, want)
		}
	}
}

// weak returns the number of weakly connected components.
func weak(m *network.Map) int {
	_, _, w, _ := m.Components()
	return len(w)
}

// TestJoining proves where lines join and where not: in each case a road from
// west to east along the axis and another one.
func TestJoining(t *testing.T) {
	main := feature(`"id":1`, -100, 0, 0, 0, 100, 0)
	bridge := `"bridge":"yes","layer":1`
	for _, c := range []struct {
		name   string
		other  string
		opt    Options
		joined bool
		roads  int
		ends   int // as counted in the notes
	}{
		{"a shared vertex", feature("", 0, 0, 0, 80), Options{}, true, 3, 0},
		{"a shared vertex in both middles", feature("", 0, -50, 0, 0, 0, 80), Options{}, true, 4, 0},
		{"a vertex that is off by half a nanodegree", `{"type":"Feature","properties":{},"geometry":{"type":"LineString","coordinates":[[-30.0000000005,45.0000000005],[-30,45.001]]}}`, Options{}, true, 3, 0},
		{"an end near an end", feature("", 100.3, 0.3, 100, 80), Options{}, true, 1, 1}, // they become one road
		{"an end near a vertex", feature("", 0.2, 0.3, 0, 80), Options{}, true, 3, 1},
		{"an end 0.45 m from the middle", feature("", 50, 0.45, 50, 80), Options{}, true, 3, 1},
		{"an end 0.45 m beyond the middle", feature("", 50, -0.45, 50, 80), Options{}, true, 3, 1},
		{"an end 0.55 m from the middle", feature("", 50, 0.55, 50, 80), Options{}, false, 2, 0},
		{"the same with a tolerance of 0.6 m", feature("", 50, 0.55, 50, 80), Options{JoinM: 0.6}, true, 3, 1},
		{"an end on the middle, joining switched off", feature("", 50, 0, 50, 80), Options{JoinM: -1}, false, 2, 0},
		{"a crossing", feature("", 50, -80, 50, 80), Options{}, false, 2, 0},
		{"a crossing, to be split", feature("", 50, -80, 50, 80), Options{SplitCrossings: true}, true, 4, 0},
		{"a bridge over it, to be split", feature(bridge, 50, -80, 50, 80), Options{SplitCrossings: true}, false, 2, 0},
		{"a bridge that ends over its middle", feature(bridge, 50, 0.1, 50, 80), Options{}, false, 2, 0},
		{"a bridge that ends near its end", feature(bridge, 100.2, 0.1, 150, 80), Options{}, true, 2, 1},
		{"a bridge that shares its vertex", feature(bridge, 0, 0, 0, 80), Options{}, true, 3, 0},
	} {
		t.Run(c.name, func(t *testing.T) {
			for _, text := range []string{collection(main, c.other), collection(c.other, main)} {
				m, notes := mustParse(t, text, c.opt)
				if got := weak(m) == 1; got != c.joined || m.Charts() != 2*c.roads || notes.JoinedEnds != c.ends {
					t.Errorf("joined %t in %d roads with %d ends joined, want %t, %d, %d", got, m.Charts()/2, notes.JoinedEnds, c.joined, c.roads, c.ends)
				}
			}
		})
	}
}

// TestStub proves that a short stub is not joined to the road it leaves.
func TestStub(t *testing.T) {
	m, notes := mustParse(t, collection(feature("", -100, 0, 0, 0, 100, 0), feature("", 0, 0, 0.3, 0.35)), Options{})
	if notes.JoinedEnds != 0 || m.Charts() != 6 {
		t.Errorf("%d ends joined, %d charts", notes.JoinedEnds, m.Charts())
	}
}

// TestRepeated proves that a line given twice is one road, open in the
// directions of both, with no junctions at its vertices.
func TestRepeated(t *testing.T) {
	m, notes := mustParse(t, collection(
		feature(`"oneway":"yes"`, 0, 0, 40, 10, 100, 0), feature(`"oneway":"yes"`, 100, 0, 40, 10, 0, 0)), Options{})
	if m.Charts() != 2 || m.Twin(0) != 1 || notes.Repeated != 2 || notes.ThroughJoints != 1 {
		t.Errorf("%d charts, %+v", m.Charts(), notes)
	}
}

// TestThrough proves that a road cut into features is one again where nothing
// else meets it and nothing changes, whichever way its pieces were drawn.
func TestThrough(t *testing.T) {
	for name, c := range map[string]struct {
		text   string
		charts int
	}{
		"in one direction": {collection(feature(`"name":"A"`, 0, 0, 100, 0), feature(`"name":"A"`, 100, 0, 200, 0)), 2},
		"head to head":     {collection(feature(`"name":"A"`, 0, 0, 100, 0), feature(`"name":"A"`, 200, 0, 150, 3, 100, 0)), 2},
		"back to back":     {collection(feature(`"name":"A"`, 100, 0, 0, 0), feature(`"name":"A"`, 100, 0, 200, 0)), 2},
		"another name":     {collection(feature(`"name":"A"`, 0, 0, 100, 0), feature(`"name":"B"`, 100, 0, 200, 0)), 4},
		"one way":          {collection(feature(`"oneway":"yes"`, 0, 0, 100, 0), feature(`"oneway":"-1"`, 200, 0, 100, 0)), 1},
		"one way at odds":  {collection(feature(`"oneway":"yes"`, 0, 0, 100, 0), feature(`"oneway":"yes"`, 200, 0, 100, 0)), 2},
		"a ring":           {collection(feature("", 0, 0, 100, 0, 100, 100), feature("", 100, 100, 0, 100, 0, 0)), 2},
	} {
		t.Run(name, func(t *testing.T) {
			m, _ := mustParse(t, c.text, Options{})
			if m.Charts() != c.charts {
				t.Errorf("%d charts, want %d", m.Charts(), c.charts)
			}
		})
	}
}

// TestNoTurnTo proves the property of ours: from a feature one may not turn
// into another, but the other way round one may.
func TestNoTurnTo(t *testing.T) {
	text := collection(
		`{"type":"Feature","id":"a","properties":{"no_turn_to":["b",17]},"geometry":{"type":"LineString","coordinates":[`+lonLat(-100, 0)+`,`+lonLat(0, 0)+`]}}`,
		`{"type":"Feature","id":"b","properties":{},"geometry":{"type":"LineString","coordinates":[`+lonLat(0, 0)+`,`+lonLat(0, 100)+`]}}`,
		`{"type":"Feature","id":17,"properties":{"name":"seventeen"},"geometry":{"type":"LineString","coordinates":[`+lonLat(0, 0)+`,`+lonLat(0, -100)+`]}}`,
		`{"type":"Feature","properties":{"@id":"d"},"geometry":{"type":"LineString","coordinates":[`+lonLat(0, 0)+`,`+lonLat(100, 0)+`]}}`,
	)
	m, notes := mustParse(t, text, Options{})
	if notes.Bans != 2 || notes.UnusedBans != 0 {
		t.Errorf("%d bans, %d unused", notes.Bans, notes.UnusedBans)
	}
	leads := func(feature string, east bool) (to []string) {
		for c := range int32(m.Charts()) {
			p, q := m.Ends(c)
			if m.Feature(c) == feature && (q.Sub(p).E > 1) == east && q.Norm() < p.Norm() {
				next, _ := m.Lines(0).Forward.Of(c)
				for _, n := range next {
					to = append(to, m.Feature(n))
				}
			}
		}
		return to
	}
	// The frame's origin is the middle of the four roads, their junction.
	if got := leads("a", true); fmt.Sprint(got) != "[d]" {
		t.Errorf("a leads to %v, want d alone", got)
	}
	if got := leads("b", false); fmt.Sprint(got) != "[a 17 d]" {
		t.Errorf("b leads to %v, want a, 17, d", got)
	}
}

// TestSameAgain proves that reading a file twice gives the same map: nothing
// depends on the order of a hash table or on an address.
func TestSameAgain(t *testing.T) {
	for _, opt := range []Options{{}, {SplitCrossings: true, JoinM: 4}} {
		first, notes := readTown(t, opt)
		for range 5 {
			m, again := readTown(t, opt)
			if !reflect.DeepEqual(again, notes) {
				t.Errorf("notes %+v, then %+v", notes, again)
			}
			sameColumns(t, m, first)
		}
	}
}

// FuzzGeoJSON looks for texts that make reading panic or hang, or that give a
// map which is not sound.
func FuzzGeoJSON(f *testing.F) {
	f.Add([]byte(collection(feature(`"highway":"primary","oneway":"-1"`, 0, 0, 100, 0), feature("", 50, 0.2, 50, 80))))
	f.Add([]byte(`{"type":"MultiLineString","coordinates":[[[1,2,3],[1,2.001,4]],[[1.0005,2],[1.0005,2.001]]]}`))
	f.Add([]byte(`{"type":"GeometryCollection","geometries":[{"type":"LineString","coordinates":[[180,0],[-180,0.001],[179.9,89.9]]}]}`))
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) > 1<<16 {
			return
		}
		m, _, err := ReadFrom(strings.NewReader(string(text)), Options{SplitCrossings: len(text)%2 == 0, Map: network.Options{CellM: 10}})
		if err != nil {
			if strings.TrimSpace(err.Error()) == "" {
				t.Fatal("an error without words")
			}
			return
		}
		walk(m)
	})
}
