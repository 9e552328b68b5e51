package sensor

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

func TestFormsChosen(t *testing.T) {
	w := newWorld()
	c := w.context(2, nil, geo.Point{})
	beacon := Beacon{Position: w.frame.Inverse(geo.Point{E: 500})}
	linear := func(m Measurement) bool {
		t.Helper()
		ls, err := Likelihoods(Event{Sensor: m.Kind(), Measurement: m}, c)
		if err != nil {
			t.Fatal(err)
		}
		_, ok := ls[0].(filter.LinearLikelihood)
		return ok
	}
	if !linear(Bearing{beacon, 1, geo.Rad(14.9)}) || linear(Bearing{beacon, 1, geo.Rad(15.1)}) {
		t.Error("the form of a bearing does not change at 15°")
	}
	if !linear(AcousticBearing{"post", 1, 0.05}) || linear(AcousticBearing{"line", 1, 0.05}) {
		t.Error("an ambiguous array is not taken exactly")
	}
	// A line of microphones east-west hears north and south alike.
	ls, err := Likelihoods(Event{Sensor: "acoustic_bearing", Measurement: AcousticBearing{"line", 0.3, 0.05}}, c)
	if err != nil {
		t.Fatal(err)
	}
	post := w.frame.Forward(c.Suite.Posts[1].Position())
	s, co := math.Sincos(0.3 - 0) // the post is 320 m off the middle: convergence 4e-5
	dst := make([]float64, 3)
	ls[0].(filter.Likelihood).LogLikelihood(dst, w.spot(filter.WantPosition,
		geo.Point{E: post.E + 100*s, N: post.N + 100*co}, geo.Point{E: post.E + 100*s, N: post.N - 100*co}, geo.Point{E: post.E - 100*s, N: post.N + 100*co}))
	if !near(dst[0], dst[1], 1e-3) || dst[2] > dst[0]-2 {
		t.Errorf("both sides and elsewhere: %v", dst)
	}
}

func TestSightings(t *testing.T) {
	w := newWorld()
	c := w.context(2, nil, geo.Point{})
	pt := func(e, n float64) geo.LonLat { return w.frame.Inverse(geo.Point{E: e, N: n}) }
	square := [][]geo.LonLat{
		{pt(0, 0), pt(100, 0), pt(100, 100), pt(0, 100), pt(0, 0)},
		{pt(40, 40), pt(60, 40), pt(60, 60), pt(40, 60)}, // a hole, not closed
	}
	for _, mistaken := range []float64{0, 0.2} {
		ls, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Area: square, Mistaken: mistaken}}, c)
		if err != nil {
			t.Fatal(err)
		}
		dst := make([]float64, 5)
		ls[0].(filter.Likelihood).LogLikelihood(dst, w.spot(filter.WantPosition,
			geo.Point{E: 10, N: 10}, geo.Point{E: 50, N: 50}, geo.Point{E: -1, N: 50}, geo.Point{E: 99, N: 1}, geo.Point{E: 50, N: 200}))
		in, out := math.Log(1-mistaken), math.Log(mistaken)
		for i, want := range []float64{in, out, out, in, out} {
			if dst[i] != want && !near(dst[i], want, 1e-15) {
				t.Errorf("mistaken %v, point %d: %v, want %v", mistaken, i, dst[i], want)
			}
		}
	}
	far := [][]geo.LonLat{{geo.FromDegrees(100, 0), geo.FromDegrees(101, 0), geo.FromDegrees(100, 1)}}
	if _, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Area: far}}, c); err == nil || !strings.Contains(err.Error(), "from the map's middle") {
		t.Errorf("an area on another continent: %v", err)
	}
	c = w.context(1, []filter.Quantity{{Name: filter.Along}}, geo.Point{})
	if _, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Road: "Nowhere"}}, c); err == nil || !strings.Contains(err.Error(), `"Nowhere"`) {
		t.Errorf("an unknown road: %v", err)
	}
	c.Roads = twoRoads{}
	ls, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Road: "Bent Lane", Mistaken: 0.1}}, c)
	if err != nil {
		t.Fatal(err)
	}
	dst := make([]float64, 5)
	ls[0].(filter.Likelihood).LogLikelihood(dst, w.spot(filter.WantPosition,
		geo.Point{E: 30, N: 40}, geo.Point{E: 60, N: 90}, geo.Point{E: 30, N: 40.2}, geo.Point{E: 60, N: 131}, geo.Point{E: 10, N: 100}))
	for i, want := range []float64{math.Log(0.9), math.Log(0.9), math.Log(0.1), math.Log(0.1), math.Log(0.1)} {
		if !near(dst[i], want, 1e-15) {
			t.Errorf("road, point %d: %v, want %v", i, dst[i], want)
		}
	}
	c = w.context(2, nil, geo.Point{})
	if _, err := Likelihoods(Event{Sensor: "sighting", Measurement: Sighting{Road: "High Street"}}, c); !errors.Is(err, ErrWrongSpace) {
		t.Errorf("a road on a plane: %v", err)
	}
}

