package sensor

import (
	"fmt"

	"leadline/engine/geo"
)

// Traffic describes a stretch of road that posts listen to, and the vehicles on
// it, of which nothing else is known. A figure that is 0 or left out takes the
// default that is named.
type Traffic struct {
	// Road is the centreline; positions along it count from its first corner.
	Road []Corner `yaml:"road"`
	// Lines are where vehicles are counted, 20 m or more from the road's ends.
	Lines []CountLine `yaml:"lines"`

	// ListenHz is how often a post listens: what it says at one time is all it
	// hears in 1/ListenHz. 5.
	ListenHz float64 `yaml:"listen_hz"`
	// Detection is the probability that a vehicle near by is heard each time:
	// 0.9. It holds up to 0.8 of ReachM (150 m) and falls to nothing at ReachM.
	Detection float64 `yaml:"detection"`
	ReachM    float64 `yaml:"reach_m"`
	// FalsePerS is how many bearings of nothing a post has a second, from any
	// direction: 1.
	FalsePerS float64 `yaml:"false_per_s"`
	// TwoBearings is the probability that a vehicle that is heard gives two at a
	// time, of its front and rear tyres, AxleM apart (2.7 m); 0 says never.
	TwoBearings float64 `yaml:"two_bearings"`
	AxleM       float64 `yaml:"axle_m"`

	// PerHour is how many vehicles enter an hour, over both ends of the road: 300.
	// Their speed has a mean and a standard deviation, 14 and 4 m/s.
	PerHour       float64 `yaml:"per_hour"`
	SpeedMPS      float64 `yaml:"speed_mps"`
	SpeedSigmaMPS float64 `yaml:"speed_sigma_mps"`
	// WalkMPS is the standard deviation by which a vehicle's speed changes within
	// a second, as a random walk: 0.7 m/s.
	WalkMPS float64 `yaml:"walk_mps_per_sqrt_s"`
	// VanishPerS is how often, a second, a vehicle goes otherwise than over the
	// road's ends: into a yard, or falls silent. 1e-4.
	VanishPerS float64 `yaml:"vanish_per_s"`
	// MaxVehicles is the greatest number of vehicles, or what may be one, that are
	// followed at once: 256.
	MaxVehicles int `yaml:"max_vehicles"`
}

// Corner is a point of a road.
type Corner struct {
	LonDeg *float64 `yaml:"lon"`
	LatDeg *float64 `yaml:"lat"`
}

// Position returns the corner's place; only a valid suite has one.
func (c Corner) Position() geo.LonLat { return geo.FromDegrees(*c.LonDeg, *c.LatDeg) }

// CountLine is a line across the road, at a position along it.
type CountLine struct {
	Name string  `yaml:"name"`
	AtM  float64 `yaml:"at_m"`
}

// Filled returns the description with its defaults.
func (t Traffic) Filled() Traffic {
	or := func(v *float64, d float64) {
		if *v == 0 {
			*v = d
		}
	}
	or(&t.ListenHz, 5)
	or(&t.Detection, 0.9)
	or(&t.ReachM, 150)
	or(&t.FalsePerS, 1)
	or(&t.AxleM, 2.7)
	or(&t.PerHour, 300)
	or(&t.SpeedMPS, 14)
	or(&t.SpeedSigmaMPS, 4)
	or(&t.WalkMPS, 0.7)
	or(&t.VanishPerS, 1e-4)
	if t.MaxVehicles == 0 {
		t.MaxVehicles = 256
	}
	return t
}

const (
	maxCorners = 1000
	maxLines   = 32
)

// Check lists what is wrong with the figures, in one error.
func (t Traffic) Check() error {
	return (&Suite{Traffic: t}).Validate()
}

func (f *findings) traffic(t Traffic) {
	if len(t.Road) > maxCorners || len(t.Lines) > maxLines {
		f.add("traffic.road", "at most %d corners and %d lines are allowed", maxCorners, maxLines)
		return
	}
	if len(t.Road) == 1 {
		f.add("traffic.road", "one corner is no road: give two or more")
	}
	if len(t.Road) == 0 && len(t.Lines) > 0 {
		f.add("traffic.lines", "there is no road: give traffic.road")
	}
	for i, c := range t.Road {
		f.place(fmt.Sprintf("traffic.road[%d]", i), c.LonDeg, c.LatDeg, 0)
	}
	seen := map[string]bool{}
	for i, l := range t.Lines {
		path := fmt.Sprintf("traffic.lines[%d]", i)
		f.id(path+".name", l.Name, seen)
		f.within(path+".at_m", l.AtM, 0, 50_000)
	}
	f.unless0("traffic.listen_hz", t.ListenHz, 0.1, 100)
	f.unless0("traffic.detection", t.Detection, 0.01, 0.999)
	f.unless0("traffic.reach_m", t.ReachM, 10, 1000)
	f.unless0("traffic.false_per_s", t.FalsePerS, 1e-6, 100)
	f.within("traffic.two_bearings", t.TwoBearings, 0, 1)
	f.unless0("traffic.axle_m", t.AxleM, 1, 30)
	f.unless0("traffic.per_hour", t.PerHour, 0.01, 10_000)
	f.unless0("traffic.speed_mps", t.SpeedMPS, 1, 60)
	f.unless0("traffic.speed_sigma_mps", t.SpeedSigmaMPS, 0.5, 30)
	f.unless0("traffic.walk_mps_per_sqrt_s", t.WalkMPS, 0.01, 10)
	f.unless0("traffic.vanish_per_s", t.VanishPerS, 1e-9, 0.1)
	f.within("traffic.max_vehicles", float64(t.MaxVehicles), 0, 10_000)
}
