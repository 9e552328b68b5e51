package monitor

import (
	"math"
	"math/rand/v2"
	"testing"
)

// TestFalseAlarmsOfCharts: scores at one rate raise as many false alarms in the
// time that a chart is not alarmed as were asked for, within 4 standard errors.
func TestFalseAlarmsOfCharts(t *testing.T) {
	const seed = 37
	rng := rand.New(rand.NewPCG(seed, 0))
	for _, what := range []statistic{spread, high} {
		for _, c := range []struct{ spacingS, everyS float64 }{{1, 360}, {0.1, 1800}, {5, 7200}} {
			ch := chart{what: what}
			alarms, quiet := 0, 0.0
			for i := range 400_000 {
				was := ch.alarmed
				ch.take(int64(float64(i)*c.spacingS*1e9), rng.NormFloat64(), c.everyS)
				if ch.alarmed && !was {
					alarms++
				}
				if !was {
					quiet += c.spacingS
				}
			}
			want := quiet / c.everyS
			t.Logf("seed %d, statistic %d, a score in %v s: %d alarms, %.1f expected; quiet %.2f of the time", seed, what, c.spacingS, alarms, want, quiet/4e5/c.spacingS)
			if math.Abs(float64(alarms)-want) > 4*math.Sqrt(want) {
				t.Errorf("seed %d, statistic %d, a score in %v s: %d alarms, %.1f expected", seed, what, c.spacingS, alarms, want)
			}
		}
	}
}
