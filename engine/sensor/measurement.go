package sensor

import "leadline/engine/geo"

// Time is an instant in nanoseconds since the Unix epoch, UTC.
type Time int64

// Seconds returns the time from u to t in seconds.
func (t Time) Seconds(u Time) float64 { return float64(t-u) / 1e9 }

// Event is one measurement with its place in the order of all: by time, then
// sensor, then number.
type Event struct {
	Time        Time
	Sensor      string
	Number      uint64
	Measurement Measurement
}

// Measurement is one of the kinds below. Values are SI and radians;
// directions are clockwise from true north.
type Measurement interface {
	// Kind is the name in the API and in drive files.
	Kind() string
	// Check lists what no filter could use: non-finite values, sigmas that
	// are not positive, an increment that does not end after it begins.
	Check(at Time) error
}

// The kinds of measurement.
type (
	// Travel is the distance along the track from Since to the event's time
	// (wheel odometer), negative in reverse.
	Travel struct {
		Since     Time
		DistanceM float64
		SigmaM    float64
	}
	// Turn is the heading change since Since (gyro), clockwise positive.
	Turn struct {
		Since    Time
		AngleRad float64
		SigmaRad float64
	}
	// Displacement is the ground-frame displacement since Since in true east
	// and north (inertial, Doppler log), with its covariance (EE, EN, NN).
	Displacement struct {
		Since         Time
		EastM, NorthM float64
		CovM2         [3]float64
	}
	// BodyDisplacement is displacement and turn in the vehicle's frame
	// (visual or wheel odometry).
	BodyDisplacement struct {
		Since                     Time
		ForwardM, RightM          float64
		TurnRad                   float64
		SigmaForwardM             float64
		SigmaRightM, SigmaTurnRad float64
	}
	// Speed is speed over ground or through water, with the course if it is
	// known (HasCourse).
	Speed struct {
		MPS, SigmaMPS float64
		HasCourse     bool
		CourseRad     float64
	}
	// HeadingFix is a true heading.
	HeadingFix struct{ HeadingRad, SigmaRad float64 }
	// Clearance is height above ground together with the vehicle's own
	// altitude: the ground's height is their difference.
	Clearance struct{ ClearanceM, AltitudeM, SigmaM float64 }
	// Sounding is a depth: the sea floor's height is minus the sum of depth
	// below transducer and transducer depth (plus tide).
	Sounding struct {
		DepthBelowTransducerM, TransducerDepthM, SigmaM float64
		Beams                                           []Beam
	}
	// Barometer is the vehicle's own altitude, or a pressure.
	Barometer struct {
		HasPressure bool
		AltitudeM   float64
		PressureHPa float64
		SigmaM      float64
	}
	// Range is a distance to a beacon.
	Range struct {
		Beacon         Beacon
		RangeM, SigmaM float64
	}
	// Bearing is the true direction from the vehicle to a beacon.
	Bearing struct {
		Beacon               Beacon
		BearingRad, SigmaRad float64
	}
	// AcousticBearing is the true direction from a roadside post to a
	// vehicle that it hears.
	AcousticBearing struct {
		Post                 string
		BearingRad, SigmaRad float64
	}
	// Fix is a satellite fix.
	Fix struct {
		Position geo.LonLat
		SigmaM   float64
	}
	// Sighting is what somebody says: the vehicle is in an area or on a
	// named road, unless they are mistaken.
	Sighting struct {
		Area     [][]geo.LonLat // polygon: exterior ring, then holes
		Road     string
		Mistaken float64 // probability
		Who      string
	}
	// Standstill says that the vehicle does not move.
	Standstill struct{}
)

// Beam is one beam of a sounding: depth at an offset from the transducer in
// the vehicle's frame.
type Beam struct{ ForwardM, RightM, DepthBelowTransducerM, SigmaM float64 }

// Beacon is a known place, either by position or by an id that the suite
// resolves.
type Beacon struct {
	ID       string
	Position geo.LonLat
}
