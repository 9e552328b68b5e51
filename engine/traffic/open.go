package traffic

import (
	"errors"
	"fmt"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Open starts a watch over the road that a suite describes, by its posts.
func Open(suite *sensor.Suite) (*Watch, error) {
	suite = suite.For(1)
	t := suite.Traffic
	if len(t.Road) == 0 {
		return nil, errors.New("the suite describes no road: give traffic.road, with the corners of its centreline")
	}
	first, last := t.Road[0].Position(), t.Road[len(t.Road)-1].Position()
	frame := geo.NewFrame(geo.LonLat{Lon: 0.5 * (first.Lon + last.Lon), Lat: 0.5 * (first.Lat + last.Lat)})
	var line []geo.Point
	for _, c := range t.Road {
		line = append(line, frame.Forward(c.Position()))
	}
	road, err := NewRoad(frame, line)
	if err != nil {
		return nil, fmt.Errorf("traffic.road: %w", err)
	}
	var posts []Post
	for _, p := range suite.Posts {
		post := Post{ID: p.ID, At: frame.Forward(p.Position())}
		if p.AxisDeg != nil {
			gamma, _ := frame.Convergence(post.At)
			axis := geo.Rad(*p.AxisDeg) - gamma
			post.AxisRad = &axis
		}
		posts = append(posts, post)
	}
	var lines []float64
	for _, l := range t.Lines {
		lines = append(lines, l.AtM)
	}
	f, err := New(road, posts, Model{
		Traffic: t, AirTemperatureC: *suite.Environment.AirTemperatureC, LateralM: suite.Vehicle.LateralSigmaM,
	}, lines...)
	if err != nil {
		return nil, err
	}
	w := NewWatch(f, suite.Vehicle.LateWindowS)
	w.suite = suite
	return w, nil
}

// ErrOther is a measurement that is none of a post's.
var ErrOther = errors.New("posts alone count here")

// Take takes an event of a watch that Open made: the bearing of a post. One that
// is refused changes nothing.
func (w *Watch) Take(ev sensor.Event) error {
	if b, ok := ev.Measurement.(sensor.AcousticBearing); ok && w.filter.ear(b.Post) == nil {
		w.unknown++
		w.unknownPost = b.Post
		return fmt.Errorf("post %q is none of this road's: name one of its posts, or add it to the suite", b.Post)
	}
	ev, err := w.suite.Prepare(ev)
	if err != nil {
		return err
	}
	b, ok := ev.Measurement.(sensor.AcousticBearing)
	if !ok {
		return fmt.Errorf("sensor %q sent a %s: %w", ev.Sensor, ev.Measurement.Kind(), ErrOther)
	}
	e := w.filter.ear(b.Post)
	gamma, _ := w.filter.road.frame.Convergence(e.post.At)
	return w.Add(Said{
		Time: ev.Time, Post: b.Post, Sensor: ev.Sensor, Number: ev.Number,
		Bearing: Bearing{Rad: b.BearingRad - gamma, SigmaRad: b.SigmaRad},
	})
}

// LonLat is where a vehicle's mean place is.
func (r *Road) LonLat(p geo.Point) geo.LonLat { return r.frame.Inverse(p) }

// TrueHeading is a direction in the frame as it is from true north at a place.
func (r *Road) TrueHeading(at geo.Point, headingRad float64) float64 {
	gamma, _ := r.frame.Convergence(at)
	return geo.WrapCompass(headingRad + gamma)
}
