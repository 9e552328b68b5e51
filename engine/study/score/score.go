package score

import (
	"leadline/engine/geo"
	"leadline/engine/summary"
)

// Input is what a drive is scored by.
type Input struct {
	Drive, Version string
	// Posteriors are the final ones, by time; SHA256 is their hash.
	Posteriors []*summary.Posterior
	SHA256     string
	// StartNS is when the drive began.
	StartNS int64
	// Truth is where the vehicle was, by time; none if it is not known.
	Truth []Truth
	// Roads returns the directed edges of the road map within a radius of a
	// place, nearest first; nil on a plane.
	Roads func(at geo.LonLat, radiusM float64) []Road
	// Offset is what is known of where and when the truth was measured, and
	// Estimate has the score say what it might be instead (see Estimate).
	Offset   Offset
	Estimate bool
	// FromNS, if not 0, has figures count from that time on, and not from the first
	// located posterior.
	FromNS int64
}

// Road is a directed edge near a place.
type Road struct {
	Chart int32
	DistM float64
}

// A road is right within rightMarginM of the nearest one's distance, and no
// farther than rightMostM, from the truth: carriageways side by side are one
// road to a truth that is not better than a lane.
const (
	rightMarginM = 3
	rightMostM   = 15
)

// Score is how good a drive's posteriors are. Fields without a value (there is
// no truth, it was never located, there are no roads) are nil: null in JSON.
//
// The error of a posterior is the geodesic distance from the truth to the
// scored position: the mean while located, otherwise the most probable cell.
// The truth of its time is interpolated linearly between neighbours at most
// 2 s apart; a posterior at another time is not scored. Figures count from
// the first located posterior on; those with the suffix _all count the whole
// drive.
type Score struct {
	Drive string `json:"drive"`
	// Posteriors counts all, ScoredAll those with a truth.
	Posteriors int `json:"posteriors"`
	Figures
	// LocatedAfterS is the time from the drive's start to the first located
	// posterior, LocatedAfterM the true distance travelled until then.
	LocatedAfterS *float64 `json:"located_after_s"`
	LocatedAfterM *float64 `json:"located_after_m"`
	// LogEvidence is the sum over all measurements, nats.
	LogEvidence     float64 `json:"log_evidence"`
	PosteriorSHA256 string  `json:"posterior_sha256"`
	Version         string  `json:"version"`
	Architecture    string  `json:"architecture"`
	// Partial says that the drive was not run to its end: see Stopped.
	Partial bool   `json:"partial,omitempty"`
	Stopped string `json:"stopped,omitempty"`
	Details
	FiguresAll
}

// Figures sum up the errors of some posteriors.
type Figures struct {
	// Scored is the number of posteriors that count.
	Scored int `json:"scored"`
	// RMSEM is sqrt(mean of squared errors), MeanM the mean error, metres.
	RMSEM *float64 `json:"rmse_m"`
	MeanM *float64 `json:"mean_m"`
	// Percentiles of the errors, and the greatest: linear between the order
	// statistics on either side of rank (n-1)·p, counted from 0.
	P50M  *float64 `json:"p50_m"`
	P68M  *float64 `json:"p68_m"`
	P95M  *float64 `json:"p95_m"`
	P999M *float64 `json:"p99_9_m"`
	MaxM  *float64 `json:"max_m"`
	// ANEES is the mean of e' P⁻¹ e, with e the mean's error east and north
	// and P its covariance, the truth's own variance added; 2 if both are
	// right. ANEESLow and ANEESHigh are the bounds that hold 95 % of such
	// means of as many independent errors (ANEESBounds); errors that follow
	// each other within seconds are not independent, so that a good filter
	// leaves them more often.
	ANEES     *float64 `json:"anees"`
	ANEESLow  *float64 `json:"anees_low"`
	ANEESHigh *float64 `json:"anees_high"`
	// Coverage is the fraction of posteriors whose radius of that percentage,
	// around the mean, holds the truth.
	Coverage50 *float64 `json:"coverage50"`
	Coverage95 *float64 `json:"coverage95"`
	Coverage99 *float64 `json:"coverage99"`
	// RightRoadFraction: the most probable directed edge, or the same road the
	// other way, is among those within (the nearest one's distance + 3 m, at
	// most 15 m) of the truth. Where the map has no road within 15 m of the
	// truth, none is right.
	RightRoadFraction *float64 `json:"right_road_fraction"`
	// BeyondProtection counts posteriors with the truth outside a bounded
	// protection radius.
	BeyondProtection *int `json:"beyond_protection"`
}

// FiguresAll are Figures of the whole drive.
type FiguresAll struct {
	Scored            int      `json:"scored_all"`
	RMSEM             *float64 `json:"rmse_m_all"`
	MeanM             *float64 `json:"mean_m_all"`
	P50M              *float64 `json:"p50_m_all"`
	P68M              *float64 `json:"p68_m_all"`
	P95M              *float64 `json:"p95_m_all"`
	P999M             *float64 `json:"p99_9_m_all"`
	MaxM              *float64 `json:"max_m_all"`
	ANEES             *float64 `json:"anees_all"`
	ANEESLow          *float64 `json:"anees_low_all"`
	ANEESHigh         *float64 `json:"anees_high_all"`
	Coverage50        *float64 `json:"coverage50_all"`
	Coverage95        *float64 `json:"coverage95_all"`
	Coverage99        *float64 `json:"coverage99_all"`
	RightRoadFraction *float64 `json:"right_road_fraction_all"`
	BeyondProtection  *int     `json:"beyond_protection_all"`
}
