package diagnose

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// outcome is a time's status.
type outcome struct {
	ns     int64
	status summary.Status
}

// outcomes are those of a run, by time, one a time.
type outcomes []outcome

// take puts posteriors at their places, in place of what they revise.
func (o *outcomes) take(ps []*summary.Posterior, withdrawn []sensor.Time) {
	at := func(ns int64) (int, bool) {
		return slices.BinarySearchFunc(*o, ns, func(a outcome, ns int64) int { return cmp.Compare(a.ns, ns) })
	}
	for _, t := range withdrawn {
		if i, found := at(int64(t)); found {
			*o = slices.Delete(*o, i, i+1)
		}
	}
	for _, p := range ps {
		i, found := at(p.TimeNS)
		if !found {
			*o = slices.Insert(*o, i, outcome{})
		}
		(*o)[i] = outcome{p.TimeNS, p.Status}
	}
}

// suspicions are what speaks against a run by its statuses. halfway is the time
// from which it must be located at some time: where a start is known, anything
// is located at first.
func (o outcomes) suspicions(start sensor.Time, halfway int64) []string {
	var out []string
	located := false
	for _, at := range o {
		if at.status == summary.Contradicted && out == nil {
			out = append(out, fmt.Sprintf("it is contradicted %.0f s after the start", sensor.Time(at.ns).Seconds(start)))
		}
		located = located || at.status == summary.Located && at.ns >= halfway
	}
	switch {
	case located:
	case halfway > int64(start):
		out = append(out, "it is not located after the first half")
	default:
		out = append(out, "it is never located")
	}
	return out
}

// strayed says that a run is off the map for long, "" if it is not.
func (o outcomes) strayed() string {
	off := 0
	for _, at := range o {
		if at.status == summary.OffMap {
			off++
		}
	}
	if off == 0 || float64(off) < strayedShare*float64(len(o)) {
		return ""
	}
	return fmt.Sprintf("it is off the map's roads for %d of %d posteriors", off, len(o))
}

// suspicion is that a sensor fits badly, "" if it does not.
func (f *Fit) suspicion() string {
	if !f.Bad {
		return ""
	}
	return fmt.Sprintf("%s fits badly: %.0f %% of its measurements are outliers, %.3g %% may be", f.who(), 100**f.Outliers, 100**f.Stated)
}

// suspicions are what still speaks against a log with an entrant's mistake
// undone, by what makes a replay suspect: its statuses, how each sensor fits,
// what is refused, and an estimate far from its prior, which has taken upon
// itself what the mistake does not explain.
func (c *course) suspicions(e *entrant) []string {
	end := c.rounds[len(e.nats)-1]
	out := e.run.outcomes.suspicions(c.start, int64(c.start+(end-c.start)/2))
	for _, f := range e.run.log.fits(c.start) {
		if s := f.suspicion(); s != "" {
			out = append(out, s)
		} else if f.Sensor == road && f.MeanNats < leastRoadNats(f.Measurements) {
			out = append(out, fmt.Sprintf("the road fits badly: %.2f nats for each comparison, 0 is a vehicle that follows its road", f.MeanNats))
		}
	}
	out = append(out, e.run.refusals()...)
	for _, b := range beyond(e.run.latest, end.Seconds(c.start), c.config) {
		out = append(out, fmt.Sprintf("%s ends %+.1f sigma from its prior", b.Name, b.PriorSigmas))
	}
	return out
}

// leastRoadNats is the least mean evidence of n comparisons with the road that
// fit. Of one that fits it is ½ - ½x², x standard normal (Record takes its mean
// off): of mean 0 and variance ½. Three standard deviations of the mean, and a
// grain of salt since roads are no straight lines.
func leastRoadNats(n float64) float64 { return -3*math.Sqrt(0.5/math.Max(n, 1)) - 0.1 }

// refusals says whose measurements are refused, by the share that makes a
// replay suspect.
func (r *run) refusals() []string {
	var out []string
	for _, v := range r.refusedOf {
		all := 0
		for _, ev := range r.events {
			if ev.Sensor == v.sensor {
				all++
			}
		}
		if float64(v.n) >= refusedShare*float64(all) {
			out = append(out, fmt.Sprintf("%s is refused: %d of %d measurements", v.sensor, v.n, all))
		}
	}
	return out
}
