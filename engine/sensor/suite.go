package sensor

import (
	"leadline/engine/geo"
)

// Suite describes a vehicle's sensors. It is what a suite file says, in the
// file's units (degrees where a name says so); a figure that is 0 or left out
// takes the documented default. Use For to fill the defaults in.
type Suite struct {
	Vehicle     Vehicle     `yaml:"vehicle"`
	Environment Environment `yaml:"environment"`
	Sensors     []Sensor    `yaml:"sensors"`
	Beacons     []Place     `yaml:"beacons"`
	Posts       []Post      `yaml:"posts"`
	Traffic     Traffic     `yaml:"traffic"`
}

// Vehicle holds what concerns the vehicle as a whole.
type Vehicle struct {
	// AlertLimitM is the 95 % radius within which a vehicle is located:
	// 25 m on roads unless said, 556 m on a plane (ICAO Annex 10, horizontal
	// alert limit of a non-precision approach).
	AlertLimitM float64 `yaml:"alert_limit_m"`
	// IntegrityRisk is the probability with which the protection radius may
	// be wrong: on a plane 1e-7 unless said (the order that civil aviation asks
	// for an hour of flight, ICAO Annex 10); on roads 1e-4, since a belief that
	// starts on a whole town has dropped up to 1e-6 of its mass by the time it
	// is located (measured) and may not have dropped a tenth of the risk.
	IntegrityRisk float64 `yaml:"integrity_risk"`
	// FalseAlarmH is for how many hours, on average, no sensor and not all of
	// them together raise a false alarm: 1000 h unless said (practice: with ten
	// sensors one in some four days of driving; ln 10 = 2.3 nats more or less of
	// threshold change it tenfold).
	FalseAlarmH float64 `yaml:"false_alarm_h"`
	// LateWindowS is how late an event may come and still be replayed, 2 s
	// unless said.
	LateWindowS float64 `yaml:"late_window_s"`
	// LookBackS is how long ago a vehicle's server can be asked what is known of it
	// given all since: LateWindowS unless said.
	LookBackS float64 `yaml:"look_back_s"`
	// HoldS is how long a time waits for a motion sensor that is due, 1 s
	// unless said.
	HoldS float64 `yaml:"hold_s"`
	// LateralSigmaM is the standard deviation of the vehicle's distance from
	// a road's centreline, 2.5 m unless said; it has no meaning on a plane.
	LateralSigmaM float64 `yaml:"lateral_sigma_m"`
	// StretchMPerSqrtM and CornerSigmaM say how the way driven differs from
	// the way on the map: by 0.15 m per square root of a metre unless said
	// (a map error of 1.5 m that lasts for 200 m: sqrt(2·1.5²/200)), and by
	// 2 m a right angle unless said (a corner cut with a radius of 6 m saves
	// (2 - π/2)·6 = 2.6 m; a lane 2 m off the centreline adds or saves up to
	// 4 m; practice, and what kept the 50 and 95 % radii true on simulated
	// drives). They have no meaning on a plane.
	StretchMPerSqrtM float64 `yaml:"stretch_m_per_sqrt_m"`
	CornerSigmaM     float64 `yaml:"corner_sigma_m"`
	// KeepsRightM is how far right of a road's line the vehicle keeps on average,
	// negative where it keeps left: where lines are centrelines half a lane, 1.75 m
	// (practice). A right angle is π/2 of it shorter to the right than on the map
	// and longer to the left; on simulated drives that keep 0 to 4 m to the right
	// the way at a right angle differs from the map's by 2.9 m rms, and by 1.7 m
	// with this known. 0 says nothing of it. It counts where distance and turns are
	// measured, and has no meaning on a plane.
	KeepsRightM float64 `yaml:"keeps_right_m"`
	// MaxSpeedMPS, MaxAccelMPS2 and MaxTurnDPS are the motion prior: what
	// the vehicle may do while nothing measures it. 40 m/s, 3 m/s² and 30 °/s
	// unless said.
	MaxSpeedMPS  float64 `yaml:"max_speed_mps"`
	MaxAccelMPS2 float64 `yaml:"max_accel_mps2"`
	MaxTurnDPS   float64 `yaml:"max_turn_dps"`
	// VelocityDriftMPSPerSqrtS, above 0, has the velocity estimated: the standard
	// deviation of its change in a second, which grows with the root of the time. While
	// nothing measures the motion it then takes the place of the motion prior.
	// VelocitySigmaMPS is that of the velocity at the start along each axis, or of the
	// speed on roads: unless said, that of a speed anywhere up to MaxSpeedMPS.
	// VelocityGrid keeps it as two more axes of the grid on a plane, instead of as
	// quantities of each cell's Gaussians.
	VelocityDriftMPSPerSqrtS float64 `yaml:"velocity_drift_mps_per_sqrt_s"`
	VelocitySigmaMPS         float64 `yaml:"velocity_sigma_mps"`
	VelocityGrid             bool    `yaml:"velocity_grid"`
	// LowestM and HighestM span the plausible heights of the ground: an
	// unknown height has the density of a uniform distribution over them.
	// Both 0: -500 to 9000 m on roads, -11000 to 9000 m on a plane (the
	// lowest land and sea floor and the highest summit, rounded outwards).
	LowestM  float64 `yaml:"lowest_m"`
	HighestM float64 `yaml:"highest_m"`
	// OffMapPerM is how often, a metre travelled, a vehicle leaves the mapped
	// roads: for a car park, a yard or a road that the map lacks. 1e-5 unless
	// said, once in 100 km (practice); 0 says never, and nothing is kept of it.
	// OnMapPerM is how often it takes to a mapped road, a metre that it moves on
	// one and in its direction: 0.05 unless said, within some 20 m (practice).
	// They have no meaning on a plane.
	OffMapPerM *float64 `yaml:"off_map_per_m"`
	OnMapPerM  *float64 `yaml:"on_map_per_m"`
	// LostPerS is how often, a second, a vehicle comes to be somewhere else
	// without having moved by its sensors, or is lost by the filter: 1e-9
	// unless said, once in 30 years. MovedPerS is added while it is silent or
	// stands for more than a minute, when it may be towed or ferried: 1e-5
	// unless said, once in 28 hours of that. Both are practice; both 0 say
	// never, and so does a suite for planes that says nothing.
	LostPerS  *float64 `yaml:"lost_per_s"`
	MovedPerS *float64 `yaml:"moved_per_s"`
}

