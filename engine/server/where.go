package server

import (
	"context"
	"fmt"
	"runtime/debug"
	"strconv"
	"sync"
	"sync/atomic"

	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// question is what a request of Where asks of each of its vehicles.
type question struct {
	fractions []float64
	area      [][]geo.LonLat
	risk      float64 // 0 for the suite's
	toNow     bool
	agoS      float64 // 0: the latest
}

// askers is how many vehicles of one question are asked at once.
const askers = 8

// Where answers from the measurements so far: see the .proto file.
func (s *Server) Where(ctx context.Context, req *leadlinev1.WhereRequest) (*leadlinev1.WhereResponse, error) {
	q, err := s.question(req)
	if err != nil {
		return nil, err
	}
	vehicles := req.GetVehicles()
	answers := make([]*leadlinev1.WhereAnswer, len(vehicles))
	here := s.whereElsewhere(ctx, req, answers)
	var next atomic.Int64
	var wg sync.WaitGroup
	for range min(askers, len(here)) {
		wg.Go(func() {
			for k := next.Add(1) - 1; k < int64(len(here)); k = next.Add(1) - 1 {
				answers[here[k]] = s.ask(ctx, vehicles[here[k]], q)
			}
		})
	}
	wg.Wait()
	if ctx.Err() != nil {
		return nil, status.FromContextError(ctx.Err()).Err()
	}
	return &leadlinev1.WhereResponse{Answers: answers, Version: s.cfg.Version}, nil
}

// question checks a request.
func (s *Server) question(req *leadlinev1.WhereRequest) (*question, error) {
	tooMany := func(field string, n, most int) error {
		return refuse(leadlinev1.Reason_REASON_BAD_FIELD, about{"field": field, "limit": field, "most": strconv.Itoa(most)},
			"where: %d %s: at most %d; ask in several calls", n, field, most)
	}
	switch n, most := len(req.GetVehicles()), s.cfg.Limits.Questions; {
	case n == 0:
		return nil, badField("vehicles", "where: vehicles is empty: give the names that they are fed under")
	case n > most:
		return nil, tooMany("vehicles", n, most)
	}
	for i, v := range req.GetVehicles() {
		if v == "" {
			return nil, badField("vehicles", "where: vehicles[%d] is empty: give the name that it is fed under", i)
		}
		if err := wire.Name(fmt.Sprintf("vehicles[%d]", i), v); err != nil {
			return nil, badField("vehicles", "where: %v", err)
		}
	}
	q := &question{fractions: req.GetRegionFractions(), toNow: req.GetPredictToNow(), agoS: req.GetAgoS()}
	switch {
	case !(q.agoS >= 0 && q.agoS <= 3600):
		return nil, badField("ago_s", "where: ago_s: %v: give seconds, 0 to 3600", q.agoS)
	case q.agoS > 0 && q.toNow:
		return nil, badField("ago_s", "where: ago_s and predict_to_now ask for two times: leave one out")
	}
	if n, most := len(q.fractions), s.cfg.Limits.Regions; n > most {
		return nil, tooMany("region_fractions", n, most)
	}
	for _, f := range q.fractions {
		if !(f > 0 && f < 1) {
			return nil, badField("region_fractions", "where: region_fractions: %v: it must be above 0 and below 1", f)
		}
	}
	if req.GetArea() != nil {
		var err error
		if q.area, err = wire.Area(req.GetArea()); err != nil {
			return nil, badField("area", "where: area: %v", err)
		}
	}
	if req.IntegrityRisk != nil {
		if q.risk = req.GetIntegrityRisk(); !(q.risk > 0 && q.risk < 1) {
			return nil, badField("integrity_risk", "where: integrity_risk %v: it must be above 0 and below 1", q.risk)
		}
	}
	return q, nil
}

// ask puts a question to a vehicle; what goes wrong is its answer.
func (s *Server) ask(ctx context.Context, vehicle string, q *question) *leadlinev1.WhereAnswer {
	o, err := s.find(vehicle)
	if err == nil {
		err = o.noRoad()
	}
	if err != nil {
		return &leadlinev1.WhereAnswer{Vehicle: vehicle, Failure: failure(err)}
	}
	if (q.toNow || q.agoS > 0) && s.atlas.hold(o.m) { // it is read though the owner may leave
		defer s.releaseMap(o.m)
	}
	r := &reply{} // the owner may write it after an error
	if err := o.do(ctx, func() { *r = o.answer(q) }); err != nil {
		return &leadlinev1.WhereAnswer{Vehicle: vehicle, Drive: o.drive, Failure: failure(err)}
	}
	if r.ahead != nil || r.earlier != nil {
		r.message, r.err = s.beside(ctx, o, r, q)
	}
	a := &leadlinev1.WhereAnswer{Vehicle: vehicle, Drive: o.drive, PosteriorSha256: r.hash, Ended: r.ended}
	if r.err != nil {
		a.Failure = failure(r.err)
	} else {
		a.Posterior = r.message
	}
	return a
}

// reply is what an owner says: a posterior, a belief that is to be carried on,
// what tells of an earlier time, or why there is none of these.
type reply struct {
	message   *leadlinev1.Posterior
	ahead     *session.Ahead
	earlier   *session.Earlier
	malformed uint64
	hash      string
	ended     bool
	err       error
}

// answer runs on the owner's goroutine.
func (o *owner) answer(q *question) reply {
	r := reply{hash: o.sess.Hash(), ended: o.ended, malformed: o.malformed}
	p := o.sess.Latest()
	if p == nil {
		r.err = refuse(leadlinev1.Reason_REASON_NO_POSTERIOR, o.about(), "where: vehicle %q has no posterior yet: none of its times is complete; send more, or end the drive", o.vehicle)
		return r
	}
	if q.toNow && !o.ended {
		f, ok := o.sess.(Foresight)
		if !ok {
			r.err = notAsked("predict_to_now")
			return r
		}
		if r.ahead, r.err = f.Ahead(); r.err != nil {
			r.err = refuse(leadlinev1.Reason_REASON_NO_POSTERIOR, o.about(), "where: vehicle %q: %v", o.vehicle, r.err)
		}
		return r
	}
	if q.agoS > 0 {
		h, ok := o.sess.(Hindsight)
		if !ok {
			r.err = notAsked("ago_s")
			return r
		}
		if r.earlier, r.err = h.Earlier(q.agoS); r.err != nil {
			r.err = refuse(leadlinev1.Reason_REASON_NO_POSTERIOR, o.about(), "where: ago_s: vehicle %q: %v", o.vehicle, r.err)
		}
		return r
	}
	r.message = o.message(p)
	r.err = more(r.message, o.sess, q)
	return r
}

// beside carries a belief on to the present, or looks back. It takes a second or
// more, and runs on the caller's goroutine; few of them do at once.
func (s *Server) beside(ctx context.Context, o *owner, r *reply, q *question) (m *leadlinev1.Posterior, err error) {
	select {
	case s.predictions <- struct{}{}:
		defer func() { <-s.predictions }()
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
	defer func() {
		if p := recover(); p != nil {
			s.cfg.Log.Error("question failed", "vehicle", o.vehicle, "drive", o.drive, "panic", p, "stack", string(debug.Stack()))
			err = refuse(leadlinev1.Reason_REASON_SESSION_FAILED, o.about(), "where: predict_to_now or ago_s failed for vehicle %q: report it with the server's log, and leave it out", o.vehicle)
		}
	}()
	if r.earlier != nil {
		return s.looked(ctx, o, r, q)
	}
	now, last := s.cfg.Now(), r.ahead.Time()
	p, err := r.ahead.Carry(sensor.Time(now.UnixNano()))
	if err != nil {
		return nil, refuse(leadlinev1.Reason_REASON_NO_POSTERIOR, o.about(), "where: predict_to_now: vehicle %q: %v: leave predict_to_now out", o.vehicle, err)
	}
	m = s.message(p, o.vehicle, o.m.Map, r.malformed, now)
	m.Recomputed = o.subject.recomputed
	m.PredictedS = sensor.Time(p.TimeNS).Seconds(last)
	return m, more(m, r.ahead, q)
}

// looked says what is known of an earlier time.
func (s *Server) looked(ctx context.Context, o *owner, r *reply, q *question) (*leadlinev1.Posterior, error) {
	p, err := r.earlier.Look(ctx.Err)
	switch {
	case ctx.Err() != nil:
		return nil, status.FromContextError(ctx.Err()).Err()
	case err != nil:
		return nil, refuse(leadlinev1.Reason_REASON_NO_POSTERIOR, o.about(), "where: ago_s: vehicle %q: %v", o.vehicle, err)
	}
	m := s.message(p, o.vehicle, o.m.Map, r.malformed, s.cfg.Now())
	m.Recomputed = o.subject.recomputed
	m.HindsightS = r.earlier.Now().Seconds(sensor.Time(p.TimeNS))
	return m, more(m, r.earlier, q)
}

// more adds what a question asks beyond the posterior.
func more(m *leadlinev1.Posterior, of any, q *question) error {
	if len(q.fractions) == 0 && q.area == nil && q.risk == 0 {
		return nil
	}
	a, ok := of.(Asker)
	if !ok {
		return notAsked("region_fractions, area and integrity_risk")
	}
	for _, f := range q.fractions {
		r, err := a.Region(f)
		if err != nil {
			return badField("region_fractions", "where: region_fractions: %v: %v", f, err)
		}
		m.Regions = append(m.Regions, region(r))
	}
	if q.area != nil {
		in, err := a.Inside(q.area)
		if err != nil {
			return badField("area", "where: area: %v", err)
		}
		m.AreaProbability = proto.Float64(in)
	}
	if q.risk != 0 {
		p, err := a.Protection(q.risk)
		if err != nil {
			return badField("integrity_risk", "where: integrity_risk: %v", err)
		}
		m.Protection = protection(p)
	}
	return nil
}

func notAsked(fields string) error {
	return refuse(leadlinev1.Reason_REASON_NOT_OFFERED, about{"field": fields}, "where: this server answers with the posterior alone: leave out %s", fields)
}
