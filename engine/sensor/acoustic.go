package sensor

import (
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// AcousticBearing is the true direction from a roadside post to a vehicle
// that it hears.
type AcousticBearing struct {
	Post                 string
	BearingRad, SigmaRad float64
}

// Kind is "acoustic_bearing".
func (AcousticBearing) Kind() string { return KindAcousticBearing }

// Check reports a bearing that no filter could use.
func (m AcousticBearing) Check(Time) error {
	p := problems{what: KindAcousticBearing}
	if m.Post == "" {
		p.addf("post is missing: name one of the suite's posts")
	}
	p.name("post", m.Post)
	p.angle("bearing_deg", geo.Deg(m.BearingRad))
	p.sigmaDeg("sigma_deg", geo.Deg(m.SigmaRad))
	return p.err()
}

// SoundSpeedAirMPS is the speed of sound in dry air at a temperature in
// kelvin: sqrt(γRT/M) = 20.05·sqrt(T) m/s. Source: ideal gas, γ = 1.4,
// M = 0.02897 kg/mol. Negative temperatures give NaN.
func SoundSpeedAirMPS(temperatureK float64) float64 { return 20.05 * math.Sqrt(temperatureK) }

// ArrivalSigmaRad is the standard deviation of a direction of arrival that a
// pair of microphones spacingM apart derives from a time difference with
// standard deviation delayS, for sound arriving at angle broadsideRad from
// broadside:
//
//	σ_θ = c σ_τ / (d |cos θ|),
//
// from sin θ = c τ/d; it grows without bound towards the array's axis and is
// capped at π/√3, the standard deviation of a uniform direction.
func ArrivalSigmaRad(soundMPS, delayS, spacingM, broadsideRad float64) float64 {
	const uniform = math.Pi / 1.7320508075688772
	s := soundMPS * delayS / (spacingM * math.Abs(kernel.Cos(broadsideRad)))
	return math.Min(s, uniform)
}

// likelihood: z = β(post → vehicle) + convergence at the post + v, in the
// forms of type sight. A post with an axis hears z and its mirror image
// 2·axis - z alike: p = ½p(z) + ½p(mirror), exactly. The vehicle's own noise
// comes from where it is heard, not from its reference point: mounting
// offsets do not apply. The time that sound takes (0.3 s for 100 m) is not
// modelled yet: the bearing counts for its own time, so the sigma must cover
// what a vehicle moves in that time, or the post's clock be set back by
// time_offset_s for the usual distance.
func (m AcousticBearing) likelihood(c *Context, d Sensor) (any, error) {
	post, ok := c.Suite.Post(m.Post)
	if !ok {
		return nil, fmt.Errorf("post %q is not in the suite: add it under posts", m.Post)
	}
	at, err := c.point(post.Position(), "the post")
	if err != nil {
		return nil, err
	}
	s := sight{
		target: at, fromTarget: true, zRad: m.BearingRad, skew: newSkew(c.Frame, at),
		arm:        newArm(c, 0, 0),
		lateralVar: square(c.Suite.Vehicle.LateralSigmaM), nearM: 4 * c.CellM,
		noise: c.directionNoise(d, m.SigmaRad),
	}
	if post.AxisDeg != nil {
		s.mirrored, s.mirrorRad = true, geo.WrapPi(2*geo.Rad(*post.AxisDeg)-m.BearingRad)
	}
	return s.likelihood(m.SigmaRad), nil
}
