package main

import (
	"math"
	"math/rand/v2"

	"leadline/terrain"
)

// inventRelief makes hills of 60 waves, 1.5 to 8 km long, on 801 × 801 samples
// about 30 m apart, in the open Atlantic. No place is meant.
//
// Draws: for each wave, direction and phase uniform, length log-uniform.
func inventRelief(seed uint64) (*terrain.Raster, error) {
	const n, step = 801, 1.0 / 3600
	rng := rand.New(rand.NewPCG(seed, 0x7265_6c69_6566)) // "relief"
	type wave struct{ e, n, phase, amplitudeM float64 }
	waves := make([]wave, 60)
	for i := range waves {
		dir, phase := 2*math.Pi*rng.Float64(), 2*math.Pi*rng.Float64()
		lengthM := 1500 * math.Pow(8000.0/1500, rng.Float64())
		k := 2 * math.Pi / lengthM
		waves[i] = wave{k * math.Sin(dir), k * math.Cos(dir), phase, 40 * lengthM / 8000}
	}
	heights := make([]float32, n*n)
	const eastM, northM = 21.9, 30.9 // a second of arc at 45° north
	for r := range n {
		for c := range n {
			h := 600.0
			for _, v := range waves {
				h += v.amplitudeM * math.Sin(v.e*float64(c)*eastM-v.n*float64(r)*northM+v.phase)
			}
			heights[r*n+c] = float32(h)
		}
	}
	crs, err := terrain.FromEPSG(4326)
	if err != nil {
		return nil, err
	}
	return terrain.New(
		terrain.Grid{CRS: crs, Cols: n, Rows: n, FirstX: -30, FirstY: 45, StepX: step, StepY: -step}, heights,
		terrain.Meta{VerticalDatum: "invented", SigmaM: 1, Source: "INVENTED relief: no place is meant", Licence: "Apache-2.0"})
}
