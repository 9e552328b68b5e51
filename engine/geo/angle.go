package geo

import "math"

// Rad converts degrees to radians.
func Rad(deg float64) float64 { return deg * (math.Pi / 180) }

// Deg converts radians to degrees.
func Deg(rad float64) float64 { return rad * (180 / math.Pi) }

// WrapPi returns a plus a multiple of 2π in [-π, π): the one place where
// angles wrap. NaN and infinities give NaN.
func WrapPi(a float64) float64 {
	if a >= -math.Pi && a < math.Pi {
		return a
	}
	a = math.Mod(a+math.Pi, 2*math.Pi)
	if a < 0 {
		a += 2 * math.Pi
		if a >= 2*math.Pi { // a was a negative denormal
			a = 0
		}
	}
	return a - math.Pi
}

// WrapCompass returns a plus a multiple of 2π in [0, 2π), as directions are
// shown.
func WrapCompass(a float64) float64 {
	a = WrapPi(a)
	if a < 0 {
		a += 2 * math.Pi
		if a >= 2*math.Pi {
			return 0
		}
	}
	return a
}