// Environment holds what sensors need to know of the surroundings.
type Environment struct {
	// AirTemperatureC sets the speed of sound for posts, 15 °C unless said.
	AirTemperatureC *float64 `yaml:"air_temperature_c"`
	// SeaLevelPressureHPa turns pressures into altitudes, 1013.25 unless
	// said. A day's weather changes it by 10 hPa and more, 8 m of altitude a
	// hPa: give it.
	SeaLevelPressureHPa float64 `yaml:"sea_level_pressure_hpa"`
	// MapErrorLengthM is over what distance the error of the map's heights is
	// correlated, falling by 1/e: unless said, a raster's detail on a plane,
	// between whose posts heights are interpolated, and 100 m on roads (a
	// cutting or a bridge; practice).
	MapErrorLengthM float64 `yaml:"map_error_length_m"`
}

// What BeamReturn may say.
const (
	ReturnMean    = "mean"
	ReturnNearest = "nearest"
)

// Sensor describes one sensor by its name in events.
type Sensor struct {
	Name string `yaml:"name"`
	Kind string `yaml:"kind"`
	// Course says of a speed that it comes with its course.
	Course   bool     `yaml:"course"`
	Mounting Mounting `yaml:"mounting"`
	// TimeOffsetS is by how much the sensor's times are late; it is taken
	// off them.
	TimeOffsetS float64 `yaml:"time_offset_s"`
	// Sign is 1 or, for a sensor that counts the other way, -1. It applies
	// to travel, turn, body displacement and speed.
	Sign int `yaml:"sign"`
	// Noise is used where a measurement carries no sigma.
	Noise SensorNoise `yaml:"noise"`
	// OutlierProbability is the weight of the flat part; its defaults are in
	// outlierDefault.
	OutlierProbability *float64 `yaml:"outlier_probability"`
	// HeavyProbability and HeavyFactor add a second Gaussian part with
	// HeavyFactor times the standard deviation.
	HeavyProbability float64 `yaml:"heavy_probability"`
	HeavyFactor      float64 `yaml:"heavy_factor"`
	// MaxRangeM is the largest range of a range sensor, the span of its
	// outliers: 10 km unless said.
	MaxRangeM float64 `yaml:"max_range_m"`
	// CorrelationS is how long an error lasts; defaults in
	// correlationDefault.
	CorrelationS *float64 `yaml:"correlation_s"`
	// BeamWidthDeg is the full opening angle of a beam that measures a
	// height, and BeamReturn which of the ground within its footprint counts:
	// the mean, unless said, or the nearest.
	BeamWidthDeg float64 `yaml:"beam_width_deg"`
	BeamReturn   string  `yaml:"beam_return"`
	// AttitudeSigmaDeg is by how much pitch and roll stand off the vertical,
	// an axis, where they are not taken out.
	AttitudeSigmaDeg float64 `yaml:"attitude_sigma_deg"`
	// CanopyProbability is the part of a clearance's measurements that end
	// above the ground, by anything up to CanopyHeightM: trees, roofs.
	CanopyProbability float64 `yaml:"canopy_probability"`
	CanopyHeightM     float64 `yaml:"canopy_height_m"`
	// VerticalDatum names what the sensor's heights refer to; it is compared
	// with the map's.
	VerticalDatum string     `yaml:"vertical_datum"`
	Nuisances     []Nuisance `yaml:"nuisances"`
}

// Mounting is where a sensor sits relative to the vehicle's reference point,
// in the vehicle's axes. On roads the reference point is on the road's
// surface, on water at the waterline.
type Mounting struct {
	ForwardM float64 `yaml:"forward_m"`
	RightM   float64 `yaml:"right_m"`
	DownM    float64 `yaml:"down_m"`
}

