package sensor_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/sensor"
)

// TestRanksWithAnOffset: simulation-based calibration (Talts et al. 2018) of place
// and offset together. Start, offset, motion and measurements are drawn from the
// model; the truth's rank among nine draws of the posterior is uniform by
// Pearson's chi-squared at 0.1 %.
func TestRanksWithAnOffset(t *testing.T) {
	const seed, runs, draws, seconds = 21, 250, 9, 20
	const sigma, offset, drift = 1.5, 8.0, 0.3
	zero := 0.0
	suite := (&sensor.Suite{
		Vehicle: sensor.Vehicle{StretchMPerSqrtM: 1e-6, CornerSigmaM: 1e-6},
		Sensors: []sensor.Sensor{
			{Name: "log", Kind: sensor.KindSpeed, CorrelationS: &zero},
			{Name: "alt", Kind: sensor.KindClearance, OutlierProbability: &zero, Nuisances: []sensor.Nuisance{{Name: sensor.NuisanceAltimeterOffset, Sigma: offset, DriftPerSqrtS: drift}}},
		},
	}).For(1)
	qs := suite.Quantities(1)
	road := filtertest.NewRoad(gridCell, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 800}}}}, [][]filtertest.Link{nil})
	road.Height = func(_, n float64) (float64, float64, float64) { h, s := profile(n); return h, 0, s }
	rng := rand.New(rand.NewPCG(seed, 0))
	var places, offsets [draws + 1]float64
	for range runs {
		x, o := gridStart+gridStartS*rng.NormFloat64(), offset*rng.NormFloat64()
		b, err := filter.Seed(road, onRoadAt{gridStart, gridStartS}, qs, 1<<16)
		if err != nil {
			t.Fatal(err)
		}
		var w filter.Workspace
		m := &sensor.Motion{Suite: suite}
		for s := range seconds {
			from, to := sensor.Time(s)*1e9, sensor.Time(s+1)*1e9
			x += gridSpeed + gridWalk*rng.NormFloat64()
			o += drift * rng.NormFloat64()
			m.Reset(from, to)
			m.Add(sensor.Event{Time: to, Sensor: "log", Measurement: sensor.Speed{MPS: gridSpeed, SigmaMPS: gridWalk}}, from)
			step, err := m.Step(qs, 1, road.Frame(), sensor.Pose{})
			if err != nil {
				t.Fatal(err)
			}
			filter.Predict(b, road, step, &w)
			if s%2 == 0 {
				continue
			}
			h, _ := profile(x)
			ev := sensor.Event{Time: to, Sensor: "alt", Measurement: sensor.Clearance{ClearanceM: 100, AltitudeM: 100 + h + o + sigma*rng.NormFloat64(), SigmaM: sigma}}
			ls, err := sensor.Likelihoods(ev, sensor.Context{Suite: suite, Frame: road.Frame(), Dim: 1, Quantities: qs, CellM: gridCell, SincePreviousS: 2, TravelledM: gridSpeed})
			if err != nil {
				t.Fatal(err)
			}
			if _, err := filter.Update(b, road, ls[0], &w); err != nil {
				t.Fatal(err)
			}
		}
		rankX, rankO := 0, 0
		for range draws {
			i, u := 0, rng.Float64()
			for ; i < len(b.Mass)-1 && u >= b.Mass[i]; i++ {
				u -= b.Mass[i]
			}
			_, cell := filter.LineCell(b.Key[i])
			c := b.Cov[3*i : 3*i+3]
			n0, n1 := rng.NormFloat64(), rng.NormFloat64()
			l := math.Sqrt(c[0])
			if (float64(cell)+0.5)*gridCell+b.Mean[2*i]+l*n0 < x {
				rankX++
			}
			if b.Mean[2*i+1]+c[1]/l*n0+math.Sqrt(math.Max(0, c[2]-c[1]*c[1]/c[0]))*n1 < o {
				rankO++
			}
		}
		places[rankX]++
		offsets[rankO]++
	}
	for name, counts := range map[string][draws + 1]float64{"place": places, "offset": offsets} {
		const want = float64(runs) / (draws + 1)
		chi2 := 0.0
		for _, n := range counts {
			chi2 += (n - want) * (n - want) / want
		}
		p := distuv.ChiSquared{K: draws}.Survival(chi2)
		t.Logf("seed %d, %s: ranks %v, chi-squared %.1f, p %.3f", seed, name, counts, chi2, p)
		if p < 1e-3 {
			t.Errorf("seed %d: ranks of the %s are not uniform: %v", seed, name, counts)
		}
	}
}
