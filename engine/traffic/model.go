package traffic

import (
	"errors"
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Model says how vehicles come, move and are heard. What is 0 takes the default
// that is named, unless 0 is allowed.
type Model struct {
	// AirTemperatureC sets the speed of sound. DelayIgnored takes sound as
	// instant, to show what that does.
	AirTemperatureC float64
	DelayIgnored    bool

	// ListenHz is how often a post listens: what it hears at one time is all it
	// hears in 1/ListenHz. 5.
	ListenHz float64
	// Detection is the probability that a vehicle near by is heard each time:
	// 0.9. It holds up to 0.8 of ReachM (150 m) and falls to nothing at ReachM.
	Detection float64
	ReachM    float64
	// FalsePerS is how many bearings of nothing a post has a second, from any
	// direction: 1.
	FalsePerS float64
	// Second is the probability that a vehicle that is heard gives two bearings
	// at a time, of its front and rear tyres, AxleM apart (2.7 m); 0 is allowed.
	Second float64
	AxleM  float64
	// LateralM is the standard deviation of a vehicle's distance from the
	// centreline; 0 is allowed.
	LateralM float64

	// PerHour is how many vehicles enter an hour: at the road's beginning and at
	// its end, together; 300. Their speed has a mean and a standard deviation,
	// 14 and 4 m/s, and is at least 0.5 m/s.
	PerHour            float64
	SpeedMPS, SpeedDev float64
	// WalkMPS is the standard deviation by which a vehicle's speed changes within
	// a second, as a random walk: 0.7 m/s.
	WalkMPS float64
	// VanishPerS is how often, a second, a vehicle goes otherwise than over the
	// road's ends: into a yard, or falls silent. 1e-4.
	VanishPerS float64

	// MaxVehicles is the greatest number of vehicles, or what may be one, that
	// are followed at once: 256. MaxCells of each one's grid: 8192.
	MaxVehicles int
	MaxCells    int
}

// Filled is the model with its defaults.
func (m Model) Filled() Model {
	or := func(v *float64, d float64) {
		if *v == 0 {
			*v = d
		}
	}
	or(&m.ListenHz, 5)
	or(&m.Detection, 0.9)
	or(&m.ReachM, 150)
	or(&m.FalsePerS, 1)
	or(&m.AxleM, 2.7)
	or(&m.PerHour, 300)
	or(&m.SpeedMPS, 14)
	or(&m.SpeedDev, 4)
	or(&m.WalkMPS, 0.7)
	or(&m.VanishPerS, 1e-4)
	if m.MaxVehicles == 0 {
		m.MaxVehicles = 256
	}
	if m.MaxCells == 0 {
		m.MaxCells = 8192
	}
	return m
}

// Check lists everything wrong with a filled model.
func (m Model) Check() error {
	var errs []error
	in := func(name string, v, lo, hi float64) {
		if !(v >= lo && v <= hi) {
			errs = append(errs, fmt.Errorf("%s is %g: give %g to %g", name, v, lo, hi))
		}
	}
	in("air_temperature_c", m.AirTemperatureC, -60, 60)
	in("listen_hz", m.ListenHz, 0.1, 100)
	in("detection", m.Detection, 0.01, 0.999)
	in("reach_m", m.ReachM, 10, 1000)
	in("false_per_s", m.FalsePerS, 1e-6, 100)
	in("second", m.Second, 0, 1)
	in("axle_m", m.AxleM, 1, 30)
	in("lateral_m", m.LateralM, 0, 30)
	in("per_hour", m.PerHour, 0.01, 10_000)
	in("speed_mps", m.SpeedMPS, 1, 60)
	in("speed_dev_mps", m.SpeedDev, 0.5, 30)
	in("walk_mps", m.WalkMPS, 0.01, 10)
	in("vanish_per_s", m.VanishPerS, 1e-9, 0.1)
	in("max_vehicles", float64(m.MaxVehicles), 1, 10_000)
	in("max_cells", float64(m.MaxCells), 512, 1<<20)
	return errors.Join(errs...)
}

// soundMPS is the speed of sound, infinite where the delay is ignored.
func (m Model) soundMPS() float64 {
	if m.DelayIgnored {
		return math.Inf(1)
	}
	return sensor.SoundSpeedAirMPS(273.15 + m.AirTemperatureC)
}

// detection is the probability that a vehicle at a distance from a post is heard.
func (m *Model) detection(distanceM float64) float64 {
	const full = 0.8
	return m.Detection * min(1, max(0, (m.ReachM-distanceM)/((1-full)*m.ReachM)))
}

// clutter is how many bearings of nothing a radian are expected each time.
func (m *Model) clutter() float64 { return m.FalsePerS / m.ListenHz / (2 * math.Pi) }

// Bearing is a direction in which a post hears something, clockwise from the
// frame's north at the post.
type Bearing struct{ Rad, SigmaRad float64 }

// Scan is all that a post hears at a time.
type Scan struct {
	Time     sensor.Time
	Post     string
	Bearings []Bearing
}

func (s Scan) check() error {
	for _, b := range s.Bearings {
		if !geo.Finite(b.Rad) || !(b.SigmaRad >= leastSigmaRad && b.SigmaRad <= mostSigmaRad+1e-9) {
			return fmt.Errorf("post %q: a bearing of %g° with sigma %g°: give a finite one with a sigma of 0.1° to 20°", s.Post, geo.Deg(b.Rad), geo.Deg(b.SigmaRad))
		}
	}
	return nil
}

// leastSigmaRad: 0.1°, with room for rounding. A grid as fine as a sharper
// bearing from near by would not be kept.
// One of more than 20° says hardly anything, and its density is not kept so well.
const (
	leastSigmaRad = 0.1*math.Pi/180 - 1e-9
	mostSigmaRad  = 20 * math.Pi / 180
)
