package forecast

import (
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Stretch is a part of a path where the predicted 95 % radius is beyond the limit.
type Stretch struct {
	FromM float64 `json:"from_m"`
	ToM   float64 `json:"to_m"`
	// WorstM is where along the path the radius is greatest, and Radius95M that.
	WorstM    float64 `json:"worst_m"`
	Radius95M float64 `json:"radius95_m"`
	// Help is what would help, the best first.
	Help []Help `json:"help"`
}

// Help is a change to the plan, and what the recursion says with it.
type Help struct {
	What string  `json:"what"` // fix or beacon
	WayM float64 `json:"way_m"`
	Lon  float64 `json:"lon"`
	Lat  float64 `json:"lat"`
	// SigmaM is the measurement's standard deviation that is counted on.
	SigmaM float64 `json:"sigma_m"`
	// By says what was computed anew: bound, the recursion; or runs, where it is not
	// the recursion that is beyond the limit, but where other places, or the other
	// direction of the road, are possible.
	By string `json:"by"`
	// The greatest radius of the stretch before and after, and how much of the
	// stretch it leaves beyond the limit.
	BeforeM     float64 `json:"before_m"`
	AfterM      float64 `json:"after_m"`
	WeakBeforeM float64 `json:"weak_before_m"`
	WeakAfterM  float64 `json:"weak_after_m"`
}

const (
	mostStretches = 5 // that are helped, the longest first
	// A beacon stands so far to the right of the path, is heard so far and has this
	// sigma unless the suite has a range sensor of its own; a fix has this one
	// unless the suite has a receiver (practice).
	besideM       = 30.0
	beaconReachM  = 500.0
	beaconSigmaM  = 5.0
	fixSigmaM     = 5.0
	extraBeacon   = "extra-beacon"
	extraRange    = "extra range"
	mostHelpRuns  = 20
	leastHelpGain = 0.01
)

// weak finds the stretches in which a radius is beyond the limit.
func weak(samples []Sample, limitM float64) (out []Stretch) {
	for i := 0; i < len(samples); {
		if !(samples[i].Radius95M > limitM) {
			i++
			continue
		}
		s := Stretch{FromM: samples[i].WayM}
		for ; i < len(samples) && samples[i].Radius95M > limitM; i++ {
			s.ToM = samples[i].WayM
			if samples[i].Radius95M > s.Radius95M {
				s.WorstM, s.Radius95M = s.ToM, samples[i].Radius95M
			}
		}
		out = append(out, s)
	}
	return out
}

// fixed is the plan with a fix at a time.
func (p *Plan) fixed(wayM float64) (*Plan, float64) {
	q := *p
	q.fixSigmaM = fixSigmaM
	for _, d := range p.Suite.Sensors {
		if d.Kind == sensor.KindFix && d.Noise.SigmaM > 0 {
			q.fixSigmaM = d.Noise.SigmaM
		}
	}
	q.fixesS = []float64{p.Path.timeAt(wayM)}
	return &q, q.fixSigmaM
}

// lit is the plan with a beacon that is ranged, at a point.
func (p *Plan) lit(at geo.Point) (*Plan, float64) {
	q, suite := *p, *p.Suite
	d := sensor.Sensor{Name: extraRange, Kind: sensor.KindRange, Noise: sensor.SensorNoise{SigmaM: beaconSigmaM}, MaxRangeM: beaconReachM}
	for _, own := range p.Suite.Sensors {
		if own.Kind == sensor.KindRange && own.Noise.SigmaM > 0 {
			d = own
			d.Name = extraRange
			if d.MaxRangeM == 0 {
				d.MaxRangeM = beaconReachM
			}
		}
	}
	lon, lat := p.Space.Frame().Inverse(at).Degrees()
	b := sensor.Place{ID: extraBeacon, LonDeg: &lon, LatDeg: &lat}
	suite.Beacons = append(append([]sensor.Place(nil), suite.Beacons...), b)
	suite.Sensors = append(append([]sensor.Sensor(nil), suite.Sensors...), d)
	q.Suite = &suite
	q.sensors = append(append([]planned(nil), p.sensors...), planned{Sensor: d, hz: otherHz, beacons: []sensor.Place{b}})
	return &q, d.Noise.SigmaM
}

// help computes what would help a stretch: a fix, or a beacon, at its beginning,
// its middle, its end and its worst place; the best of each kind is kept if it
// lowers the greatest radius or shortens the stretch by a hundredth and more.
func (p *Plan) help(s *Stretch, samples []Sample, o Options) error {
	radii, by, err := p.boundRadii(s, samples)
	if err != nil {
		return err
	}
	before := judge(radii, samples, o.LimitM)
	again := func(with *Plan) ([]float64, error) { r, _, err := with.boundRadii(s, samples); return r, err }
	ways := []float64{s.FromM, (s.FromM + s.ToM) / 2, s.ToM, s.WorstM}
	if before.mostM <= o.LimitM && o.Runs > 0 {
		by, ways = "runs", []float64{s.FromM, s.WorstM}
		o.Runs = min(o.Runs, mostHelpRuns)
		again = func(with *Plan) ([]float64, error) { return with.runRadii(s, samples, o) }
		if radii, err = again(p); err != nil {
			return err
		}
		before = judge(radii, samples, o.LimitM)
	}
	for _, what := range []string{"fix", "beacon"} {
		var best *Help
		for _, wayM := range ways {
			q := p.Path.place(wayM)
			spot := q.at
			with, sigma := p.fixed(wayM)
			if what == "beacon" {
				spot = beside(q, besideM)
				with, sigma = p.lit(spot)
			}
			if radii, err = again(with); err != nil {
				return fmt.Errorf("trying a %s: %w", what, err)
			}
			after := judge(radii, samples, o.LimitM)
			h := &Help{What: what, WayM: wayM, SigmaM: sigma, By: by, BeforeM: before.mostM, AfterM: after.mostM, WeakBeforeM: before.weakM, WeakAfterM: after.weakM}
			h.Lon, h.Lat = p.Space.Frame().Inverse(spot).Degrees()
			if best == nil || after.weakM < best.WeakAfterM || after.weakM == best.WeakAfterM && after.mostM < best.AfterM {
				best = h
			}
		}
		if best.AfterM < (1-leastHelpGain)*before.mostM || best.WeakAfterM < (1-leastHelpGain)*before.weakM {
			s.Help = append(s.Help, *best)
		}
	}
	if len(s.Help) == 2 && s.Help[1].WeakAfterM < s.Help[0].WeakAfterM {
		s.Help[0], s.Help[1] = s.Help[1], s.Help[0]
	}
	return nil
}

// boundRadii are the bound's at the samples of a stretch.
func (p *Plan) boundRadii(s *Stretch, samples []Sample) (radii []float64, by string, err error) {
	marks, err := p.bound()
	if err != nil {
		return nil, "", err
	}
	for _, at := range s.within(samples) {
		radii = append(radii, radius(markAt(marks, p.Path.timeAt(at.WayM)).cov, 0.95))
	}
	return radii, "bound", nil
}

// runRadii are the medians that runs state at the samples of a stretch.
func (p *Plan) runRadii(s *Stretch, samples []Sample, o Options) (radii []float64, err error) {
	q := *p
	q.untilS = p.Path.timeAt(s.ToM) + 1
	var ways []float64
	for _, at := range s.within(samples) {
		ways = append(ways, at.WayM)
	}
	all, err := q.runs(ways, o.Runs, o.Seed, o.MaxCells, nil)
	if err != nil {
		return nil, err
	}
	for i := range ways {
		r := 0.0
		if f := figures(all, i, o.LimitM); f != nil {
			r = f.Radius95P50M
		}
		radii = append(radii, r)
	}
	return radii, nil
}

func (s *Stretch) within(samples []Sample) (out []Sample) {
	for _, at := range samples {
		if at.WayM >= s.FromM && at.WayM <= s.ToM {
			out = append(out, at)
		}
	}
	return out
}

// judged is how bad a stretch is.
type judged struct{ mostM, weakM float64 }

func judge(radii []float64, samples []Sample, limitM float64) (j judged) {
	step := 0.0
	if len(samples) > 1 {
		step = samples[1].WayM - samples[0].WayM
	}
	for _, r := range radii {
		j.mostM = math.Max(j.mostM, r)
		if r > limitM {
			j.weakM += step
		}
	}
	return j
}

// markAt is the last mark up to a time.
func markAt(marks []mark, t float64) mark {
	lo, hi := 0, len(marks)
	for hi-lo > 1 {
		if mid := (lo + hi) / 2; marks[mid].timeS <= t+1e-9 {
			lo = mid
		} else {
			hi = mid
		}
	}
	return marks[lo]
}
