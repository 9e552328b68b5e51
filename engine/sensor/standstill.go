package sensor

// Standstill says that the vehicle does not move: a motion of zero over the
// time since the same sensor's previous standstill, at most standstillS
// seconds (a first one covers standstillS). Over the time it covers it
// overrules every other motion: a gyro's or an inertial unit's residual drift
// is known to be no motion: moved = 0. Source: practice, a zero velocity update.
type Standstill struct{}

const (
	// standstillS bounds the time one standstill speaks for.
	standstillS = 1.0
	// A standing vehicle still rocks and creeps; these are random walks, so
	// that they do not depend on the rate (practice).
	standstillMPerSqrtS   = 0.01
	standstillRadPerSqrtS = 0.0002 // 0.01°
)

// Kind is "standstill".
func (Standstill) Kind() string { return KindStandstill }

// Check accepts every standstill.
func (Standstill) Check(Time) error { return nil }
