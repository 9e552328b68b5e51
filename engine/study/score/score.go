package score

import (
	"math"
	"runtime"
	"slices"

	"leadline/engine/geo"
	"leadline/engine/kernel"
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
}

// Truth is where the vehicle was at a time, with the standard deviation an
// axis of the truth itself.
type Truth struct {
	TimeNS int64
	At     geo.LonLat
	SigmaM float64
}

// Road is a directed edge near a place.
type Road struct {
	Chart int32
	DistM float64
}

// Bounds of what a score takes.
const (
	// maxTruthGapNS: between truths further apart nothing is known.
	maxTruthGapNS = 2e9
	// A road is right within rightMarginM of the nearest one's distance, and
	// no farther than rightMostM, from the truth: carriageways side by side
	// are one road to a truth that is not better than a lane.
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

// Of scores a drive. It panics if posteriors or truths are not by time.
func Of(in Input) (*Score, error) {
	mustBeByTime(in)
	s := &Score{
		Drive: in.Drive, Posteriors: len(in.Posteriors), PosteriorSHA256: in.SHA256,
		Version: in.Version, Architecture: runtime.GOARCH,
	}
	first := -1
	for i, p := range in.Posteriors {
		if first < 0 && p.Status == summary.Located {
			first = i
		}
		s.LogEvidence = p.LogEvidence
	}
	if first >= 0 {
		after := float64(in.Posteriors[first].TimeNS-in.StartNS) / 1e9
		s.LocatedAfterS = &after
		m, ok, err := distance(in.Truth, in.StartNS, in.Posteriors[first].TimeNS)
		if err != nil {
			return nil, err
		}
		if ok {
			s.LocatedAfterM = &m
		}
	}
	var all, located sums
	for i, p := range in.Posteriors {
		truth, ok := Interpolate(in.Truth, p.TimeNS)
		if !ok {
			continue
		}
		e, err := errorOf(p, truth, in.Roads)
		if err != nil {
			return nil, err
		}
		all.add(e)
		if first >= 0 && i >= first {
			located.add(e)
		}
	}
	s.Figures = located.figures(in.Roads != nil)
	s.FiguresAll = FiguresAll(all.figures(in.Roads != nil))
	return s, nil
}

func mustBeByTime(in Input) {
	for i := 1; i < len(in.Posteriors); i++ {
		if in.Posteriors[i].TimeNS <= in.Posteriors[i-1].TimeNS {
			panic("score: posteriors out of order")
		}
	}
	for i := 1; i < len(in.Truth); i++ {
		if in.Truth[i].TimeNS < in.Truth[i-1].TimeNS {
			panic("score: truths out of order")
		}
	}
}

// Interpolate returns the truth at a time: linear in longitude and latitude
// between the neighbours, if they are at most 2 s apart. Over the 2 km that
// anything on or over a map covers in that time, the arc and the line differ
// by L²/8R, less than 8 cm. Of two truths at one time the first counts.
func Interpolate(truth []Truth, timeNS int64) (Truth, bool) {
	i, found := slices.BinarySearchFunc(truth, timeNS, func(t Truth, ns int64) int {
		switch {
		case t.TimeNS < ns:
			return -1
		case t.TimeNS > ns:
			return 1
		}
		return 0
	})
	if found {
		return truth[i], true
	}
	if i == 0 || i == len(truth) || truth[i].TimeNS-truth[i-1].TimeNS > maxTruthGapNS {
		return Truth{}, false
	}
	a, b := truth[i-1], truth[i]
	f := float64(timeNS-a.TimeNS) / float64(b.TimeNS-a.TimeNS)
	return Truth{
		TimeNS: timeNS,
		At: geo.LonLat{
			Lon: geo.WrapPi(a.At.Lon + f*geo.WrapPi(b.At.Lon-a.At.Lon)),
			Lat: a.At.Lat + f*(b.At.Lat-a.At.Lat),
		},
		SigmaM: math.Max(a.SigmaM, b.SigmaM),
	}, true
}

// distance sums the way between the truths from a start up to a time; not ok if
// the truth does not reach from one to the other.
func distance(truth []Truth, startNS, untilNS int64) (sumM float64, ok bool, err error) {
	end, ok := Interpolate(truth, untilNS)
	if !ok || truth[0].TimeNS > startNS+maxTruthGapNS { // the way before the first truth is not known
		return 0, false, nil
	}
	for i := 1; i < len(truth) && truth[i-1].TimeNS < untilNS; i++ {
		to := truth[i]
		if to.TimeNS > untilNS {
			to = end
		}
		m, _, err := geo.WGS84.Distance(truth[i-1].At, to.At)
		if err != nil {
			return 0, false, err
		}
		sumM += m
	}
	return sumM, true, nil
}

// one is the error of one posterior.
type one struct {
	errM             float64
	nees             float64
	in50, in95, in99 bool
	right            bool
	beyond           bool
}

func errorOf(p *summary.Posterior, truth Truth, roads func(geo.LonLat, float64) []Road) (one, error) {
	fromMeanM, azimuth, err := geo.WGS84.Distance(p.Mean, truth.At)
	if err != nil {
		return one{}, err
	}
	e := one{
		errM: fromMeanM,
		in50: fromMeanM <= p.Radius50M, in95: fromMeanM <= p.Radius95M, in99: fromMeanM <= p.Radius99M,
		beyond: p.Protection.Bounded && fromMeanM > p.Protection.RadiusM,
	}
	if p.Status != summary.Located {
		if e.errM, _, err = geo.WGS84.Distance(p.MostProbable.Position, truth.At); err != nil {
			return one{}, err
		}
	}
	sin, cos := kernel.Sincos(azimuth)
	e.nees = nees(fromMeanM*sin, fromMeanM*cos, p.Cov, truth.SigmaM*truth.SigmaM)
	if roads != nil {
		e.right = right(p, roads(truth.At, rightMostM))
	}
	return e, nil
}

// nees is e' (P + r·I)⁻¹ e. It is infinite for a covariance without an
// inverse, which no posterior has.
func nees(e, n float64, c summary.Cov, r float64) float64 {
	ee, nn := c.EE+r, c.NN+r
	det := ee*nn - c.EN*c.EN
	if !(det > 0) {
		return math.Inf(1)
	}
	return (nn*e*e - 2*c.EN*e*n + ee*n*n) / det
}

// right reports whether the most probable edge is a road of the truth's.
func right(p *summary.Posterior, near []Road) bool {
	if len(p.Edges) == 0 || len(near) == 0 {
		return false
	}
	nearest := math.Inf(1)
	for _, r := range near {
		nearest = math.Min(nearest, r.DistM)
	}
	within := math.Min(nearest+rightMarginM, rightMostM)
	best := p.Edges[0]
	for _, r := range near {
		if r.DistM <= within && (r.Chart == best.Chart || best.Twin >= 0 && r.Chart == best.Twin) {
			return true
		}
	}
	return false
}
