package tune_test

import (
	"math"
	"testing"

	"leadline/engine/study/tune"
	"leadline/fixtures/study"
)

// TestRecovers: the figures of the world come back, to 3 standard errors. The long
// form, 50 times and 2 standard errors, is a row of make study.
func TestRecovers(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long")
	}
	const seed = 1
	all, r, err := study.Recover(seed, 1, 50, 200)
	if err != nil {
		t.Fatal(err)
	}
	for _, x := range all {
		if x.Known != tune.Estimated || !(math.Abs(x.Off) <= 3) {
			t.Errorf("seed %d: %s (%s): %v standard errors from %v", seed, x.Key, x.Known, x.Off, x.True)
		}
	}
	if !(r.After > r.Before) || !r.Converged {
		t.Errorf("seed %d: log evidence from %v to %v, converged %v", seed, r.Before, r.After, r.Converged)
	}
}
