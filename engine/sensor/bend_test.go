package sensor

import (
	"math"
	"math/rand/v2"
	"testing"
)

// course is a drive as heading over way: straights, a corner of 6 m radius, a
// gentle bend, an S of 15 m radius.
func course(s float64) (heading float64) {
	for _, a := range []struct{ from, to, curvature float64 }{
		{20, 20 + 6*math.Pi/2, 1. / 6}, {50, 90, -0.006}, {110, 122, 1. / 15}, {122, 134, -1. / 15},
	} {
		heading += a.curvature * math.Max(0, math.Min(s, a.to)-a.from)
	}
	return heading
}

// TestBendDoesNotDependOnSteps drives a course in steps of 2 cm to 2 m, with one
// gyro's noise: what counts as turned is the same within 1 % at the end and
// within 0.03 rad on the way, and all that was turned but for the noise and
// what the S takes back within bendM. With the steps' own turns in place of it,
// the noise of two sigma a step takes off a third at 2 cm.
func TestBendDoesNotDependOnSteps(t *testing.T) {
	const seed, finest, end = 5, 0.02, 160.0
	const noise = 0.002 * 0.002 / 2 // rad² a metre: 0.002 rad/√s at 2 m/s
	rng := rand.New(rand.NewPCG(seed, 0))
	heading := make([]float64, int(end/finest)+1)
	for i := range heading {
		heading[i] = course(float64(i) * finest)
		if i > 0 {
			heading[i] += heading[i-1] - course(float64(i-1)*finest) + math.Sqrt(noise*finest)*rng.NormFloat64()
		}
	}
	run := func(share int) (turned []float64) {
		var b Bend
		total := 0.0
		for i := share; i < len(heading); i += share {
			d, turn := float64(share)*finest, heading[i]-heading[i-share]
			total += b.turned(d, turn, noise*d)
			b = b.after(d, turn, noise*d)
			if i%100 == 0 { // each 2 m
				turned = append(turned, total)
			}
		}
		return turned
	}
	fine := run(1)
	for _, share := range []int{5, 25, 50, 100} {
		for i, v := range run(share) {
			if math.Abs(v-fine[i]) > 0.03 {
				t.Errorf("seed %d: steps of %g m: turned %.4f at %d m, %.4f in steps of 2 cm", seed, float64(share)*finest, v, 2*(i+1), fine[i])
			}
		}
		if v := run(share); math.Abs(v[len(v)-1]/fine[len(fine)-1]-1) > 0.01 {
			t.Errorf("seed %d: steps of %g m: turned %.4f in all, %.4f in steps of 2 cm", seed, float64(share)*finest, v[len(v)-1], fine[len(fine)-1])
		}
	}
	if all := math.Pi/2 + 0.24 + 2*0.8; fine[len(fine)-1] > all || fine[len(fine)-1] < 0.85*all {
		t.Errorf("turned %.4f of %.4f", fine[len(fine)-1], all)
	}
}

// TestBendOnTheSpot: a stand adds nothing however much noise comes in; a turn on
// the spot counts once the vehicle goes on; reverse is as forward.
func TestBendOnTheSpot(t *testing.T) {
	var b Bend
	for i := range 60000 { // ten minutes at 100 Hz
		noise := 1e-4 * float64(1-i%2*2)
		if v := b.turned(0, noise, 1e-8); v != 0 {
			t.Fatalf("a stand turned by %v", v)
		}
		b = b.after(0, noise, 1e-8)
	}
	b = Bend{}.after(0, math.Pi/2, 1e-8)
	for _, dir := range []float64{1, -1} {
		c, total := b, 0.0
		for range 1000 {
			total += c.turned(dir*0.05, 0, 1e-10)
			c = c.after(dir*0.05, 0, 1e-10)
		}
		if math.Abs(total-math.Pi/2) > 0.01 {
			t.Errorf("a right angle on the spot counts %v", total)
		}
	}
}

// TestBendAddsUp: an even turn cut anywhere leaves the same bend, and lost
// digits of small steps nothing.
func TestBendAddsUp(t *testing.T) {
	b := Bend{0.02, 1e-6}
	whole := b.after(3, 0.4, 1e-4)
	for _, share := range []float64{1e-7, 0.01, 0.3, 0.5, 0.999} {
		c := b.after(3*share, 0.4*share, 1e-4*share).after(3*(1-share), 0.4*(1-share), 1e-4*(1-share))
		if !near(c.RadPerM, whole.RadPerM, 1e-12) || !near(c.Var, whole.Var, 1e-16) {
			t.Errorf("cut at %g: %v, whole %v", share, c, whole)
		}
	}
}
