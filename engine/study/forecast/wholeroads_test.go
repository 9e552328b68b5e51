package forecast_test

import (
	"math"
	"testing"

	"leadline/engine/study/forecast"
	"leadline/fixtures/study"
)

// TestRoadsOfAMap: every directed edge has a figure, a compass tells more than a
// gyro alone, and roads with turns tell more than the straightest.
func TestRoadsOfAMap(t *testing.T) {
	m := quillmere(t)
	gyro, err := forecast.Roads(m, suiteOf(t, study.CarSuite), forecast.WholeOptions{})
	if err != nil {
		t.Fatal(err)
	}
	compass, err := forecast.Roads(m, suiteOf(t, study.CarSuite+"  - {name: compass, kind: heading, noise: {sigma_deg: 3}}\n"), forecast.WholeOptions{})
	if err != nil {
		t.Fatal(err)
	}
	if len(gyro) != m.Charts() {
		t.Fatalf("%d of %d edges", len(gyro), m.Charts())
	}
	var a, b, least, most float64 = 0, 0, math.Inf(1), 0
	for i := range gyro {
		a, b = a+gyro[i].Ambiguity, b+compass[i].Ambiguity
		if !(gyro[i].Ambiguity >= 0 && gyro[i].Ambiguity < 1) || !(gyro[i].RMSM > 0) {
			t.Errorf("edge %d: %+v", i, gyro[i])
		}
		least, most = math.Min(least, gyro[i].RMSM), math.Max(most, gyro[i].RMSM)
	}
	if !(b < a) || !(least < most/2) {
		t.Errorf("ambiguities sum to %v with a gyro and %v with a compass; %v to %v m are left", a, b, least, most)
	}
}
