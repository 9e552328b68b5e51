package forecast

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"sync"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
)

// seen is what one run's posterior says at one sample of the path.
type seen struct {
	ok          bool
	located     bool
	errorM      float64
	radius95M   float64
	protectionM float64 // +Inf: unbounded
}

// runs drives the path n times by the suite's own noise and filters each drive,
// as many at once as there are processors; what comes out does not depend on how
// many. The start is known to Plan.Start, and the point that is handed over errs
// by as much.
func (p *Plan) runs(samples []float64, n int, seed uint64, maxCells int, progress func(done int)) ([][]seen, error) {
	out, errs := make([][]seen, n), make([]error, n)
	var wait sync.WaitGroup
	var mu sync.Mutex
	next, done := make(chan int), 0
	for range min(n, runtime.GOMAXPROCS(0)) {
		wait.Go(func() {
			for i := range next {
				out[i], errs[i] = p.run(samples, rand.New(rand.NewPCG(seed, uint64(i))), maxCells)
				if progress != nil {
					mu.Lock()
					done++
					progress(done)
					mu.Unlock()
				}
			}
		})
	}
	for i := range n {
		next <- i
	}
	close(next)
	wait.Wait()
	for i, err := range errs {
		if err != nil {
			return nil, fmt.Errorf("run %d of seed %d: %w", i, seed, err)
		}
	}
	return out, nil
}

// was is where a world was at a time.
type was struct {
	t    sensor.Time
	at   geo.Point
	wayM float64
}

// run is one drive and its filter.
func (p *Plan) run(samples []float64, rng *rand.Rand, maxCells int) ([]seen, error) {
	if p.stop != nil {
		if err := p.stop(); err != nil {
			return nil, err
		}
	}
	w := p.world(rng)
	first := w.truth()
	off := geo.Point{E: rng.NormFloat64() * p.Start, N: rng.NormFloat64() * p.Start}
	start := session.Start{Kind: session.AtPoint, Point: p.Space.Frame().Inverse(first.Add(off)), SigmaM: p.Start}
	var truth []was
	var posteriors []*summary.Posterior
	keep := func(ps []*summary.Posterior, withdrawn []sensor.Time) {
		for _, t := range withdrawn {
			posteriors = slices.DeleteFunc(posteriors, func(q *summary.Posterior) bool { return q.TimeNS == int64(t) })
		}
		posteriors = append(posteriors, ps...)
	}
	s, err := p.session(start, maxCells)
	if err != nil {
		return nil, err
	}
	for w.more() {
		n := len(w.events)
		if err := w.step(); err != nil {
			return nil, err
		}
		truth = append(truth, was{at(w.t), w.truth(), w.now.wayM})
		for _, ev := range w.events[n:] {
			ps, err := s.Add(raw(p.Suite.Sensor(ev.Sensor, ev.Measurement.Kind()), ev))
			var refused *session.Refusal
			if err != nil && !errors.As(err, &refused) {
				return nil, err
			}
			keep(ps, s.Withdrawn())
		}
	}
	keep(s.Flush(), s.Withdrawn())
	return p.compare(samples, truth, posteriors), nil
}

// session makes one of the plan's map and suite.
func (p *Plan) session(start session.Start, maxCells int) (*session.Session, error) {
	return session.New(session.Config{Vehicle: "planned", Space: p.Space, Suite: p.Suite, Start: start, MaxCells: maxCells})
}

// compare reads posteriors at the samples: the last one before the vehicle is
// there, at most oldestS old.
func (p *Plan) compare(samples []float64, truth []was, posteriors []*summary.Posterior) []seen {
	out := make([]seen, len(samples))
	for i, wayM := range samples {
		t := at(p.Path.timeAt(wayM))
		j, found := slices.BinarySearchFunc(posteriors, int64(t), func(q *summary.Posterior, ns int64) int {
			switch {
			case q.TimeNS < ns:
				return -1
			case q.TimeNS > ns:
				return 1
			}
			return 0
		})
		if !found {
			j--
		}
		if j < 0 || t.Seconds(sensor.Time(posteriors[j].TimeNS)) > oldestS {
			continue
		}
		q := posteriors[j]
		k, found := slices.BinarySearchFunc(truth, sensor.Time(q.TimeNS), func(w was, t sensor.Time) int {
			switch {
			case w.t < t:
				return -1
			case w.t > t:
				return 1
			}
			return 0
		})
		if !found {
			continue
		}
		_, scale := p.Space.Frame().Convergence(q.MeanFrame)
		out[i] = seen{
			ok: true, located: q.Status == summary.Located, errorM: q.MeanFrame.Sub(truth[k].at).Norm() / scale,
			radius95M: q.Radius95M, protectionM: q.Protection.RadiusM,
		}
		if !q.Protection.Bounded {
			out[i].protectionM = math.Inf(1)
		}
	}
	return out
}

// oldestS is how old a posterior may be to speak for a place.
const oldestS = 6.0

// RunFigures sum up the runs at a place. Quantiles are linear between order
// statistics.
type RunFigures struct {
	// Runs is how many had a posterior there.
	Runs int `json:"runs"`
	// Located is the part of them that was located.
	Located float64 `json:"located"`
	// ErrorP50M and ErrorP95M are of the mean's distance from where the vehicle was.
	ErrorP50M float64 `json:"error_p50_m"`
	ErrorP95M float64 `json:"error_p95_m"`
	// Radius95… are quantiles of the 95 % radius that the posteriors state.
	Radius95P5M  float64 `json:"radius95_p5_m"`
	Radius95P50M float64 `json:"radius95_p50_m"`
	Radius95P95M float64 `json:"radius95_p95_m"`
	// ProtectionP50M is the median protection radius, null if half of them are
	// unbounded; Protected the part of the runs whose radius is within the limit.
	ProtectionP50M *float64 `json:"protection_p50_m"`
	Protected      float64  `json:"protected"`
}

// figures sums up runs at a sample; nil without any.
func figures(all [][]seen, sample int, limitM float64) *RunFigures {
	var errs, radii, protection []float64
	f := &RunFigures{}
	for _, run := range all {
		s := run[sample]
		if !s.ok {
			continue
		}
		f.Runs++
		errs, radii, protection = append(errs, s.errorM), append(radii, s.radius95M), append(protection, s.protectionM)
		if s.located {
			f.Located++
		}
		if s.protectionM <= limitM {
			f.Protected++
		}
	}
	if f.Runs == 0 {
		return nil
	}
	n := float64(f.Runs)
	f.Located, f.Protected = f.Located/n, f.Protected/n
	for _, of := range [][]float64{errs, radii, protection} {
		slices.Sort(of)
	}
	f.ErrorP50M, f.ErrorP95M = quantile(errs, 0.5), quantile(errs, 0.95)
	f.Radius95P5M, f.Radius95P50M, f.Radius95P95M = quantile(radii, 0.05), quantile(radii, 0.5), quantile(radii, 0.95)
	if m := quantile(protection, 0.5); !math.IsInf(m, 1) && m == m {
		f.ProtectionP50M = &m
	}
	return f
}

func quantile(sorted []float64, q float64) float64 {
	x := q * float64(len(sorted)-1)
	i := min(int(x), len(sorted)-1)
	j := min(i+1, len(sorted)-1)
	if x == float64(i) || sorted[i] == sorted[j] {
		return sorted[i]
	}
	return sorted[i] + (x-float64(i))*(sorted[j]-sorted[i])
}
