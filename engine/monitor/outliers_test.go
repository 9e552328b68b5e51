package monitor

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/kernel"
)

// withOutliers is a sensor whose error, in its sigmas, is one of an even
// distribution 2000 wide in one of fifty measurements: the score of an error, and
// how much it speaks for twice the spread.
func withOutliers(x float64) (z, ratio float64) {
	const part, wide = 0.02, 2000.0
	tail := (1-part)*kernel.NormalUpper(math.Abs(x)) + part*math.Max(0, 0.5-math.Abs(x)/wide)
	ratio = math.Log(((1-part)*0.5*kernel.NormalDensity(x/2) + part/wide) / ((1-part)*kernel.NormalDensity(x) + part/wide))
	return math.Copysign(-kernel.NormalQuantile(math.Max(tail, 1e-300)), x), ratio
}

// TestOutliersHideNothing: of forty fixes, two components each, with twice the noise
// that is stated, and outliers allowed for, 95 % of drives are told within ten
// minutes with a false alarm in 1000 hours; by their scores alone four in five.
// With noise and outliers as stated there are no more false alarms than were asked
// for, within 4 standard errors, and at least half as many.
func TestOutliersHideNothing(t *testing.T) {
	const seed, drives, fixes = 51, 2000, 40
	rng := rand.New(rand.NewPCG(seed, 0))
	said, saidByScores := 0, 0
	for range drives {
		by, byScores := chart{what: spread}, chart{what: spread}
		for i := range 2 * fixes {
			z, ratio := withOutliers(2 * rng.NormFloat64())
			at := int64(float64(i) * 7.5e9)
			by.add(at, widening(z, []float64{ratio}, 0), 3.6e6)
			byScores.take(at, z, 3.6e6)
		}
		if by.raised > 0 {
			said++
		}
		if byScores.raised > 0 {
			saidByScores++
		}
	}
	share, scores := float64(said)/drives, float64(saidByScores)/drives
	t.Logf("seed %d: told in %.3f of drives, by scores alone in %.3f", seed, share, scores)
	if share < 0.95 || scores > 0.9 {
		t.Errorf("told in %.3f of drives, by scores alone in %.3f", share, scores)
	}
	for _, everyS := range []float64{360, 1800, 7200} {
		ch := chart{what: spread}
		alarms, quiet := 0, 0.0
		for i := range 400_000 {
			x := rng.NormFloat64()
			if rng.Float64() < 0.02 {
				x = 2000 * (rng.Float64() - 0.5)
			}
			z, ratio := withOutliers(x)
			was := ch.alarmed
			ch.add(int64(i)*1e9, widening(z, []float64{ratio}, 0), everyS)
			if ch.alarmed && !was {
				alarms++
			}
			if !was {
				quiet++
			}
		}
		want := quiet / everyS
		t.Logf("seed %d, every %.0f s: %d false alarms, %.1f expected", seed, everyS, alarms, want)
		if f := float64(alarms); f > want+4*math.Sqrt(want) || f < want/2 {
			t.Errorf("every %.0f s: %d false alarms, %.1f expected", everyS, alarms, want)
		}
	}
}
