package server

import (
	"context"
	"encoding/binary"
	"errors"
	"io"
	"math"
	"sync"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/server/share"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/traffic"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// roadSession is a road's traffic as the owner of a drive has it: it takes
// bearings and has no posteriors.
type roadSession struct {
	watch    *traffic.Watch
	suite    *sensor.Suite
	accepted uint64
	refused  uint64
}

var (
	_ Session      = (*roadSession)(nil)
	_ checkpointer = (*roadSession)(nil)
	_ sizer        = (*roadSession)(nil)
)

func newRoadSession(suite *sensor.Suite) (*roadSession, error) {
	if suite == nil {
		return nil, errors.New("traffic needs a suite that describes the road and its posts: name one")
	}
	w, err := traffic.Open(suite)
	return &roadSession{watch: w, suite: suite}, err
}

// restoreRoad makes one of what Checkpoint wrote.
func restoreRoad(suite *sensor.Suite, b []byte) (*roadSession, error) {
	if suite == nil || len(b) < 16 {
		return nil, errors.New("it is no checkpoint of a road's traffic")
	}
	w, err := traffic.Restore(suite, b[16:])
	return &roadSession{watch: w, suite: suite, accepted: le.Uint64(b), refused: le.Uint64(b[8:])}, err
}

// Checkpoint is the counts and the watch.
func (r *roadSession) Checkpoint() []byte {
	b := le.AppendUint64(le.AppendUint64(nil, r.accepted), r.refused)
	return append(b, r.watch.Checkpoint()...)
}

// Add takes a bearing.
func (r *roadSession) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	err := r.watch.Take(ev)
	if err == nil {
		r.accepted++
		return nil, nil
	}
	r.refused++
	reason := session.Unusable
	switch {
	case errors.Is(err, traffic.ErrLate):
		reason = session.TooLate
	case errors.Is(err, traffic.ErrOther):
		reason = session.WrongSpace
	case errors.Is(err, traffic.ErrOverfull):
		reason = session.Overfull
	}
	return nil, &session.Refusal{Reason: reason, Detail: err.Error()}
}

// Flush waits for nothing more.
func (r *roadSession) Flush() []*summary.Posterior {
	if err := r.watch.Flush(); err != nil {
		panic("server: traffic: " + err.Error()) // what waits has been checked
	}
	return nil
}

func (r *roadSession) Withdrawn() []sensor.Time   { return nil }
func (r *roadSession) Latest() *summary.Posterior { return nil }
func (r *roadSession) Hash() string               { return r.watch.Hash() }
func (r *roadSession) Size() int                  { return r.watch.Size() }

// Counts are of what was taken and refused; what a clock that was ahead had sent
// was taken at first.
func (r *roadSession) Counts() (accepted, refused uint64) {
	dropped := uint64(r.watch.Dropped())
	return r.accepted - dropped, r.refused + dropped
}

// Bounds of questions.
const (
	defaultExistence      = 0.5
	defaultFlowS          = 3600
	leastFlowS, mostFlowS = 60, 86400
	maxParts              = 1000
	passagesTold          = 10
)

// briefly is what a drive's end tells.
var briefly = &leadlinev1.TrafficRequest{LeastExistence: proto.Float64(defaultExistence), FlowS: proto.Float64(defaultFlowS)}

var le = binary.LittleEndian

// roadQuestion checks a request.
func roadQuestion(req *leadlinev1.TrafficRequest) (*leadlinev1.TrafficRequest, error) {
	if req.GetRoad() == "" {
		return nil, badField("road", "traffic: road is missing: give the name that its bearings are fed under")
	}
	if err := wire.Name("road", req.GetRoad()); err != nil {
		return nil, badField("road", "traffic: %v", err)
	}
	least, flow := defaultExistence, float64(defaultFlowS)
	if req.LeastExistence != nil {
		if least = req.GetLeastExistence(); !(least >= 0 && least <= 1) {
			return nil, badField("least_existence", "traffic: least_existence is %v: give a probability, 0 to 1", least)
		}
	}
	if req.FlowS != nil {
		if flow = req.GetFlowS(); !(flow >= leastFlowS && flow <= mostFlowS) {
			return nil, badField("flow_s", "traffic: flow_s is %v: give %d to %d s", flow, leastFlowS, mostFlowS)
		}
	}
	if req.GetParts() > maxParts {
		return nil, badField("parts", "traffic: %d parts: at most %d", req.GetParts(), maxParts)
	}
	return &leadlinev1.TrafficRequest{Road: req.GetRoad(), LeastExistence: &least, FlowS: &flow, Parts: req.GetParts(), Shape: req.GetShape()}, nil
}

