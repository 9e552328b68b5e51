package session

import (
	"math"
	"reflect"
	"strings"
	"testing"

	"leadline/engine/summary"
)

// TestPosteriorInterval: who wants posteriors less often gets those that come, and
// one at the end, as they would have been, with all evidence in between; the belief
// and what it is turned by stay the same bits.
func TestPosteriorInterval(t *testing.T) {
	road := winding(1)
	events := rated(road, 10, 6, 3)
	run := func(intervalS float64) (*Session, []*summary.Posterior) {
		s := open(t, Config{Space: road, Names: road, Start: pointStart(road, road.charted(20), 5), PosteriorS: intervalS})
		return s, feed(t, s, events).posteriors
	}
	every, all := run(0)
	for _, intervalS := range []float64{0.1, 1, 7, MaxPosteriorS} {
		s, some := run(intervalS)
		if !reflect.DeepEqual(every.state.belief, s.state.belief) || every.state.pose != s.state.pose || every.state.logEvidence != s.state.logEvidence {
			t.Errorf("every %v s: belief, pose or evidence differ", intervalS)
		}
		if intervalS == 0.1 {
			samePosteriors(t, all, some)
			continue
		}
		if want := int(math.Floor(ratedS/intervalS)) + 2; len(some) < 2 || len(some) > want {
			t.Errorf("every %v s: %d posteriors, want 2 to %d", intervalS, len(some), want)
		}
		i, voices := 0, 0
		for n, p := range some {
			if n > 0 && n < len(some)-1 && float64(p.TimeNS-some[n-1].TimeNS) < intervalS*1e9 {
				t.Errorf("every %v s: posterior %d comes %v s after the one before", intervalS, n, float64(p.TimeNS-some[n-1].TimeNS)/1e9)
			}
			for i < len(all) && all[i].TimeNS < p.TimeNS {
				voices += len(all[i].Evidence)
				i++
			}
			if i == len(all) || all[i].TimeNS != p.TimeNS {
				t.Fatalf("every %v s: there is none of %d otherwise", intervalS, p.TimeNS)
			}
			voices += len(all[i].Evidence)
			if want := min(voices, maxEvidence); len(p.Evidence) != want {
				t.Errorf("every %v s: posterior %d lists %d pieces of evidence, want %d", intervalS, n, len(p.Evidence), want)
			}
			got, want := *p, *all[i]
			got.Evidence, want.Evidence = nil, nil
			if !reflect.DeepEqual(got, want) {
				t.Errorf("every %v s: posterior %d differs:\n%+v\n%+v", intervalS, n, got, want)
			}
			i, voices = i+1, 0
		}
	}
	for _, intervalS := range []float64{-1, MaxPosteriorS + 1, math.NaN(), math.Inf(1)} {
		if _, err := New(Config{Space: road, PosteriorS: intervalS}); err == nil || !strings.Contains(err.Error(), "PosteriorS") {
			t.Errorf("%v s: %v", intervalS, err)
		}
	}
}
