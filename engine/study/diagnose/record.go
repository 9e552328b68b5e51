package diagnose

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/kernel"
	"leadline/engine/sensor"
	"leadline/engine/session"
)

// weighing is what one measurement did.
type weighing struct {
	time  sensor.Time
	voice int     // index among the record's voices
	power float64 // what it counts for
	nats  float64 // its log evidence, with what makes runs comparable
	out   float64 // probability that it is an outlier
}

// Record keeps what a session's measurements were worth: have the session
// watched by Add (session.Watch). The zero value is ready. One goroutine owns
// it.
type Record struct {
	mistake *Mistake
	voices  []spoken
	list    []weighing
	last    sensor.Time
	work    float64 // see budget.go
}

// spoken is who weighs the belief.
type spoken struct {
	sensor, kind string
	// outliers is the share of outliers that the sensor states; known if its
	// noise does.
	outliers float64
	known    bool
}

// road is the name of the comparison with the road in evidence.
const road = "road"

// floorNats is what a measurement counts for that is impossible, or that no
// filter could use, where its sensor states no outliers: about that of an
// outlying fix, ln(0.02/(10 km)²).
const floorNats = -22.0

// leastOutlier is the probability of an outlier by which a sensor is judged
// that states none.
const leastOutlier = 1e-3

// Add takes a change.
func (r *Record) Add(c session.Change) {
	r.work += 1 + float64(c.Cells)
	r.rewind(c)
	if c.Likelihood == nil {
		return
	}
	w := weighing{time: c.Time, voice: r.voice(c), power: 1, nats: c.LogEvidence}
	floor := floorNats
	if l, ok := c.Likelihood.(filter.LinearLikelihood); ok {
		n := l.Noise()
		if n.Power > 0 {
			w.power = n.Power
		}
		if n.FlatDensity > 0 {
			flat := kernel.Log(math.Max(n.FlatWeight, leastOutlier) * n.FlatDensity)
			w.out = outlier(flat, c.LogEvidence/w.power, n.FlatWeight > 0)
			if n.FlatWeight > 0 {
				floor = flat
			}
			if c.Event.Sensor == road {
				w.nats -= float64(w.power * fitting(n.FlatDensity))
			}
			v := &r.voices[w.voice]
			v.outliers, v.known = math.Max(n.FlatWeight, leastOutlier), true
		}
	}
	if math.IsInf(w.nats, -1) {
		w.nats, w.out = float64(w.power*floor), 1
	}
	if r.mistake != nil {
		w.nats += float64(w.power * r.mistake.scale(c.Event))
	}
	r.list = append(r.list, w)
}

// rewind forgets what the session computes again from here on.
func (r *Record) rewind(c session.Change) {
	if until, yes := c.Rewinds(r.last); yes {
		n := len(r.list)
		for n > 0 && r.list[n-1].time > until {
			n--
		}
		r.list = r.list[:n]
	}
	r.last = c.Time
}

// voice finds or adds who spoke.
func (r *Record) voice(c session.Change) int {
	name, kind := c.Event.Sensor, c.Event.Measurement.Kind()
	for i, v := range r.voices {
		if v.sensor == name && v.kind == kind {
			return i
		}
	}
	r.voices = append(r.voices, spoken{sensor: name, kind: kind})
	return len(r.voices) - 1
}

// nats is the sum of the evidence.
func (r *Record) nats() float64 {
	sum := 0.0
	for _, w := range r.list {
		sum += w.nats
	}
	return sum
}

// weight is how many independent measurements of a sensor there were.
func (r *Record) weight(sensor string) float64 {
	sum := 0.0
	for _, w := range r.list {
		if r.voices[w.voice].sensor == sensor {
			sum += w.power
		}
	}
	return sum
}

// outlier is the probability that a measurement is an outlier, given its log
// evidence: flat/evidence, since the evidence is that of the whole mixture; or,
// if its sensor states none, of the mixture with them.
func outlier(flat, evidence float64, stated bool) float64 {
	if stated {
		return kernel.Exp(math.Min(flat-evidence, 0))
	}
	return 1 / (1 + kernel.Exp(math.Min(evidence-flat, 700)))
}

// fitting is the mean log evidence of a comparison with the road that fits: of
// a normal with the standard deviation w it is -½ ln(2πe·w²), and w is 10° for
// a vehicle that follows its road (sensor.RoadAlignment). The flat density
// says what is compared: 1/2π for a heading; 1/(2·length) for a displacement
// across the road, where w is 10° of the length.
func fitting(flat float64) float64 {
	w := 10 * math.Pi / 180
	if math.Abs(flat*2*math.Pi-1) > 1e-9 {
		w *= 0.5 / flat
	}
	return -0.5 - kernel.LogSqrt2Pi - kernel.Log(w)
}