// Traffic says what is known of a road's vehicles: see the .proto file.
func (s *Server) Traffic(ctx context.Context, req *leadlinev1.TrafficRequest) (*leadlinev1.TrafficResponse, error) {
	q, err := roadQuestion(req)
	if err != nil {
		return nil, err
	}
	o, r, err := s.road(q.GetRoad())
	if err != nil {
		return nil, err
	}
	out := &leadlinev1.TrafficResponse{Road: o.vehicle, Drive: o.drive, Version: s.cfg.Version}
	out.Picture, err = o.pictureOf(ctx, r, q)
	if err == nil && q.GetShape() {
		out.Shape = r.shape()
	}
	return out, err
}

// FollowTraffic tells of them as they move on: see the .proto file.
func (s *Server) FollowTraffic(req *leadlinev1.FollowTrafficRequest, stream grpc.ServerStreamingServer[leadlinev1.FollowTrafficResponse]) error {
	q, err := roadQuestion(req.GetTraffic())
	if err != nil {
		return err
	}
	if s := req.GetMinIntervalS(); !(s >= 0 && s <= maxIntervalS) {
		return badField("min_interval_s", "traffic: min_interval_s is %v: give 0 to %d", s, maxIntervalS)
	}
	if n, most := s.roadFollowers.Add(1), int64(s.cfg.Limits.Followers); n > most {
		s.roadFollowers.Add(-1)
		return full("followers", int(most), "traffic: the server has its %d that follow roads: try later, or raise the limit", most)
	}
	defer s.roadFollowers.Add(-1)
	ctx := stream.Context()
	here, err := s.elsewhere(ctx, q.GetRoad(), func(ctx context.Context, at share.Server) (bool, error) {
		return s.forwardTraffic(ctx, at, req, stream)
	})
	if !here || err != nil {
		return err
	}
	o, r, err := s.road(q.GetRoad())
	if err != nil {
		return err
	}
	interval := time.Duration(math.Ceil(req.GetMinIntervalS() * 1e9))
	for first := true; ; first = false {
		news, ended := o.heard.wait(), o.over.wait()
		p, err := o.pictureOf(ctx, r, q)
		if err != nil {
			return err
		}
		m := &leadlinev1.FollowTrafficResponse{Drive: o.drive, Picture: p}
		if first && q.GetShape() {
			m.Shape = r.shape()
		}
		if err := stream.Send(m); err != nil || p.GetEnded() {
			return err
		}
		pause := time.NewTimer(interval)
		due := pause.C
		for due != nil || news != nil {
			select {
			case <-due:
				due = nil
			case <-news:
				news = nil
			case <-ended: // which nobody waits an interval for
				pause.Stop()
				due, news = nil, nil
			case <-o.dead:
				pause.Stop()
				return o.err
			case <-s.draining:
				pause.Stop()
				return errStopping
			case <-ctx.Done():
				pause.Stop()
				return gone(ctx)
			}
		}
	}
}

// forwardTraffic passes on what another server tells of a road.
func (s *Server) forwardTraffic(ctx context.Context, at share.Server, req *leadlinev1.FollowTrafficRequest, stream grpc.ServerStreamingServer[leadlinev1.FollowTrafficResponse]) (again bool, err error) {
	c, err := s.peer(ctx, at)
	if err != nil {
		return false, err
	}
	ctx, cancel := s.untilDraining(ctx)
	defer cancel()
	there, err := c.FollowTraffic(onward(ctx), req)
	for told := false; ; told = true {
		var m *leadlinev1.FollowTrafficResponse
		if err == nil {
			m, err = there.Recv()
		}
		if errors.Is(err, io.EOF) {
			return false, nil
		}
		if err != nil {
			return !told && (unreachable(err) || hasMoved(ctx)), err
		}
		if err := stream.Send(m); err != nil {
			return false, err
		}
	}
}

// road returns the owner of a road, and its session.
func (s *Server) road(name string) (*owner, *roadSession, error) {
	o, err := s.find(name)
	if err != nil {
		return nil, nil, refuse(leadlinev1.Reason_REASON_UNKNOWN_VEHICLE, about{"vehicle": name}, "there is no road %q here: feed it first, under the same name, in a drive whose header says traffic", clip(name))
	}
	r, ok := o.sess.(*roadSession)
	if !ok {
		return nil, nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, o.about(), "%q is a vehicle and no road: ask where it is", o.vehicle)
	}
	return o, r, nil
}

// isRoad reports whether it is a road's traffic.
func (o *owner) isRoad() bool {
	_, is := o.sess.(*roadSession)
	return is
}

// noRoad refuses what is asked of vehicles alone.
func (o *owner) noRoad() error {
	if o.isRoad() {
		return refuse(leadlinev1.Reason_REASON_NOT_OFFERED, o.about(), "%q is a road and no vehicle: ask for its traffic", o.vehicle)
	}
	return nil
}

