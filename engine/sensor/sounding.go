package sensor

import (
	"sort"
	"strings"

	"leadline/engine/filter"
)

// Sounding is a depth: the sea floor's height is the tide less the sum of depth
// below transducer and transducer depth.
type Sounding struct {
	DepthBelowTransducerM, TransducerDepthM, SigmaM float64
	Beams                                           []Beam
}

// Beam is one beam of a sounding: depth at an offset from the transducer in
// the vehicle's frame.
type Beam struct{ ForwardM, RightM, DepthBelowTransducerM, SigmaM float64 }

// Kind is "sounding".
func (Sounding) Kind() string { return KindSounding }

// Check reports a sounding that no filter could use.
func (m Sounding) Check(Time) error {
	p := problems{what: KindSounding}
	p.within("depth_below_transducer_m", m.DepthBelowTransducerM, 0, 12000) // the deepest sea floor is 11 km down
	p.length("transducer_depth_m", m.TransducerDepthM)
	p.sigmaM("sigma_m", m.SigmaM)
	if len(m.Beams) > maxBeams {
		p.addf("it has %d beams: at most %d are allowed", len(m.Beams), maxBeams)
		return p.err()
	}
	for i, b := range m.Beams {
		var q problems
		q.length("forward_m", b.ForwardM)
		q.length("right_m", b.RightM)
		q.within("depth_below_transducer_m", b.DepthBelowTransducerM, 0, 12000)
		q.sigmaM("sigma_m", b.SigmaM)
		if len(q.list) > 0 {
			p.addf("beam %d: %s", i+1, strings.Join(q.list, "; "))
			break
		}
	}
	return p.err()
}

// maxKeptBeams bounds the likelihoods of one sounding.
const maxKeptBeams = 16

// likelihoods, at the transducer and under each beam that is kept:
//
//	-(depth + transducer depth + down) = height of the sea floor - tide + depth·s + v
//
// (type heights), with s the sound_speed_scale, by which the true speed of
// sound exceeds the one that depths were made with, and the tide_m, the water's
// surface above the map's datum; where a belief lacks them, sigma has to cover
// them. down is the mounting below the waterline and adds to the transducer
// depth that the measurement carries: give it in one of the two places.
//
// The scale is that of a vertical way. Rays of slanting beams are refracted, too,
// which is left out: near the middle of a fan it is of second order.
// Source: the definition of a depth; the tide among what is estimated as in
// Anonsen & Hallingstad, 2006.
//
// Beams close together see the same error of the map, so they are thinned:
// from the transducer outwards a beam is kept if it is at least two of the
// lengths over which that error is correlated, and two of the map's details
// (raster posts), from the transducer and from every beam kept
// before, at most 16. Those share no post of the raster and are taken as
// independent (their errors are correlated by at most e⁻² = 0.14). Beams need a heading and a map to look beside the vehicle;
// without them only the depth below the transducer counts.
func (m Sounding) likelihoods(c *Context, d Sensor) []any {
	down := m.TransducerDepthM + d.Mounting.DownM
	f0, r0 := d.Mounting.ForwardM, d.Mounting.RightM
	out := []any{c.sounded(d, down, m.DepthBelowTransducerM, m.SigmaM, f0, r0)}
	a := newArm(c, 1, 0)
	if len(m.Beams) == 0 || c.Dim != 2 || c.Plane == nil || a.heading < 0 && !a.known {
		return out
	}
	for _, b := range thin(m.Beams, 2*max(c.mapErrorLengthM(), c.Plane.DetailM())) {
		l := c.sounded(d, down, b.DepthBelowTransducerM, b.SigmaM, f0+b.ForwardM, r0+b.RightM)
		l.slants(hypot(b.ForwardM, b.RightM))
		out = append(out, l)
	}
	return out
}

// sounded is a depth at a place beside the vehicle, from a transducer so far
// down.
func (c *Context) sounded(d Sensor, downM, depthM, sigmaM, forward, right float64) *heights {
	return c.heights(d, -downM, depthM, sigmaM, forward, right).
		with(c, filter.Tide, -1).with(c, filter.SoundSpeedScale, depthM)
}

// thin keeps beams at least apartM from the transducer and from each other,
// nearest first, in the order of the sounding among equals.
func thin(beams []Beam, apartM float64) []Beam {
	order := make([]int, len(beams))
	for i := range order {
		order[i] = i
	}
	reach := func(i int) float64 { return hypot(beams[i].ForwardM, beams[i].RightM) }
	sort.SliceStable(order, func(i, j int) bool { return reach(order[i]) < reach(order[j]) })
	var kept []Beam
next:
	for _, i := range order {
		b := beams[i]
		if reach(i) < apartM {
			continue
		}
		for _, o := range kept {
			if hypot(b.ForwardM-o.ForwardM, b.RightM-o.RightM) < apartM {
				continue next
			}
		}
		if kept = append(kept, b); len(kept) == maxKeptBeams {
			break
		}
	}
	return kept
}
