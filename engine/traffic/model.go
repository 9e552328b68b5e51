package traffic

import (
	"errors"
	"fmt"
	"math"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// Model says how vehicles come, move and are heard. Of Traffic the figures count
// and not the road.
type Model struct {
	sensor.Traffic
	// AirTemperatureC sets the speed of sound. DelayIgnored takes sound as
	// instant, to show what that does.
	AirTemperatureC float64
	DelayIgnored    bool
	// LateralM is the standard deviation of a vehicle's distance from the
	// centreline; 0 says that it keeps to it.
	LateralM float64
	// MaxCells is the greatest number of cells of a vehicle's grid: 8192.
	MaxCells int
}

// Filled is the model with its defaults.
func (m Model) Filled() Model {
	m.Traffic = m.Traffic.Filled()
	if m.MaxCells == 0 {
		m.MaxCells = 8192
	}
	return m
}

// Check lists everything wrong with a filled model.
func (m Model) Check() error {
	errs := []error{m.Traffic.Check()}
	in := func(name string, v, lo, hi float64) {
		if !(v >= lo && v <= hi) {
			errs = append(errs, fmt.Errorf("%s is %g: give %g to %g", name, v, lo, hi))
		}
	}
	in("the air's temperature", m.AirTemperatureC, -90, 60)
	in("the distance from the centreline", m.LateralM, 0, 100)
	in("the number of cells", float64(m.MaxCells), 512, 1<<20)
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
