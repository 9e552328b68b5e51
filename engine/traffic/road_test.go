package traffic

import (
	"math"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

var bent = []geo.Point{{E: -200, N: 30}, {E: 10, N: 0}, {E: 150, N: 80}, {E: 300, N: 60}}

func roadOf(t *testing.T, line ...geo.Point) *Road {
	t.Helper()
	r, err := NewRoad(geo.NewFrame(geo.FromDegrees(-30, 45)), line)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// TestEmission: sound from where it is said to be made takes the time in which
// the vehicle got from there to where it is, by the speed of sound of the textbook
// (20.05·sqrt(T): 343.29 m/s at 20 °C), on a bent road, both ways, and standing.
func TestEmission(t *testing.T) {
	r := roadOf(t, bent...)
	sound := sensor.SoundSpeedAirMPS(273.15 + 20)
	if math.Abs(sound-343.29) > 0.005 {
		t.Fatalf("sound at 20 °C: %v m/s", sound)
	}
	e := newEar(r, Post{ID: "p", At: geo.Point{E: 40, N: -70}}, sound, 300)
	for _, v := range []float64{-40, -10, 0, 3, 25, 60} {
		for s := 0.0; s <= r.LengthM(); s += 7.3 {
			for piece := range bent[1:] { // wherever it begins to look
				at, d, found := e.emission(s, v, piece)
				if late := s - at - v*d/sound; math.Abs(late) > 1e-9 {
					t.Fatalf("at %v with %v m/s: emitted at %v, %v m away: off by %v m", s, v, at, d, late)
				}
				if o := e.offset(at, found); math.Abs(o.Norm()-d) > 1e-9 {
					t.Fatalf("at %v: distance %v, by place %v", s, d, o.Norm())
				}
				if inside := at >= r.fromM[found] && at < r.fromM[found+1]; !inside && at > 0 && at < r.LengthM() {
					t.Fatalf("at %v: emitted at %v, not on piece %d", s, at, found)
				}
			}
		}
	}
	deaf := newEar(r, Post{ID: "p", At: geo.Point{E: 40, N: -70}}, math.Inf(1), 300)
	if at, _, _ := deaf.emission(123, 25, 0); at != 123 {
		t.Errorf("without delay: emitted at %v", at)
	}
}

func TestRoad(t *testing.T) {
	r := roadOf(t, bent...)
	for s := 0.0; s <= r.LengthM(); s += 11 {
		at, _ := r.At(s)
		if back, away := r.Nearest(at); math.Abs(back-s) > 1e-9 || away > 1e-9 {
			t.Errorf("%v comes back as %v, %v away", s, back, away)
		}
	}
	for name, c := range map[string]struct {
		line []geo.Point
		says string
	}{
		"one point": {[]geo.Point{{}}, "1 points"},
		"twice":     {[]geo.Point{{}, {E: 100}, {E: 100}}, "points 2 and 3"},
		"short":     {[]geo.Point{{}, {E: 3}}, "3.0 m long"},
		"long":      {[]geo.Point{{}, {E: 3e5}}, "300000.0 m long"},
		"no number": {[]geo.Point{{}, {E: math.NaN()}}, "point 2"},
	} {
		if _, err := NewRoad(geo.Frame{}, c.line); err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// TestDoubts: a post that cannot tell where a vehicle is says so, and one that
// can does not.
func TestDoubts(t *testing.T) {
	along, across := math.Pi/2, 0.0
	for name, c := range map[string]struct {
		post Post
		says string
	}{
		"beside":       {Post{ID: "p", At: geo.Point{E: 300, N: 50}}, ""},
		"in line":      {Post{ID: "p", At: geo.Point{E: 300, N: 0.3}}, `post "p" stands in line with the road (0.3 m off)`},
		"beyond reach": {Post{ID: "p", At: geo.Point{E: 300, N: 500}}, "500 m from the road and hears nothing"},
		"axis along":   {Post{ID: "p", At: geo.Point{E: 300, N: 50}, AxisRad: &along}, ""},
		"axis across":  {Post{ID: "p", At: geo.Point{E: 300, N: 50}, AxisRad: &across}, "sounds alike on either side"},
	} {
		f, err := New(roadOf(t, geo.Point{}, geo.Point{E: 600}), []Post{c.post}, Model{})
		if err != nil {
			t.Fatal(err)
		}
		notes := ""
		for _, d := range f.doubts {
			notes += d.Words
		}
		if c.says == "" && notes != "" || !strings.Contains(notes, c.says) {
			t.Errorf("%s: %q", name, notes)
		}
	}
}
