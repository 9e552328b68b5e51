package sensor

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Every density, outliers included, integrates to 1 over what could have been
// measured. Seeds are fixed; sigmas and outlier shares are drawn.
func TestDensitiesIntegrateToOne(t *testing.T) {
	w := newWorld()
	rng := rand.New(rand.NewPCG(1, 2))
	beaconAt := geo.Point{E: -500, N: 700}
	beacon := Beacon{Position: w.frame.Inverse(beaconAt)}
	here := geo.Point{E: 400, N: 150}
	for trial := range 20 {
		out, heavy := 0.3*rng.Float64(), 0.2*rng.Float64()
		c := w.context(2, nil, here)
		qs := planeQuantities()
		if trial%2 == 1 {
			c.Quantities = qs
		} else {
			qs = nil
		}
		set := func(kind string) {
			c.Suite.Sensors = []Sensor{{Name: kind, Kind: kind, OutlierProbability: &out, HeavyProbability: heavy, HeavyFactor: 3, MaxRangeM: 4000}}
		}
		mean := []float64{0, 0, 0.7, 0}[:len(qs)]
		integrate := func(name string, lo, hi float64, n int, of func(z float64) Measurement) {
			t.Helper()
			sum := 0.0
			for i := range n {
				m := of(lo + (hi-lo)*(float64(i)+0.5)/float64(n))
				set(m.Kind())
				ls, err := Likelihoods(Event{Sensor: m.Kind(), Measurement: m}, c)
				if err != nil {
					t.Fatal(err)
				}
				switch l := ls[0].(type) {
				case filter.LinearLikelihood:
					sum += density(l, w.spot(l.Wants(), here), qs, mean)
				case filter.Likelihood:
					dst := []float64{0}
					l.LogLikelihood(dst, w.spot(l.Wants(), here))
					sum += math.Exp(dst[0])
				}
			}
			// Midpoints at two or more a sigma are exact to e^(-2π²·4) for
			// Gaussians (Poisson summation); the ends cut what lies beyond 6
			// sigma of a heavy part: 2e-9. 1e-6 has room.
			if got := sum * (hi - lo) / float64(n); !near(got, 1, 1e-6) {
				t.Errorf("trial %d: %s integrates to %v", trial, name, got)
			}
		}
		sigma := 20 * (0.5 + rng.Float64())
		integrate("range", 0, 4000, 1000, func(z float64) Measurement { return Range{beacon, z, sigma} })
		// Near the beacon: the exact form; z below 0 counts here, since the
		// normal part reaches there, and the flat part then spans the same.
		b := beaconAt
		beaconAt = geo.Point{E: here.E + 30, N: here.N}
		nearBeacon := Beacon{Position: w.frame.Inverse(beaconAt)}
		integrate("near range", -2000, 2000, 1000, func(z float64) Measurement { return Range{nearBeacon, z, sigma} })
		beaconAt = b
		for _, deg := range []float64{2 + 10*rng.Float64(), 20 + 40*rng.Float64()} {
			s := geo.Rad(deg)
			// A heavy part of three times 12° is cut at 180°, 5 sigma of it:
			// 6e-7 of its share, at most 0.2.
			integrate("bearing", -math.Pi, math.Pi, 720, func(z float64) Measurement { return Bearing{beacon, z, s} })
			integrate("post", -math.Pi, math.Pi, 720, func(z float64) Measurement { return AcousticBearing{"post", z, s} })
			integrate("line of microphones", -math.Pi, math.Pi, 720, func(z float64) Measurement { return AcousticBearing{"line", z, s} })
			if qs != nil && deg < 15 {
				integrate("heading", -math.Pi, math.Pi, 720, func(z float64) Measurement { return HeadingFix{z, s} })
			}
		}
		lo, hi := c.Suite.Vehicle.LowestM, c.Suite.Vehicle.HighestM
		integrate("clearance", lo, hi, 5000, func(z float64) Measurement { return Clearance{0, z, sigma} })
	}
}

// Whatever Check accepts gives terms that are numbers, and densities that are
// neither NaN nor +Inf: filter.Update panics on those.
func TestExtremesStayFinite(t *testing.T) {
	w := newWorld()
	at := geo.Point{E: 400, N: 150}
	here := w.frame.Inverse(at)
	var ms []Measurement
	for _, s := range []float64{minSigmaM, 1, maxSigmaM} {
		for _, p := range []geo.LonLat{here, w.frame.Inverse(geo.Point{E: 400.0000001, N: 150}), w.frame.Inverse(geo.Point{E: 1e6, N: -1e6})} {
			for _, d := range []float64{0, 1, maxFarM} {
				ms = append(ms, Range{Beacon{Position: p}, d, s})
			}
			ms = append(ms, Fix{p, s})
		}
		for _, d := range []float64{-maxLengthM, 0, maxLengthM} {
			ms = append(ms, Clearance{d, -d, s}, Sounding{DepthBelowTransducerM: 12000, TransducerDepthM: d, SigmaM: s})
		}
	}
	for _, s := range []float64{minSigmaDeg, 1, 14, 16, 1000, maxSigmaDeg} {
		for _, z := range []float64{-1e6 * 0.99, 0, 3, 1e6 * 0.99} {
			for _, p := range []geo.LonLat{here, w.frame.Inverse(geo.Point{E: 400.0000001, N: 150}), w.frame.Inverse(geo.Point{E: 1e6, N: -1e6})} {
				ms = append(ms, Bearing{Beacon{Position: p}, z, geo.Rad(s)})
			}
			ms = append(ms, AcousticBearing{"post", z, geo.Rad(s)}, AcousticBearing{"line", z, geo.Rad(s)}, HeadingFix{z, geo.Rad(s)})
		}
	}
	zero := 0.0
	for _, outlier := range []*float64{nil, &zero} {
		for _, m := range ms {
			if err := m.Check(1); err != nil {
				t.Fatal(err)
			}
			for _, qs := range [][]filter.Quantity{nil, planeQuantities()} {
				if m.Kind() == KindHeading && qs == nil {
					continue
				}
				c := w.context(2, qs, at)
				c.CellM = 0
				c.Suite.Sensors = []Sensor{{Name: "x", Kind: m.Kind(), OutlierProbability: outlier, Mounting: Mounting{ForwardM: 1}}, {Name: "y", Kind: m.Kind(), OutlierProbability: outlier}}
				for _, name := range []string{"x", "y"} {
					ls, err := Likelihoods(Event{Sensor: name, Measurement: m}, c)
					if err != nil {
						t.Fatal(err)
					}
					switch l := ls[0].(type) {
					case filter.LinearLikelihood:
						tm := terms(1, l.Rows(), max(len(qs), 2))
						l.Linearize(tm, w.spot(l.Wants(), at), qs, make([]float64, len(qs)))
						if !geo.Finite(tm.Residual...) || !geo.Finite(tm.Row...) || !geo.Finite(tm.Extra...) || math.IsInf(tm.Flat[0], 1) {
							t.Errorf("%+v: %+v", m, tm)
						}
					case filter.Likelihood:
						dst := []float64{0}
						l.LogLikelihood(dst, w.spot(l.Wants(), at))
						if math.IsNaN(dst[0]) || math.IsInf(dst[0], 1) {
							t.Errorf("%+v: %v", m, dst)
						}
					}
				}
			}
		}
	}
}
