package compare

import (
	"math"

	"leadline/engine/study/score"
)

// Figure is one of a score that is compared.
type Figure struct {
	Name string
	of   func(*score.Score) *float64
	// right is the value of a figure that is to be met; NaN where smaller is
	// better. rising says that larger is.
	right  float64
	rising bool
}

// worse is how much worse than the best a value is.
func (f *Figure) worse(v float64) float64 {
	switch {
	case f.right == f.right:
		return math.Abs(v - f.right)
	case f.rising:
		return -v
	}
	return v
}

var smaller = math.NaN()

// Figures are those of score.json that are compared, in order.
var Figures = []Figure{
	{"rmse_m", func(s *score.Score) *float64 { return s.Figures.RMSEM }, smaller, false},
	{"mean_m", func(s *score.Score) *float64 { return s.Figures.MeanM }, smaller, false},
	{"p50_m", func(s *score.Score) *float64 { return s.Figures.P50M }, smaller, false},
	{"p68_m", func(s *score.Score) *float64 { return s.Figures.P68M }, smaller, false},
	{"p75_m", func(s *score.Score) *float64 { return s.P75M }, smaller, false},
	{"p95_m", func(s *score.Score) *float64 { return s.Figures.P95M }, smaller, false},
	{"p99_9_m", func(s *score.Score) *float64 { return s.Figures.P999M }, smaller, false},
	{"max_m", func(s *score.Score) *float64 { return s.Figures.MaxM }, smaller, false},
	{"along_rmse_m", func(s *score.Score) *float64 { return s.AlongRMSEM }, smaller, false},
	{"across_rmse_m", func(s *score.Score) *float64 { return s.AcrossRMSEM }, smaller, false},
	{"crps_m", func(s *score.Score) *float64 { return s.CRPSM }, smaller, false},
	{"log_score", func(s *score.Score) *float64 { return s.LogScore }, smaller, false},
	{"anees", func(s *score.Score) *float64 { return s.Figures.ANEES }, 2, false},
	{"coverage50", func(s *score.Score) *float64 { return s.Figures.Coverage50 }, 0.5, false},
	{"coverage95", func(s *score.Score) *float64 { return s.Figures.Coverage95 }, 0.95, false},
	{"coverage99", func(s *score.Score) *float64 { return s.Figures.Coverage99 }, 0.99, false},
	{"right_road_fraction", func(s *score.Score) *float64 { return s.Figures.RightRoadFraction }, smaller, true},
	{"located_after_s", func(s *score.Score) *float64 { return s.LocatedAfterS }, smaller, false},
	{"located_after_m", func(s *score.Score) *float64 { return s.LocatedAfterM }, smaller, false},
	{"beyond_protection", func(s *score.Score) *float64 {
		if s.Figures.BeyondProtection == nil {
			return nil
		}
		n := float64(*s.Figures.BeyondProtection)
		return &n
	}, smaller, false},
	{"longest_wrong_s", func(s *score.Score) *float64 {
		zero := 0.0
		switch {
		case s.LongestWrong != nil:
			return &s.LongestWrong.ForS
		case s.Figures.Scored > 0:
			return &zero
		}
		return nil
	}, smaller, false},
	{"log_evidence", func(s *score.Score) *float64 { return &s.LogEvidence }, smaller, true},
}
