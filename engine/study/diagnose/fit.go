package diagnose

import (
	"math"

	"leadline/engine/kernel"
	"leadline/engine/sensor"
)

// Fit says how well one sensor's measurements fit what all before them led one
// to expect.
type Fit struct {
	Sensor string `json:"sensor"` // "road" for the comparison with the road
	Kind   string `json:"kind"`
	// Measurements is how many independent ones they count for.
	Measurements float64 `json:"measurements"`
	// MeanNats is their mean log evidence.
	MeanNats float64 `json:"mean_nats"`
	// Outliers is the share of them that are outliers, each counted by the
	// probability that it is one; Stated is the share that the suite states.
	Outliers *float64 `json:"outliers"`
	Stated   *float64 `json:"outliers_stated"`
	// Bad: there are more of them than chance and a grain of salt allow.
	Bad bool `json:"bad"`
}

// A sensor fits badly if so many outliers would come by chance in one of
// e^badNats drives (Chernoff's bound of the binomial tail: the chance of a
// share q or more of n is at most e^(-n·KL(q, p))), and if they are badShare
// of its measurements and more.
const (
	badNats  = 13.8 // a million to one
	badShare = 0.1
)

// fits sums up a record from a time on.
func (r *Record) fits(from sensor.Time) []Fit {
	out := make([]Fit, len(r.voices))
	for i, v := range r.voices {
		out[i] = Fit{Sensor: v.sensor, Kind: v.kind}
		if v.sensor == road {
			out[i].Kind = ""
		}
	}
	outliers := make([]float64, len(r.voices))
	for _, w := range r.list {
		if w.time < from {
			continue
		}
		f := &out[w.voice]
		f.Measurements += w.power
		f.MeanNats += w.nats
		outliers[w.voice] += float64(w.power * w.out)
	}
	for i, v := range r.voices {
		f := &out[i]
		if f.Measurements == 0 {
			continue
		}
		f.MeanNats /= f.Measurements
		if v.known {
			share, stated := outliers[i]/f.Measurements, v.outliers
			f.Outliers, f.Stated = &share, &stated
			f.Bad = share >= badShare && f.Measurements*divergence(share, stated) >= badNats
		}
	}
	return out
}

// divergence is KL(q, p) of two probabilities, nats; 0 for q ≤ p.
func divergence(q, p float64) float64 {
	if q <= p {
		return 0
	}
	d := q * kernel.Log(q/p)
	if q < 1 {
		d += (1 - q) * kernel.Log((1-q)/(1-p))
	}
	return math.Max(d, 0)
}
