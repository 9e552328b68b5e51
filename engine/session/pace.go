package session

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// paceS is over how many seconds a speed is averaged: a statement over less
// would be the odometer's noise divided by a short time, and depend on the rate.
const paceS = 1.0

// pace is how the vehicle moved in the last paceS seconds, oldest first: less
// after a gap, more where one increment covers more.
type pace struct{ stretches []sensor.Pace }

// add appends a stretch and lets go of what is older than paceS.
func (p *pace) add(s sensor.Pace) {
	if n := len(p.stretches); n > 0 && p.stretches[n-1].Over != s.Over {
		p.stretches = p.stretches[:0] // measured otherwise
	}
	p.stretches = append(p.stretches, s)
	excess := p.seconds() - paceS
	n := 0
	for excess >= p.stretches[n].Seconds && n < len(p.stretches)-1 {
		excess -= p.stretches[n].Seconds
		n++
	}
	// Moved, not cut off at the front: the memory stays.
	p.stretches = p.stretches[:copy(p.stretches, p.stretches[n:])]
	if first := &p.stretches[0]; excess > 0 && len(p.stretches) > 1 {
		*first = first.Share(1 - excess/first.Seconds)
	}
}

func (p *pace) seconds() (sum float64) {
	for i := range p.stretches {
		sum += p.stretches[i].Seconds
	}
	return sum
}

// speed is the vehicle's speed now: the mean over the stretches, true where the
// belief knows the odometer's scale. Its variance is that of the measured
// distances, of the scale, and of how the speed may have changed since the
// middle of the stretches, (a·T/2)²/3 for an acceleration uniform within the
// suite's max_accel_mps2.
func (p *pace) speed(b *filter.Belief, maxAccelMPS2 float64) summary.Speed {
	if len(p.stretches) == 0 {
		return summary.Speed{}
	}
	var sum sensor.Pace
	for _, s := range p.stretches {
		sum.Seconds += s.Seconds
		sum.ForwardM += s.ForwardM
		sum.ScaledM += s.ScaledM
		sum.EastM += s.EastM
		sum.NorthM += s.NorthM
		sum.VarM2 += s.VarM2
	}
	way := sum.ForwardM
	variance := sum.VarM2
	if p.stretches[0].Over {
		way = math.Sqrt(float64(sum.EastM*sum.EastM) + float64(sum.NorthM*sum.NorthM))
	}
	if mean, v, ok := b.Moment(filter.OdometerScale); ok {
		way += float64(sum.ScaledM * mean)
		variance += float64(sum.ScaledM*sum.ScaledM) * v
	}
	t := sum.Seconds
	change := float64(maxAccelMPS2*t) / 2
	return summary.Speed{Known: true, MPS: way / t, SigmaMPS: math.Sqrt(variance/float64(t*t) + float64(change*change)/3)}
}
