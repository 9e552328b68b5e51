package server

import (
	"time"

	"golang.org/x/time/rate"

	leadlinev1 "leadline/proto/leadline/v1"
)

// burstSeconds is for how long a vehicle that was silent may bring measurements
// faster than its rate.
const burstSeconds = 10

// newPace limits measurements to a rate. A whole batch always passes at once.
func newPace(perSecond int, l Limits) *rate.Limiter {
	return rate.NewLimiter(rate.Limit(perSecond), max(burstSeconds*perSecond, l.BatchMeasurements))
}

// paceOf names a limit on rates as metrics and errors have it.
const (
	paceVehicle = "rate"
	paceAll     = "rate_in_all"
)

// await reserves n measurements of a drive and says how long they have to wait,
// and for which limit.
func (s *Server) await(o *owner, n int) (wait time.Duration, limit string) {
	now := time.Now()
	n = min(n, s.cfg.Limits.BatchMeasurements) // a larger batch is refused
	wait, limit = o.pace.ReserveN(now, n).DelayFrom(now), paceVehicle
	if all := s.pace.ReserveN(now, n).DelayFrom(now); all > wait {
		wait, limit = all, paceAll
	}
	return wait, limit
}

// mayAdd takes one measurement beside the batches of a drive, which is not to
// wait, or refuses it.
func (s *Server) mayAdd(o *owner) error {
	now := time.Now()
	mine, all := o.pace.ReserveN(now, 1), s.pace.ReserveN(now, 1)
	wait := max(mine.DelayFrom(now), all.DelayFrom(now))
	if wait == 0 {
		return nil
	}
	limit, most := paceVehicle, s.cfg.Limits.Rate
	if all.DelayFrom(now) == wait {
		limit, most = paceAll, s.cfg.Limits.RateInAll
	}
	mine.CancelAt(now)
	all.CancelAt(now)
	return refuseFor(leadlinev1.Reason_REASON_TOO_FAST, wait, ofLimit(o.about(), limit, most),
		"vehicle %q has as many measurements as one may have, %d a second: try again in %v", o.vehicle, most, wait.Round(time.Millisecond))
}
