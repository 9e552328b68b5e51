package session

import (
	"testing"

	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
)

// TestShed: after a wide start a session keeps the memory of what is left of it.
func TestShed(t *testing.T) {
	s := open(t, Config{Space: plane.Open(geo.LonLat{}, 50_000, 20), Start: Start{Kind: AtPoint, SigmaM: 3000}})
	if n := s.Size(); n < shedFrom {
		t.Fatalf("a start of %d cells", n)
	}
	for i := range 3 {
		at := sensor.Time(i+1) * 1e9
		for _, ev := range []sensor.Event{
			{Time: at, Sensor: "ins", Number: uint64(i), Measurement: sensor.Displacement{Since: at - 1e9, EastM: 1, CovM2: [3]float64{1, 0, 1}}},
			{Time: at, Sensor: "fix", Number: uint64(i), Measurement: sensor.Fix{SigmaM: 5}},
		} {
			if _, err := s.Add(ev); err != nil {
				t.Fatal(err)
			}
		}
	}
	s.Flush()
	if n, kept := s.Size(), cap(s.state.belief.Tiles.Mass); n > shedFrom/shedShare || kept > shedFrom || s.widest >= shedFrom {
		t.Errorf("%d cells in memory for %d; the widest is %d", n, kept, s.widest)
	}
}