// SensorNoise is the standard deviation of measurements that carry none. A
// kind uses the figures of its own units.
type SensorNoise struct {
	SigmaM         float64 `yaml:"sigma_m"`
	SigmaDeg       float64 `yaml:"sigma_deg"`
	SigmaMPS       float64 `yaml:"sigma_mps"`
	SigmaMPerSqrtM float64 `yaml:"sigma_m_per_sqrt_m"` // a distance: times √|distance|
	DegPerSqrtS    float64 `yaml:"sigma_deg_per_sqrt_s"`
}

// Place is a known place by its id.
type Place struct {
	ID      string   `yaml:"id"`
	LonDeg  *float64 `yaml:"lon"`
	LatDeg  *float64 `yaml:"lat"`
	HeightM float64  `yaml:"height_m"`
}

// Position returns the place; only a valid suite has one.
func (p Place) Position() geo.LonLat { return geo.FromDegrees(*p.LonDeg, *p.LatDeg) }

// Post is a place that hears vehicles. AxisDeg is the true direction of a
// line of microphones: such an array cannot tell one side of its axis from
// the other, and its bearings count for both. A post without an axis tells
// all directions apart.
type Post struct {
	ID      string   `yaml:"id"`
	LonDeg  *float64 `yaml:"lon"`
	LatDeg  *float64 `yaml:"lat"`
	HeightM float64  `yaml:"height_m"`
	AxisDeg *float64 `yaml:"axis_deg"`
	// SpacingM and DelaySigmaS give the sigma of bearings that carry none,
	// by ArrivalSigmaRad; SigmaDeg does so directly.
	SpacingM    float64 `yaml:"spacing_m"`
	DelaySigmaS float64 `yaml:"delay_sigma_s"`
	SigmaDeg    float64 `yaml:"sigma_deg"`
}

// Position returns the post's place; only a valid suite has one.
func (p Post) Position() geo.LonLat { return geo.FromDegrees(*p.LonDeg, *p.LatDeg) }

// Default is the suite of a vehicle that has none, on roads (dim 1) or on a
// plane (dim 2): no sensors are declared, so every kind is taken with the
// sigmas it carries and the defaults named on the types.
func Default(dim int) *Suite { return (&Suite{}).For(dim) }

// For returns a copy of the suite with the defaults for roads (dim 1) or a
// plane (dim 2) filled in.
func (s *Suite) For(dim int) *Suite {
	mustDim(dim)
	c := *s
	or := func(v *float64, roads, plane float64) {
		if *v == 0 {
			*v = roads
			if dim == 2 {
				*v = plane
			}
		}
	}
	v := &c.Vehicle
	or(&v.AlertLimitM, 25, 556)
	or(&v.IntegrityRisk, 1e-4, 1e-7)
	or(&v.FalseAlarmH, 1000, 1000)
	or(&v.LateWindowS, 2, 2)
	or(&v.HoldS, 1, 1)
	or(&v.LateralSigmaM, 2.5, 0)
	if dim == 2 {
		v.LateralSigmaM = 0
	}
	or(&v.StretchMPerSqrtM, 0.15, 0)
	or(&v.CornerSigmaM, 2, 0)
	or(&v.MaxSpeedMPS, 40, 40)
	or(&v.MaxAccelMPS2, 3, 3)
	or(&v.MaxTurnDPS, 30, 30)
	if v.LowestM == 0 && v.HighestM == 0 {
		or(&v.LowestM, -500, -11000)
		or(&v.HighestM, 9000, 9000)
	}
	rate := func(v **float64, roads float64) {
		if *v == nil && dim == 1 {
			*v = &roads
		}
	}
	rate(&v.OffMapPerM, 1e-5)
	rate(&v.OnMapPerM, 0.05)
	rate(&v.LostPerS, 1e-9)
	rate(&v.MovedPerS, 1e-5)
	or(&c.Environment.SeaLevelPressureHPa, isaP0HPa, isaP0HPa)
	if c.Environment.AirTemperatureC == nil {
		t := 15.0
		c.Environment.AirTemperatureC = &t
	}
	return &c
}

func mustDim(dim int) {
	if dim != 1 && dim != 2 {
		panic("sensor: dim is 1 on roads and 2 on a plane")
	}
}

// Sensor returns the description of a sensor; one that the suite does not
// name has the defaults of its kind.
func (s *Suite) Sensor(name, kind string) Sensor {
	for _, d := range s.Sensors {
		if d.Name == name {
			return d
		}
	}
	return Sensor{Name: name, Kind: kind}
}

// Beacon returns the beacon of an id.
func (s *Suite) Beacon(id string) (Place, bool) {
	for _, b := range s.Beacons {
		if b.ID == id {
			return b, true
		}
	}
	return Place{}, false
}

// Post returns the post of an id.
func (s *Suite) Post(id string) (Post, bool) {
	for _, p := range s.Posts {
		if p.ID == id {
			return p, true
		}
	}
	return Post{}, false
}
