package sensor

import "math"

func near(a, b, tol float64) bool { return math.Abs(a-b) <= tol }