// pictureOf asks a road's owner.
func (o *owner) pictureOf(ctx context.Context, r *roadSession, q *leadlinev1.TrafficRequest) (*leadlinev1.TrafficPicture, error) {
	answer := make(chan *leadlinev1.TrafficPicture, 1)
	if err := o.do(ctx, func() { answer <- o.picture(r, q) }); err != nil {
		return nil, err
	}
	return <-answer, nil
}

// picture runs on the owner's goroutine.
func (o *owner) picture(r *roadSession, q *leadlinev1.TrafficRequest) *leadlinev1.TrafficPicture {
	f := r.watch.Filter()
	p := f.Picture(q.GetLeastExistence())
	m := &leadlinev1.TrafficPicture{
		Expected: p.Expected, Unlabelled: p.Unseen, Ended: o.ended, StateSha256: r.watch.Hash(),
		Recomputed: o.subject.recomputed, Durable: o.rec.line != nil,
	}
	m.Accepted, m.Refused = o.counts()
	if p.Time > 0 {
		m.Time, m.AgeS = wire.FromTime(p.Time), o.srv.cfg.Now().Sub(time.Unix(0, int64(p.Time))).Seconds()
	}
	for _, v := range p.Vehicles {
		m.Vehicles = append(m.Vehicles, &leadlinev1.HeardVehicle{
			Label: v.Label, Existence: v.Existence, PositionM: v.PositionM, PositionSigmaM: v.PositionSigmaM,
			SpeedMps: v.SpeedMPS, SpeedSigmaMps: v.SpeedSigmaMPS, Forward: v.Forward,
			Mean: wire.FromPosition(f.Road().LonLat(v.At)), HeadingDeg: geo.Deg(f.Road().TrueHeading(v.At, v.HeadingRad)),
		})
	}
	for i, l := range p.Lines {
		line := &leadlinev1.LineCount{
			Name: r.suite.Traffic.Lines[i].Name, AtM: l.AtM, Forward: uint64(l.Forward), Backward: uint64(l.Backward),
			ExpectedForward: l.ExpectForward, ExpectedBackward: l.ExpectBack,
		}
		line.ForwardPerHour, line.BackwardPerHour, line.FlowS = f.Flow(i, q.GetFlowS())
		for _, c := range l.Recent[max(0, len(l.Recent)-passagesTold):] {
			line.Recent = append(line.Recent, &leadlinev1.LinePassage{Time: wire.FromTime(c.Time), Label: c.Label, Forward: c.Forward, Existence: c.Existence})
		}
		m.Lines = append(m.Lines, line)
	}
	if n := int(q.GetParts()); n > 0 {
		for _, x := range f.Intensity(n) {
			m.IntensityPerKm = append(m.IntensityPerKm, 1000*x)
		}
	}
	for _, d := range r.watch.Doubts() {
		m.Doubts = append(m.Doubts, &leadlinev1.TrafficDoubt{Kind: doubtKinds[d.Kind], Post: clip(d.Post), Count: uint64(d.Count), Detail: clip(d.Words)})
	}
	return m
}

var doubtKinds = map[traffic.DoubtKind]leadlinev1.TrafficDoubtKind{
	traffic.AmbiguousSide: leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_AMBIGUOUS_SIDE,
	traffic.InLine:        leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_IN_LINE,
	traffic.OutOfReach:    leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_OUT_OF_REACH,
	traffic.Silent:        leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_SILENT,
	traffic.OverBudget:    leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_OVER_BUDGET,
	traffic.Crowded:       leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_CROWDED,
	traffic.UnknownPost:   leadlinev1.TrafficDoubtKind_TRAFFIC_DOUBT_KIND_UNKNOWN_POST,
}

// shape is the road for a drawing; it does not change.
func (r *roadSession) shape() *leadlinev1.RoadShape {
	f := r.watch.Filter()
	m := &leadlinev1.RoadShape{LengthM: f.Road().LengthM()}
	for _, c := range r.suite.Traffic.Road {
		m.Centreline = append(m.Centreline, wire.FromPosition(c.Position()))
	}
	reach := r.suite.Traffic.Filled().ReachM
	for _, p := range r.suite.Posts {
		m.Posts = append(m.Posts, &leadlinev1.RoadPost{Post: p.ID, At: wire.FromPosition(p.Position()), ReachM: reach, AxisDeg: p.AxisDeg})
	}
	for _, l := range r.suite.Traffic.Lines {
		at, _ := f.Road().At(l.AtM)
		m.Lines = append(m.Lines, &leadlinev1.CountedLine{Name: l.Name, AtM: l.AtM, At: wire.FromPosition(f.Road().LonLat(at))})
	}
	return m
}

// broadcast wakes all who wait.
type broadcast struct {
	mu sync.Mutex
	ch chan struct{}
}

func (b *broadcast) wait() <-chan struct{} {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.ch == nil {
		b.ch = make(chan struct{})
	}
	return b.ch
}

func (b *broadcast) tell() {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.ch != nil {
		close(b.ch)
		b.ch = nil
	}
}
