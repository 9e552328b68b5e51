package filter

import (
	"errors"
	"math"
	"testing"
)

// TestWeighTinyMass: mass that is next to nothing, as refining leaves it, decides
// nothing, however likely it is; with nothing else there, that is a contradiction.
func TestWeighTinyMass(t *testing.T) {
	mass := []float64{1e-310, 2e-18, 2e-18}
	e, err := weigh(mass, []float64{0, -3000, -3000 - math.Ln2})
	if err != nil || math.Abs(e-(-3000+math.Log(0.75))) > 1e-9 {
		t.Errorf("log evidence %v, %v", e, err)
	}
	for i, want := range []float64{0, 2. / 3, 1. / 3} {
		if math.Abs(mass[i]-want) > 1e-12 {
			t.Errorf("mass %d is %v, want %v", i, mass[i], want)
		}
	}
	if _, err := weigh([]float64{1e-310}, []float64{0}); !errors.Is(err, ErrContradiction) {
		t.Errorf("nothing but next to nothing: %v", err)
	}
}
