package traffic

import (
	"math"

	"leadline/engine/kernel"
)

// unseen is the intensity of vehicles that are on the road and have not been
// taken for one yet: expected vehicles by position and speed, on a coarse grid
// that reaches over the whole road. Vehicles enter it at the road's ends, and
// keep their speed until they are heard.
type unseen struct {
	grid
	lengthM float64
	perS    float64   // vehicles that enter at each end
	part    []float64 // of them by slice, those of either direction making 1
}

// The coarse grid: speeds are finer than half the least deviation of the model
// that is of use, and positions are halved before a bearing is looked at.
const (
	unseenStepM   = 5
	unseenStepMPS = 2
	refinements   = 2
	slowestMPS    = 0.5
)

func newUnseen(r *Road, m *Model) *unseen {
	u := &unseen{grid: grid{stepM: unseenStepM, stepMPS: unseenStepMPS}, lengthM: r.lengthM, perS: m.PerHour / 3600 / 2}
	half := int(math.Ceil((m.SpeedMPS + 3.5*m.SpeedSigmaMPS) / unseenStepMPS))
	u.firstMPS = -float64(half) * unseenStepMPS
	n := int(r.lengthM/unseenStepM) + 3
	sum := 0.0
	for k := range 2*half + 1 {
		v := math.Abs(u.speed(k))
		p := 0.0
		if v >= slowestMPS {
			p = kernel.NormalDensity((v - m.SpeedMPS) / m.SpeedSigmaMPS)
		}
		u.part = append(u.part, p)
		sum += p
		s := slice{mass: make([]float64, n)}
		if u.speed(k) < 0 { // ends where the road does
			s.fromM = u.lengthM - float64(n-1)*unseenStepM
		}
		u.slices = append(u.slices, s)
	}
	for k, s := range u.slices {
		u.part[k] *= 2 / sum
		v := math.Abs(u.speed(k))
		for i := range s.mass {
			if x := s.fromM + float64(i)*unseenStepM; u.part[k] > 0 && x >= 0 && x <= u.lengthM {
				s.mass[i] = u.perS * u.part[k] / v * unseenStepM
			}
		}
	}
	return u
}

// move carries the intensity on, and lets vehicles enter: those of a step are
// spread evenly over the way that they have come since.
func (u *unseen) move(dtS, vanishPerS float64) {
	for dtS > longestStepS {
		u.move(longestStepS, vanishPerS)
		dtS -= longestStepS
	}
	u.scale(kernel.Exp(-float64(vanishPerS * dtS)))
	for k := range u.slices {
		s := &u.slices[k]
		way := float64(u.speed(k) * dtS)
		s.fromM += way
		n := len(s.mass)
		for s.fromM > 0 {
			copy(s.mass[1:], s.mass[:n-1])
			s.mass[0] = 0
			s.fromM -= u.stepM
		}
		for s.fromM+float64(float64(n-1)*u.stepM) < u.lengthM {
			copy(s.mass, s.mass[1:])
			s.mass[n-1] = 0
			s.fromM += u.stepM
		}
		points := math.Ceil(math.Abs(way) / u.stepM)
		for p := range int(points) {
			x := float64((float64(p) + 0.5) / points * way)
			if way < 0 {
				x += u.lengthM
			}
			s.put(x, u.stepM, u.perS*u.part[k]*dtS/points)
		}
		for i := range s.mass {
			if x := s.fromM + float64(float64(i)*u.stepM); x < -u.stepM || x > u.lengthM+u.stepM {
				s.mass[i] = 0
			}
		}
	}
}

// put adds a mass at a position, divided between the two cells beside it so that
// the mean is kept.
func (s *slice) put(positionM, stepM, mass float64) {
	x := min(max((positionM-s.fromM)/stepM, 0), float64(len(s.mass)-1))
	i := min(int(x), len(s.mass)-2)
	f := x - float64(i)
	s.mass[i] += float64((1 - f) * mass)
	s.mass[i+1] += float64(f * mass)
}

// takeBack adds a density, times a factor: vehicles that are no longer followed
// one by one.
func (u *unseen) takeBack(g *grid, factor float64) {
	for k, s := range g.slices {
		x := min(max((g.speed(k)-u.firstMPS)/u.stepMPS, 0), float64(len(u.slices)-1))
		j := min(int(x), len(u.slices)-2)
		f := x - float64(j)
		for i, m := range s.mass {
			at := s.fromM + float64(float64(i)*g.stepM)
			u.slices[j].put(at, u.stepM, (1-f)*m*factor)
			u.slices[j+1].put(at, u.stepM, f*m*factor)
		}
	}
}

// window is the part of the intensity that keep names, on a finer grid; its
// total is what was expected there.
func (u *unseen) window(keep []bool) *grid {
	out := &grid{stepM: u.stepM, stepMPS: u.stepMPS, firstMPS: u.firstMPS}
	at := 0
	for _, s := range u.slices {
		n := len(s.mass)
		lo, hi := 0, n
		for lo < hi && !keep[at+lo] {
			lo++
		}
		for lo < hi && !keep[at+hi-1] {
			hi--
		}
		masses := append([]float64(nil), s.mass[lo:hi]...)
		for i := range masses {
			if !keep[at+lo+i] {
				masses[i] = 0
			}
		}
		out.slices = append(out.slices, slice{s.fromM + float64(float64(lo)*u.stepM), masses})
		at += n
	}
	for range refinements {
		out.refine()
	}
	out.trim()
	return out
}
