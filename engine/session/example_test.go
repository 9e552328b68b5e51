package session_test

import (
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/session"
)

// A boat starts somewhere within 50 m, runs east for two seconds, and hears a
// beacon. One increment comes out of order and twice, and one range with a
// clock that is wrong.
func Example() {
	origin := geo.FromDegrees(10, 50)
	sea := plane.Open(origin, 5000, 50)
	s, err := session.New(session.Config{
		Vehicle: "boat", Space: sea,
		Start: session.Start{Kind: session.AtPoint, Point: origin, SigmaM: 50},
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	const second = sensor.Time(1e9)
	start := 1_750_000_000 * second
	east := func(from, to sensor.Time, metres float64) sensor.Event {
		return sensor.Event{Time: start + to*second, Sensor: "inertial", Measurement: sensor.Displacement{
			Since: start + from*second, EastM: metres, CovM2: [3]float64{0.01, 0, 0.01},
		}}
	}
	hear := func(at sensor.Time) sensor.Event {
		beacon := sensor.Beacon{Position: sea.Frame().Inverse(geo.Point{E: 200})}
		return sensor.Event{Time: start + at*second, Sensor: "radio", Measurement: sensor.Range{Beacon: beacon, RangeM: 180, SigmaM: 2}}
	}
	for _, ev := range []sensor.Event{east(1, 2, 10), hear(2), east(0, 1, 10), east(0, 1, 10), hear(-90000)} {
		if _, err := s.Add(ev); err != nil {
			fmt.Println(err)
		}
	}
	for _, p := range s.Flush() {
		fmt.Printf("%d s: %.0f m east, sigma %.0f m east and %.0f m north, gap %v s, %s\n",
			(p.TimeNS-int64(start))/1e9, p.MeanFrame.E, math.Sqrt(p.CovFrame.EE), math.Sqrt(p.CovFrame.NN), p.GapS, p.Status)
	}
	accepted, refused := s.Counts()
	fmt.Println(accepted, "accepted,", refused, "refused")
	// Output:
	// too late: it is 90002 s before the latest event: check the sensor's clock
	// 1 s: 10 m east, sigma 50 m east and 50 m north, gap 0 s, located
	// 2 s: 27 m east, sigma 10 m east and 49 m north, gap 0 s, located
	// 4 accepted, 1 refused
}
