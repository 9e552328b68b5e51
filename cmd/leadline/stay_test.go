package main

import (
	"testing"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/wire"
)

// TestMoveTimes proves that a measurement's own time and that since when it holds
// move together, and nothing else does.
func TestMoveTimes(t *testing.T) {
	at := sensor.Time(time.Date(2030, 5, 1, 8, 0, 0, 0, time.UTC).UnixNano())
	ev := sensor.Event{Time: at + 1e9, Sensor: "odo", Number: 3, Measurement: sensor.Travel{Since: at, DistanceM: 5, SigmaM: 0.1}}
	m := wire.FromEvent(ev)
	moveTimes(m.ProtoReflect(), time.Hour)
	got, err := wire.ToEvent(m)
	if err != nil {
		t.Fatal(err)
	}
	want := ev
	want.Time += 3600e9
	want.Measurement = sensor.Travel{Since: at + 3600e9, DistanceM: 5, SigmaM: 0.1}
	if got != want {
		t.Errorf("moved to %+v, want %+v", got, want)
	}
}
