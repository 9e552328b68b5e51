package logfile

import (
	"fmt"
	"math"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// A craft on a circle, speed and heading ten times a second: the reckoned way
// is the circle's, to the second order of the step.
func TestReckonsACircle(t *testing.T) {
	const mps, degPerS, seconds = 3.0, 6.0, 60 // once around
	var lines []string
	for i := range seconds*10 + 1 {
		s := float64(i) / 10
		lines = append(
			lines, fmt.Sprintf("GPZDA,1200%05.2f,01,05,2030,00,00", math.Mod(s, 60)),
			fmt.Sprintf("VWVHW,%.6f,T,,,%.6f,N,,", math.Mod(degPerS*s, 360), mps/metresPerSecond))
	}
	lines[len(lines)-2] = "GPZDA,120100.00,01,05,2030,00,00"
	g := readNMEA(t, log(lines...), "reckon: {}\nheading: {sensor: gyro}")
	east, north, farthest, n := 0.0, 0.0, 0.0, 0
	var to sensor.Time
	for _, ev := range g.events {
		m, ok := ev.Measurement.(sensor.Displacement)
		if !ok {
			continue
		}
		if to != 0 && m.Since != to {
			t.Fatalf("a gap before %v", clock(m.Since))
		}
		to = ev.Time
		east, north, n = east+m.EastM, north+m.NorthM, n+1
		farthest = math.Max(farthest, math.Hypot(east, north))
		if ev.Sensor != "log" {
			t.Fatalf("sensor %q", ev.Sensor)
		}
	}
	radius := mps / geo.Rad(degPerS)
	// The chord of a step falls short by the share (turn/2)²/2 at most.
	step := geo.Rad(degPerS) / 10
	if n != seconds*10 || math.Hypot(east, north) > 1e-3 || !near(farthest, 2*radius, 2*radius*step*step) {
		t.Errorf("%d increments, end at %v, %v, diameter %v, want %v", n, east, north, farthest, 2*radius)
	}
}

// The covariance is the documented one: along and across the heading.
func TestReckonCovariance(t *testing.T) {
	zda := func(s int) string { return fmt.Sprintf("GPZDA,1200%02d.00,01,05,2030,00,00", s) }
	const kn = metresPerSecond
	// 10 kn due east for 2 s; σ_v 0.1 m/s, σ_ψ 1°, τ 10 s; current 0.25 m/s, 300 s.
	v := 10 * kn
	along := 0.01*2*10 + 0.0625*2*300
	across := math.Pow(v*math.Pi/180, 2)*2*10 + 0.0625*2*300
	text := log(zda(0), "HEHDT,90,T", "VWVHW,,,,,10,N,,", zda(2), "VWVHW,,,,,10,N,,", "HEHDT,90,T")
	g := readNMEA(t, text, "reckon: {}\nheading: {from: [HDT]}")
	m := last(t, g)
	if !near(m.EastM, 2*v, 1e-9) || !near(m.NorthM, 0, 1e-9) || !near(m.CovM2[0], along, 1e-9) || !near(m.CovM2[2], across, 1e-9) || !near(m.CovM2[1], 0, 1e-9) {
		t.Errorf("%+v, want along %v, across %v", m, along, across)
	}
	// The bottom track has no current; its speed to starboard counts: 8 kn ahead
	// at 90°, 6 to starboard, which is south.
	text = log(zda(0), "HEHDT,90,T", "VMVBW,9,0,A,8,6,A", zda(2), "HEHDT,90,T", "VMVBW,9,0,A,8,6,A")
	g = readNMEA(t, text, "reckon: {speed_sigma_mps: 0.2, heading_sigma_deg: 2, correlation_s: 5}")
	m = last(t, g)
	along = 0.04 * 2 * 5
	across = along + math.Pow(v*2*math.Pi/180, 2)*2*5
	if !near(m.EastM, 16*kn, 1e-9) || !near(m.NorthM, -12*kn, 1e-9) || !near(m.CovM2[0], along, 1e-9) || !near(m.CovM2[2], across, 1e-9) {
		t.Errorf("%+v, want along %v, across %v", m, along, across)
	}
	if n := g.tally.PassedOver["VBW: reckoned over ground"]; n != 1 {
		// the first one through the water came before the one over ground
		t.Errorf("passed over %v", g.tally.PassedOver)
	}
	for _, ev := range g.events {
		if ev.Measurement.Kind() == sensor.KindSpeed {
			t.Error("a speed that is reckoned with is a measurement, too")
		}
	}
	// At 45° the axes turn.
	text = log(zda(0), "HEHDT,45,T", "VWVHW,,,,,10,N,,", zda(1), "VWVHW,,,,,10,N,,", "HEHDT,45,T")
	m = last(t, readNMEA(t, text, "reckon: {current_sigma_mps: 0.000001}\nheading: {from: [HDT], sigma_deg: 10}"))
	if !near(m.CovM2[0], m.CovM2[2], 1e-9) || !(m.CovM2[1] < 0) || !near(m.EastM, m.NorthM, 1e-12) {
		t.Errorf("%+v", m)
	}
}

func last(t *testing.T, g *got) sensor.Displacement {
	t.Helper()
	var m sensor.Displacement
	n := 0
	for _, ev := range g.events {
		if d, ok := ev.Measurement.(sensor.Displacement); ok {
			m, n = d, n+1
		}
	}
	if n != 1 {
		t.Fatalf("%d displacements: %+v, passed over %v", n, g.events, g.tally.PassedOver)
	}
	return m
}

// Without a fresh heading, or after ten seconds, nothing is reckoned.
func TestReckonGaps(t *testing.T) {
	zda := func(s int) string { return fmt.Sprintf("GPZDA,1200%02d.00,01,05,2030,00,00", s) }
	speed := "VWVHW,,,,,10,N,,"
	g := readNMEA(t, log(zda(0), speed, zda(1), "HEHDT,1,T", speed, zda(3), speed, zda(7), speed, zda(30), "HEHDT,1,T", speed), "reckon: {}")
	if last(t, g).Since != at("12:00:01") {
		t.Errorf("%+v", g.events)
	}
	want := map[string]int{"VHW: no heading to reckon with": 2, "VHW: the first of a displacement": 2}
	for k, n := range want {
		if g.tally.PassedOver[k] != n {
			t.Errorf("passed over %v, want %v", g.tally.PassedOver, want)
		}
	}
}
