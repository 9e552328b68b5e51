package network_test

import (
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/fixtures/outside"
)

// plain hides that a map finds what is near and keeps its survey.
type plain struct{ filter.LineSpace }

// TestSeedFindsTheSame proves that a start looked up on a map is the one that trying
// every chart gives, bit for bit, and that the survey that is kept is the one taken.
func TestSeedFindsTheSame(t *testing.T) {
	outside.Path(t, "large-network.json")
	m, err := city()
	if err != nil {
		t.Fatal(err)
	}
	qs := []filter.Quantity{{Name: filter.Along}}
	all := filter.SurveyOf(m)
	if got := m.Survey(); got != all || !(all.LengthM > 0) {
		t.Errorf("survey %+v, taken %+v", got, all)
	}
	const seed = 5
	rng := rand.New(rand.NewPCG(seed, 1))
	d := all.Box.Max.Sub(all.Box.Min)
	somewhere, nowhere := 0, 0
	for i := range 120 {
		p := geo.Point{E: all.Box.Min.E + (1.4*rng.Float64()-0.2)*d.E, N: all.Box.Min.N + (1.4*rng.Float64()-0.2)*d.N}
		sigma := math.Pow(10, 0.3+2.4*rng.Float64()) // 2 to 500 m: beyond nearbyM, too
		prior := filter.AtPoint{Point: p, SigmaM: sigma}
		a, errA := filter.Seed(m, prior, qs, 1<<20)
		b, errB := filter.Seed(plain{m}, prior, qs, 1<<20)
		if (errA == nil) != (errB == nil) {
			t.Fatalf("seed %d, %d: %v, tried one after the other %v", seed, i, errA, errB)
		}
		if errA != nil {
			nowhere++
			continue
		}
		somewhere++
		if !reflect.DeepEqual(a, b) {
			t.Errorf("seed %d, %d: a start at %+v of %v m has %d Gaussians, tried one after the other %d", seed, i, p, sigma, len(a.Key), len(b.Key))
		}
	}
	if somewhere < 20 || nowhere < 2 {
		t.Errorf("%d starts on the map and %d beside it: too few to say anything", somewhere, nowhere)
	}
}

// BenchmarkSeedAtPoint is the start of a vehicle that is known to 20 m, in a city.
func BenchmarkSeedAtPoint(b *testing.B) {
	outside.Path(b, "large-network.json")
	m, err := city()
	if err != nil {
		b.Fatal(err)
	}
	box := m.Survey().Box
	at := filter.AtPoint{Point: geo.Point{E: (box.Min.E + box.Max.E) / 2, N: (box.Min.N + box.Max.N) / 2}, SigmaM: 20}
	qs := []filter.Quantity{{Name: filter.Along}}
	for name, space := range map[string]filter.LineSpace{"looked up": m, "tried": plain{m}} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if _, err := filter.Seed(space, at, qs, 1<<20); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
