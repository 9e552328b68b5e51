package server

import (
	"context"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// question is a request of Where on its way to an owner.
type question struct {
	fractions []float64
	area      [][]geo.LonLat
	risk      float64    // 0 for the suite's
	answer    chan reply // of one, so that the owner never waits
}

type reply struct {
	message *leadlinev1.WhereAnswer
	err     error
}

// Where answers from the measurements so far: see the .proto file.
func (s *Server) Where(ctx context.Context, req *leadlinev1.WhereRequest) (*leadlinev1.WhereResponse, error) {
	resp := &leadlinev1.WhereResponse{}
	for _, vehicle := range req.GetVehicles() {
		q, err := s.question(req)
		if err != nil {
			return nil, err
		}
		a, err := s.ask(ctx, vehicle, q)
		if err != nil {
			return nil, err
		}
		resp.Answers = append(resp.Answers, a)
	}
	if len(resp.GetAnswers()) == 0 {
		return nil, status.Error(codes.InvalidArgument, "where: vehicles is empty: give the names they are fed under")
	}
	return resp, nil
}

// ask puts a question to a vehicle's owner.
func (s *Server) ask(ctx context.Context, vehicle string, q *question) (*leadlinev1.WhereAnswer, error) {
	o, err := s.find(vehicle)
	if err != nil {
		return nil, err
	}
	select {
	case o.questions <- q:
	case <-o.dead:
		return nil, o.err
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
	select {
	case r := <-q.answer:
		return r.message, r.err
	case <-o.dead:
		return nil, o.err
	case <-ctx.Done():
		return nil, status.FromContextError(ctx.Err()).Err()
	}
}

// question checks a request.
func (s *Server) question(req *leadlinev1.WhereRequest) (*question, error) {
	q := &question{fractions: req.GetRegionFractions(), answer: make(chan reply, 1)}
	if n, most := len(q.fractions), s.cfg.Limits.Regions; n > most {
		return nil, status.Errorf(codes.InvalidArgument, "where: %d region_fractions: at most %d", n, most)
	}
	for _, f := range q.fractions {
		if !(f > 0 && f < 1) {
			return nil, status.Errorf(codes.InvalidArgument, "where: region fraction %v: it must be above 0 and below 1", f)
		}
	}
	if req.GetArea() != nil {
		var err error
		if q.area, err = wire.Polygon(req.GetArea()); err != nil {
			return nil, status.Errorf(codes.InvalidArgument, "where: area: %v", err)
		}
	}
	if req.IntegrityRisk != nil {
		if q.risk = req.GetIntegrityRisk(); !(q.risk > 0 && q.risk < 1) {
			return nil, status.Errorf(codes.InvalidArgument, "where: integrity_risk %v: it must be above 0 and below 1", q.risk)
		}
	}
	return q, nil
}

// answer runs on the owner's goroutine.
func (o *owner) answer(q *question) reply {
	p := o.sess.Latest()
	if p == nil {
		return reply{err: status.Errorf(codes.FailedPrecondition, "where: vehicle %q has no posterior yet: none of its times is complete; send more, or end the drive", o.vehicle)}
	}
	m := o.message(p)
	if err := o.more(m, q); err != nil {
		return reply{err: err}
	}
	return reply{message: &leadlinev1.WhereAnswer{Vehicle: o.vehicle, Drive: o.drive, Posterior: m, PosteriorSha256: o.sess.Hash(), Ended: o.ended}}
}

// more adds what a question asks beyond the posterior.
func (o *owner) more(m *leadlinev1.Posterior, q *question) error {
	if len(q.fractions) == 0 && q.area == nil && q.risk == 0 {
		return nil
	}
	a, ok := o.sess.(Asker)
	if !ok {
		return status.Error(codes.Unimplemented, "where: this server answers with the posterior alone: leave out region_fractions, area and integrity_risk")
	}
	for _, f := range q.fractions {
		r, err := a.Region(f)
		if err != nil {
			return status.Errorf(codes.InvalidArgument, "where: region fraction %v: %v", f, err)
		}
		m.Regions = append(m.Regions, region(r))
	}
	if q.area != nil {
		in, err := a.Inside(q.area)
		if err != nil {
			return status.Errorf(codes.InvalidArgument, "where: area: %v", err)
		}
		m.AreaProbability = proto.Float64(in)
	}
	if q.risk != 0 {
		p, err := a.Protection(q.risk)
		if err != nil {
			return status.Errorf(codes.InvalidArgument, "where: integrity_risk: %v", err)
		}
		m.Protection = protection(p)
	}
	return nil
}
