package sweep

import (
	"reflect"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// TestSettled: events that go into a file come back as they were, from any number on.
func TestSettled(t *testing.T) {
	var s settled
	defer s.drop()
	var all []sensor.Event
	for i := range 2*mostSettled + 1500 {
		ev := sensor.Event{Time: sensor.Time(i), Sensor: "log", Number: uint64(i), Measurement: sensor.Displacement{Since: sensor.Time(i - 1), EastM: float64(i), CovM2: [3]float64{1, 0, 1}}}
		if i%3 == 0 {
			ev.Measurement = sensor.Fix{Position: geo.FromDegrees(float64(i%90), 10), SigmaM: 5}
		}
		all = append(all, ev)
	}
	for i := 0; i < len(all); i += 300 {
		s.add(all[i:min(i+300, len(all))])
	}
	if s.Len() != len(all) || s.file == nil || len(s.events) > mostSettled+300 {
		t.Fatalf("%d of %d, %d of them in memory", s.Len(), len(all), len(s.events))
	}
	for at := 0; at < len(all); {
		got, err := s.Read(at)
		if err != nil || len(got) == 0 || !reflect.DeepEqual(got, all[at:at+len(got)]) {
			t.Fatalf("from %d: %d events, %v", at, len(got), err)
		}
		at += max(1, len(got)/2)
	}
}
