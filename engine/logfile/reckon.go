package logfile

import (
	"math"

	"leadline/engine/kernel"
	"leadline/engine/sensor"
)

// Reckon makes displacements over ground of speed and heading: dead reckoning.
// They take the place of the speed measurements of VBW and VHW. Between two
// speeds at most ten seconds apart, with a heading at most five seconds old at
// each,
//
//	D = dt · (u₀ + u₁)/2,  u = v·(sin ψ, cos ψ) + w·(cos ψ, -sin ψ),
//
// v along the keel, w to the right, by VBW over ground as long as there is one,
// otherwise through the water. Its covariance along and across the heading is
//
//	along:  σ_v²·T + σ_c²·C,   across: (|u|·σ_ψ)²·T + σ_c²·C, and σ_v²·T if w was measured,
//
// T = dt·max(dt, τ), as errors that last for τ add up, and C the same with the
// time for which a current lasts. σ_v and σ_ψ are those of speed and heading,
// σ_c that of the current and of drift to leeward, through the water alone.
//
// Whoever estimates the heading can do without: a suite that declares a speed
// (without course) and a heading lets the filter take both as they are.
type Reckon struct {
	Sensor string `yaml:"sensor"` // log unless said
	// SpeedSigmaMPS is 0.1 unless said, HeadingSigmaDeg that of the heading.
	// CorrelationS, 10, is how long their errors last; practice.
	SpeedSigmaMPS   float64 `yaml:"speed_sigma_mps"`
	HeadingSigmaDeg float64 `yaml:"heading_sigma_deg"`
	CorrelationS    float64 `yaml:"correlation_s"`
	// CurrentSigmaMPS, 0.25 (half a knot), is that of each component of the
	// current, CurrentCorrelationS, 300, how long it lasts; practice. A tidal
	// stream lasts for hours: state the larger of the two.
	CurrentSigmaMPS     float64 `yaml:"current_sigma_mps"`
	CurrentCorrelationS float64 `yaml:"current_correlation_s"`
}

func (r *Reckon) check(p *problems) {
	if len(r.Sensor) > maxName {
		p.addf("reckon.sensor", "it has %d bytes: at most %d", len(r.Sensor), maxName)
	}
	for _, v := range []struct {
		key    string
		v      float64
		lo, hi float64
	}{
		{"speed_sigma_mps", r.SpeedSigmaMPS, 1e-6, 100},
		{"heading_sigma_deg", r.HeadingSigmaDeg, 1e-6, 180},
		{"correlation_s", r.CorrelationS, 1e-3, 86400},
		{"current_sigma_mps", r.CurrentSigmaMPS, 1e-6, 100},
		{"current_correlation_s", r.CurrentCorrelationS, 1e-3, 86400},
	} {
		if v.v != 0 {
			p.within("reckon."+v.key, v.v, v.lo, v.hi)
		}
	}
}

func (r *Reckon) sensor() string {
	if r.Sensor == "" {
		return "log"
	}
	return r.Sensor
}

func or(v, def float64) float64 {
	if v == 0 {
		return def
	}
	return v
}

// Longest times between readings that still make an increment, and for which
// a heading holds.
const (
	maxRateGap    = sensor.Time(10e9)
	maxHeadingAge = sensor.Time(5e9)
)

// motionState is a velocity over ground or through water at a time.
type motionState struct {
	at           sensor.Time
	east, north  float64 // m/s
	headingRad   float64
	headingSigma float64 // rad
	ground       bool
	across       bool // the component across the keel was measured
}

// displacement is the way from a to b, false if too long passed.
func (r *Reckon) displacement(a, b motionState) (sensor.Displacement, bool) {
	if b.at <= a.at || b.at-a.at > maxRateGap || a.ground != b.ground {
		return sensor.Displacement{}, false
	}
	dt := b.at.Seconds(a.at)
	ve, vn := 0.5*(a.east+b.east), 0.5*(a.north+b.north)
	m := sensor.Displacement{Since: a.at, EastM: ve * dt, NorthM: vn * dt}

	lasting := dt * math.Max(dt, or(r.CorrelationS, 10))
	v2 := square(or(r.SpeedSigmaMPS, 0.1)) * lasting
	h2 := (ve*ve + vn*vn) * square(b.headingSigma) * lasting
	c2 := 0.0
	if !b.ground {
		c2 = square(or(r.CurrentSigmaMPS, 0.25)) * dt * math.Max(dt, or(r.CurrentCorrelationS, 300))
	}
	along, across := v2+c2, h2+c2
	if b.across {
		across += v2
	}
	const least = 1e-12 // m²: a sigma of a micrometre, the least that is accepted
	along, across = math.Max(along, least), math.Max(across, least)
	s, c := kernel.Sincos(b.headingRad)
	m.CovM2 = [3]float64{
		along*s*s + across*c*c,
		(along - across) * s * c,
		along*c*c + across*s*s,
	}
	return m, true
}

func square(x float64) float64 { return x * x }
