package kernel

import (
	"math"
	"testing"
)

// TestQuick proves the stated errors of the table.
func TestQuick(t *testing.T) {
	for x := -8.999; x < QuickEnd; x += 0.00371 {
		q, f := QuickTail(x)
		// Below zero an error of Q is one of 1-Q: absolute.
		if w := NormalUpper(x); math.Abs(q-w) > 1.1e-6*w || q != QuickUpper(x) {
			t.Errorf("Q(%v) = %v, want %v", x, q, w)
		}
		if w := NormalDensity(x); math.Abs(f-w) > 1.3e-6*w {
			t.Errorf("density(%v) = %v, want %v", x, f, w)
		}
	}
	for _, c := range []struct{ x, q float64 }{{-9, 1}, {-1e300, 1}, {math.Inf(-1), 1}, {9, 0}, {math.Inf(1), 0}} {
		if q, f := QuickTail(c.x); q != c.q || f != 0 || QuickUpper(c.x) != c.q {
			t.Errorf("at %v: %v and %v, want %v and 0", c.x, q, f, c.q)
		}
	}
}
