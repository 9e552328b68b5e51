package filter

// Quantity is one of the quantities over which each Gaussian of a belief is
// kept. The first Dim of them are the position within the cell in metres.
type Quantity struct {
	Name string // as in the constants below; sensors find theirs by name
	// Angular quantities are radians and wrap at 2π.
	Angular bool
	// PriorMean and PriorVar are where it starts. Heading on lines starts at
	// the heading of the line instead of PriorMean.
	PriorMean, PriorVar float64
	// DriftVar is the variance it gains a second, as a random walk.
	DriftVar float64
	// Axis has a velocity on a plane kept as two more axes of the grid, instead of
	// in Gaussians (Slices).
	Axis bool
}

// Names of quantities, with units. An error is what was measured, less what is
// true.
const (
	Along           = "along_m"            // position within the cell on a line
	East            = "east_m"             // position within the cell on a plane
	North           = "north_m"            //
	Heading         = "heading_rad"        // vehicle heading, clockwise from frame north
	Speed           = "speed_mps"          // along a line, in its direction
	VelocityEast    = "velocity_east_mps"  // in the frame
	VelocityNorth   = "velocity_north_mps" //
	OdometerScale   = "odometer_scale"     // true distance / measured distance - 1
	GyroBias        = "gyro_bias_rad_s"    // error of a turn, a second
	AltimeterOffset = "altimeter_offset_m" // error of (altitude - clearance)
	BarometerOffset = "barometer_offset_m" // error of an altitude on a road
	Tide            = "tide_m"             // the water's surface above the map's datum
	SoundSpeedScale = "sound_speed_scale"  // true depth below transducer / measured depth - 1
	// Errors of a displacement: of its velocity in true east and north, and the
	// angle by which the true one is turned clockwise from the measured one.
	VelocityErrorEast  = "velocity_error_east_mps"
	VelocityErrorNorth = "velocity_error_north_mps"
	AzimuthError       = "azimuth_error_rad"
)

// Index returns the index of the named quantity, or -1.
func Index(qs []Quantity, name string) int {
	for i, q := range qs {
		if q.Name == name {
			return i
		}
	}
	return -1
}

// Packed returns the index of element (i, j), i ≥ j, of a symmetric matrix
// kept as its lower triangle, row by row.
func Packed(i, j int) int { return i*(i+1)/2 + j }

// Step moves a belief: x' = F x + Add + w with w ~ N(0, Q), over the K
// quantities of the belief (over east and north alone on a plane without
// any). Positions are continuous: Add may be any number of cells.
type Step struct {
	F   []float64 // K×K by rows; nil is the identity
	Add []float64 // K
	Q   []float64 // packed K(K+1)/2, positive semi-definite
	// Local, if set, replaces the position rows of F and Add for each
	// Gaussian: motion that depends on where a vehicle is or which way it
	// faces. It cannot be used on a plane without quantities.
	Local Local

	spare []float64 // memory for F
}

// Local computes position-dependent motion for n Gaussians: the shift of the
// position quantities (add, n×Dim) and their derivatives with respect to all
// quantities (f, n×Dim×K, including the 1 of a position on itself), given the
// columns at the Gaussians' positions, their means (n×K) and covariances (n times
// packed). Where the motion is not linear over a Gaussian, both may be the means
// over it, instead of the values at its mean.
type Local interface {
	Wants() Wants
	Local(add, f []float64, at *Columns, mean, cov []float64)
}

// NewStep makes a step over k quantities that changes nothing.
func NewStep(k int) Step {
	return Step{Add: make([]float64, k), Q: make([]float64, k*(k+1)/2)}
}

// Reset makes it a step over k quantities that changes nothing, keeping what memory
// there is.
func (s *Step) Reset(k int) {
	s.Add, s.Q = resize(s.Add, k), resize(s.Q, k*(k+1)/2)
	clear(s.Add)
	clear(s.Q)
	if s.F != nil {
		s.spare = s.F
	}
	s.F, s.Local = nil, nil
}

// SetF sets element (i, j) of F, making F the identity first if it is nil.
func (s *Step) SetF(i, j int, v float64) {
	k := len(s.Add)
	if s.F == nil {
		s.F = resize(s.spare, k*k)
		clear(s.F)
		for d := range k {
			s.F[d*k+d] = 1
		}
	}
	s.F[i*k+j] = v
}

// fullF writes F as a whole matrix into dst.
func (s *Step) fullF(dst []float64, k int) []float64 {
	dst = append(resize(dst, k*k)[:0], s.F...)
	if s.F == nil {
		dst = dst[:k*k]
		clear(dst)
		for d := range k {
			dst[d*k+d] = 1
		}
	}
	return dst
}
