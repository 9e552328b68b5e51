package diagnose

import (
	"math"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/session"
)

// TestOutlierProbability compares the probability that a fix is an outlier,
// which follows from its evidence alone, with Bayes' rule over a start whose
// density is known; a lattice has the tail to 10 %.
func TestOutlierProbability(t *testing.T) {
	const startM, sigmaM = 50.0, 20.0
	for _, c := range []struct {
		stated, awayM float64
	}{{0.02, 0}, {0.02, 100}, {0.02, 200}, {0.02, 250}, {0.02, 400}, {0.2, 150}, {0, 0}, {0, 250}, {0, 1000}} {
		suite := &sensor.Suite{Sensors: []sensor.Sensor{{Name: "fix", Kind: sensor.KindFix, OutlierProbability: &c.stated}}}
		space := plane.Open(atlantic, 5000, 50)
		s, err := session.New(session.Config{Space: space, Suite: suite, Start: session.Start{Kind: session.AtPoint, Point: atlantic, SigmaM: startM}})
		must(t, s, err)
		var r Record
		s.Watch(r.Add)
		_, err = s.Add(sensor.Event{Time: 1e18, Sensor: "fix", Measurement: sensor.Fix{Position: space.Frame().Inverse(geo.Point{E: c.awayM}), SigmaM: sigmaM}})
		must(t, s, err)
		s.Flush()
		w := math.Max(c.stated, leastOutlier)
		v := startM*startM + sigmaM*sigmaM
		in := math.Exp(-c.awayM*c.awayM/(2*v)) / (2 * math.Pi * v)
		if c.stated > 0 {
			in *= 1 - w
		}
		out := w / (1e4 * 1e4)
		want := out / (in + out)
		if got := r.list[0].out; math.Abs(got-want) > 0.1*want+1e-4 {
			t.Errorf("stated %v, %v m away: an outlier with probability %v, want %v", c.stated, c.awayM, got, want)
		}
	}
}

// TestDivergence: Chernoff's bound lies above the binomial tail, and not far.
func TestDivergence(t *testing.T) {
	choose := func(n, k int) float64 {
		a, _ := math.Lgamma(float64(n + 1))
		b, _ := math.Lgamma(float64(k + 1))
		c, _ := math.Lgamma(float64(n - k + 1))
		return a - b - c
	}
	for _, c := range []struct {
		n, k int
		p    float64
	}{{100, 10, 0.01}, {100, 10, 0.05}, {300, 30, 0.02}, {20, 20, 0.1}, {50, 5, 0.001}} {
		tail := 0.0
		for k := c.k; k <= c.n; k++ {
			log := choose(c.n, k) + float64(k)*math.Log(c.p)
			if k < c.n {
				log += float64(c.n-k) * math.Log(1-c.p)
			}
			tail += math.Exp(log)
		}
		bound := -float64(c.n) * divergence(float64(c.k)/float64(c.n), c.p)
		if ln := math.Log(tail); bound < ln-1e-9 || bound > ln+5 {
			t.Errorf("%d or more of %d at %v: ln of the chance is %v, its bound %v", c.k, c.n, c.p, ln, bound)
		}
	}
	if d := divergence(0.01, 0.02); d != 0 {
		t.Errorf("fewer than expected are %v nats", d)
	}
}

// TestRecordOfTheLate: what a late measurement has computed again counts once,
// so that the record's evidence is the session's.
func TestRecordOfTheLate(t *testing.T) {
	s := fittedCar(t, 4)
	c, err := newCourse(s.drive, s.config, Options{MaxCells: 1000, OpeningS: 40})
	must(t, c, err)
	evidence := func(late bool) (record, sum, latest float64) {
		ses, err := session.New(c.config)
		must(t, ses, err)
		var r Record
		ses.Watch(func(ch session.Change) { r.Add(ch); sum += ch.LogEvidence })
		var held []sensor.Event
		for _, ev := range c.events {
			if late && ev.Sensor == "compass" {
				held = append(held, ev)
				continue
			}
			_, err := ses.Add(ev)
			must(t, ses, err)
			for len(held) > 0 && ev.Time > held[0].Time+1.5e9 {
				_, err := ses.Add(held[0])
				must(t, ses, err)
				held = held[1:]
			}
		}
		for _, ev := range held {
			_, err := ses.Add(ev)
			must(t, ses, err)
		}
		ses.Flush()
		return r.nats(), sum, ses.Latest().LogEvidence
	}
	inTime, sum, latest := evidence(false)
	late, again, lateLatest := evidence(true)
	if again == sum {
		t.Fatal("nothing was computed again")
	}
	if math.Abs(late-inTime) > 1e-6 || math.Abs(lateLatest-latest) > 1e-6 {
		t.Errorf("in time %v nats, late %v; the session has %v and %v", inTime, late, latest, lateLatest)
	}
}

// TestFitting: the mean log evidence of a comparison with the road that fits
// is that of a normal, by a sum over it.
func TestFitting(t *testing.T) {
	mean := func(sigma float64) float64 {
		sum, n := 0.0, 20000
		for i := range n {
			x := 8 * (float64(i)/float64(n) - 0.5) * 2 * sigma
			p := math.Exp(-x*x/(2*sigma*sigma)) / (sigma * math.Sqrt(2*math.Pi))
			sum += p * math.Log(p) * 16 * sigma / float64(n)
		}
		return sum
	}
	if got, want := fitting(1/(2*math.Pi)), mean(geo.Rad(10)); math.Abs(got-want) > 1e-6 {
		t.Errorf("of headings %v, want %v", got, want)
	}
	if got, want := fitting(1/(2*7.0)), mean(geo.Rad(10)*7); math.Abs(got-want) > 1e-6 {
		t.Errorf("of displacements of 7 m %v, want %v", got, want)
	}
}
