package forecast

import (
	"math"
	"testing"

	"leadline/engine/geo"
)

// TestHeightsOfAMap: hills that repeat are alike, ground that falls ever more
// steeply is not; and what a stretch tells is the inverse of its information.
func TestHeightsOfAMap(t *testing.T) {
	points := []geo.Point{{E: -1200}, {E: -600}, {E: 0}, {E: 150, N: 90}, {E: 9000}}
	o := WholeOptions{SpeedMPS: 50, StretchM: 480, LimitM: 100}
	const k = 2 * math.Pi / 600
	waves := func(e, n float64) (h, sE, sN float64) {
		se, ce := math.Sincos(k * e)
		sn, cn := math.Sincos(k * n)
		return 20*se + 20*sn, 20 * k * ce, 20 * k * cn
	}
	s, err := Heights(over(waves), parsed(t, flyingSuite), points, o)
	if err != nil {
		t.Fatal(err)
	}
	for i := range 3 { // each has two others exactly alike
		if math.Abs(s[i].Ambiguity-2./3) > 1e-6 {
			t.Errorf("spot %d: ambiguity %v, want 2/3", i, s[i].Ambiguity)
		}
	}
	if s[3].Ambiguity > 0.01 {
		t.Errorf("between the hills: ambiguity %v", s[3].Ambiguity)
	}
	if s[4].RMSM == s[4].RMSM || s[4].Ambiguity == s[4].Ambiguity {
		t.Errorf("off the map: %+v", s[4])
	}
	// At the origin: information along each axis from both stretches, half of them.
	var ee float64
	for i := range profileSteps {
		slope := 20 * k * math.Cos(k*(float64(i)-float64(profileSteps-1)/2)*20)
		ee += slope * slope / (9 / (9.6 / profileSteps))
	}
	ee = (ee + profileSteps*(20*k)*(20*k)/(9/(9.6/profileSteps))) / 2
	var en float64
	for i := range profileSteps {
		slope := 20 * k * math.Cos(k*(float64(i)-float64(profileSteps-1)/2)*20)
		en += 2 * slope * 20 * k / (9 / (9.6 / profileSteps))
	}
	en /= 2
	if want := math.Sqrt(2 * ee / (ee*ee - en*en)); math.Abs(s[2].RMSM-want) > 1e-6*want {
		t.Errorf("it leaves %v m, want %v", s[2].RMSM, want)
	}
	flat, err := Heights(over(flat), parsed(t, flyingSuite), points[:3], o)
	if err != nil || !math.IsInf(flat[0].RMSM, 1) || math.Abs(flat[0].Ambiguity-2./3) > 1e-9 {
		t.Errorf("flat ground: %+v, %v", flat, err)
	}
}
