package score

import "math"

// sums collects errors.
type sums struct {
	errM                                   Sample
	squareM2, meanM, nees                  float64
	in50, in95, in99, rightRoad, beyondAll int
}

func (s *sums) add(e one) {
	s.errM.Add(e.errM)
	s.squareM2 += e.errM * e.errM
	s.meanM += e.errM
	s.nees += e.nees
	for _, c := range []struct {
		n  *int
		is bool
	}{{&s.in50, e.in50}, {&s.in95, e.in95}, {&s.in99, e.in99}, {&s.rightRoad, e.right}, {&s.beyondAll, e.beyond}} {
		if c.is {
			*c.n++
		}
	}
}

// figures sums up; all nil without errors.
func (s *sums) figures(onRoads bool) Figures {
	n := s.errM.Len()
	f := Figures{Scored: n}
	if n == 0 {
		return f
	}
	share := func(k int) *float64 { return finite(float64(k) / float64(n)) }
	low, high := ANEESBounds(n, 2, 0.95)
	f.RMSEM, f.MeanM = finite(math.Sqrt(s.squareM2/float64(n))), finite(s.meanM/float64(n))
	f.P50M, f.P68M = finite(s.errM.Quantile(0.5)), finite(s.errM.Quantile(0.68))
	f.P95M, f.P999M = finite(s.errM.Quantile(0.95)), finite(s.errM.Quantile(0.999))
	f.MaxM = finite(s.errM.Max())
	f.ANEES, f.ANEESLow, f.ANEESHigh = finite(s.nees/float64(n)), &low, &high
	f.Coverage50, f.Coverage95, f.Coverage99 = share(s.in50), share(s.in95), share(s.in99)
	if onRoads {
		f.RightRoadFraction = share(s.rightRoad)
	}
	f.BeyondProtection = &s.beyondAll
	return f
}

// finite returns a pointer to x, nil if JSON has no such number.
func finite(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}