// twoRoads has one named road of two corners and one without a name.
type twoRoads struct{}

func (twoRoads) Named(name string) []int32 {
	if name == "Bent Lane" {
		return []int32{1}
	}
	return nil
}

func (twoRoads) Polyline(chart int32) (eastM, northM []float64) {
	if chart == 1 {
		return []float64{0, 60, 60}, []float64{0, 80, 130}
	}
	return []float64{0, 100}, []float64{100, 100}
}

func TestBeamsAreThinned(t *testing.T) {
	var fan []Beam
	for i := -50; i <= 50; i++ {
		fan = append(fan, Beam{RightM: float64(i), DepthBelowTransducerM: 30, SigmaM: 0.3})
	}
	kept := thin(fan, 20)
	var at []float64
	for _, b := range kept {
		at = append(at, b.RightM)
	}
	// From the transducer outwards, port first because it comes first.
	if fmt.Sprint(at) != "[-20 20 -40 40]" {
		t.Errorf("kept %v", at)
	}
	if got := len(thin(fan, 0.5)); got != maxKeptBeams {
		t.Errorf("%d beams kept, at most %d may be", got, maxKeptBeams)
	}
	w := newWorld()
	ev := Event{Sensor: "sounding", Measurement: Sounding{DepthBelowTransducerM: 30, SigmaM: 0.3, Beams: fan}}
	for _, c := range []struct {
		qs   []filter.Quantity
		pose float64
		want int
	}{{nil, NoHeading, 1}, {nil, 0.01, 5}, {planeQuantities(), NoHeading, 5}} {
		ctx := w.context(2, c.qs, geo.Point{})
		ctx.Pose.HeadingVar = c.pose
		ls, err := Likelihoods(ev, ctx)
		if err != nil || len(ls) != c.want {
			t.Errorf("%d likelihoods, want %d (%v)", len(ls), c.want, err)
		}
	}
}

// The same event and context give the same bits.
func TestSameBits(t *testing.T) {
	w := newWorld()
	for _, ev := range w.linears() {
		if ev.Measurement.Kind() == KindBarometer {
			continue
		}
		var first string
		for range 3 {
			qs := planeQuantities()
			ls, err := Likelihoods(ev, w.context(2, qs, geo.Point{E: 400, N: 150}))
			if err != nil {
				t.Fatal(err)
			}
			text := ""
			for _, l := range ls {
				lin := l.(filter.LinearLikelihood)
				tm := terms(1, lin.Rows(), 4)
				lin.Linearize(tm, w.spot(lin.Wants(), geo.Point{E: 400, N: 150}), qs, []float64{0, 0, 0.7, 0})
				for _, v := range append(append(tm.Residual, tm.Row...), tm.Extra...) {
					text += fmt.Sprintf("%x ", math.Float64bits(v))
				}
			}
			if first == "" {
				first = text
			}
			if text != first {
				t.Errorf("%s: %s, then %s", ev.Sensor, first, text)
			}
		}
	}
}
