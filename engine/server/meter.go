package server

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"google.golang.org/grpc"
	healthv1 "google.golang.org/grpc/health/grpc_health_v1"
	"google.golang.org/grpc/status"

	"leadline/engine/journal"
	"leadline/engine/server/operate"
	leadlinev1 "leadline/proto/leadline/v1"
)

// healthInterval is how often it is asked whether the server can serve, for
// those who watch its health.
const healthInterval = 2 * time.Second

// sizer is a session that says how large its belief is.
type sizer interface{ Size() int }

// word is the name of an enum's value as metrics have it.
func word(value, prefix string) string {
	return strings.ToLower(strings.TrimPrefix(value, prefix))
}

// Ready says why the server cannot serve; nil if it can: it has begun, does not
// stop, has a map or takes some, and no check of the configuration fails.
func (s *Server) Ready() error {
	select {
	case <-s.draining:
		return errors.New("the server stops")
	default:
	}
	if !s.serving.Load() {
		return errors.New("the server has not begun to listen")
	}
	if s.journal != nil {
		if err := s.journal.State().Err; err != nil {
			return fmt.Errorf("no measurement is taken: %w", err)
		}
	}
	if s.shared != nil {
		if err := s.shared.ready(); err != nil {
			return err
		}
	}
	for _, name := range slices.Sorted(maps.Keys(s.cfg.Checks)) {
		if err := s.cfg.Checks[name](); err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
	}
	return nil
}

// tellHealth tells the health service whether the server can serve, and returns
// why not.
func (s *Server) tellHealth() error {
	err := s.Ready()
	now := healthv1.HealthCheckResponse_SERVING
	if err != nil {
		now = healthv1.HealthCheckResponse_NOT_SERVING
	}
	for _, service := range []string{"", leadlinev1.PositionService_ServiceDesc.ServiceName} {
		s.health.SetServingStatus(service, now)
	}
	return err
}

// watchHealth does so now and then until the server stops.
func (s *Server) watchHealth() {
	tick := time.NewTicker(healthInterval)
	defer tick.Stop()
	could := true
	for {
		select {
		case <-s.draining:
			return
		case <-tick.C:
		}
		err := s.tellHealth()
		switch can := err == nil; {
		case can && !could:
			s.cfg.Log.Info("can serve again")
		case !can && could:
			s.cfg.Log.Error("cannot serve", "why", err)
		}
		could = err == nil
	}
}

// fleet is how the server stands.
func (s *Server) fleet() operate.Fleet {
	f := operate.Fleet{
		Statuses: map[string]int{}, Alarms: map[string]int{}, Streams: int(s.streams.Load()), Followers: s.hub.readers(),
		SearchesRunning: len(s.searching), SearchesWaiting: int(s.searchesWaiting.Load()), Load: s.load.value(), Maps: len(s.atlas.names()), Ready: s.Ready() == nil,
	}
	// Every word is always there, so that what is gone is told as 0.
	for _, st := range statuses {
		f.Statuses[word(st.String(), "STATUS_")] = 0
	}
	for _, k := range alarmKinds {
		f.Alarms[word(k.String(), "ALARM_KIND_")] = 0
	}
	f.Alarms["lost"] = 0
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, o := range s.owners {
		n := int(o.cells.Load())
		f.Cells += n
		f.LargestCells = max(f.LargestCells, n)
		switch {
		case o.finished:
			f.Ended++
		case o.streams > 0:
			f.Connected++
		default:
			f.Silent++
		}
		p := o.latest.Load()
		if p == nil {
			continue
		}
		f.LargestPruned = max(f.LargestPruned, p.Counts.Pruned)
		if o.finished {
			continue // it is not looked after any more
		}
		f.Statuses[word(statuses[p.Status].String(), "STATUS_")]++
		for _, a := range p.Alarms {
			f.Alarms[word(alarmKinds[a.Kind].String(), "ALARM_KIND_")]++
		}
		if p.LostAlarm {
			f.Alarms["lost"]++
		}
	}
	return f
}

// meterJournal has the journal's state in each scrape.
func (s *Server) meterJournal() {
	for _, g := range []struct {
		name, help string
		value      func(journal.State) float64
	}{
		{"waiting_records", "Records of the journal that are not durable yet.", func(j journal.State) float64 { return float64(j.Waiting) }},
		{"bytes", "Size of the journal.", func(j journal.State) float64 { return float64(j.Bytes) }},
		{"most_bytes", "Greatest size that the journal may have.", func(j journal.State) float64 { return float64(j.MaxBytes) }},
		{"free_bytes", "What is free on the journal's disk; -1 if that is not known.", func(j journal.State) float64 { return float64(j.FreeBytes) }},
		{"oldest_seconds", "When the oldest record of the journal was written, s since 1970; 0 if there is none.", func(j journal.State) float64 {
			if j.Oldest.IsZero() {
				return 0
			}
			return float64(j.Oldest.UnixNano()) / 1e9
		}},
		{"keep_for_seconds", "For how long records are kept at most, s; 0 is without end.", func(j journal.State) float64 { return j.MaxAge.Seconds() }},
		{"failing", "1 if the journal takes nothing new.", func(j journal.State) float64 {
			if j.Err != nil {
				return 1
			}
			return 0
		}},
		{"records", "Records since the journal was opened.", func(j journal.State) float64 { return float64(j.Records) }},
		{"refused_records", "Records that were refused since the journal was opened.", func(j journal.State) float64 { return float64(j.Refused) }},
	} {
		s.cfg.Metrics.Gauge("leadline_journal_"+g.name, g.help, nil, func() float64 { return g.value(s.journal.State()) })
	}
}

// readers is the number of streams that follow.
func (h *hub) readers() int {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.reading
}

// measured notes how large the belief is. It runs on the owner's goroutine.
func (o *owner) measured() {
	if z, ok := o.sess.(sizer); ok {
		o.cells.Store(int64(z.Size()))
	}
}

// methodName is a call's name as metrics have it: the last part of one that
// there is.
func methodName(full string) string {
	if _, ours := rules[full]; ours || strings.HasPrefix(full, healthPrefix) {
		return full[strings.LastIndex(full, "/")+1:]
	}
	return "other"
}

// meter counts a call that has ended.
func (s *Server) meter(method string, stream bool, began time.Time, err error) {
	reason := ""
	if r := failure(err).GetReason(); err != nil && r != leadlinev1.Reason_REASON_UNSPECIFIED {
		reason = strings.TrimPrefix(r.String(), "REASON_")
	}
	code := status.Code(err)
	if errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		code = status.FromContextError(err).Code()
	}
	s.cfg.Metrics.Called(methodName(method), code.String(), reason, stream, time.Since(began))
}

// meteredUnary and meteredStream count a call around what answers it.
func (s *Server) meteredUnary(ctx context.Context, req any, info *grpc.UnaryServerInfo, handle grpc.UnaryHandler) (any, error) {
	began := time.Now()
	resp, err := s.aroundUnary(ctx, req, info, handle)
	s.meter(info.FullMethod, false, began, err)
	return resp, err
}

func (s *Server) meteredStream(srv any, stream grpc.ServerStream, info *grpc.StreamServerInfo, handle grpc.StreamHandler) error {
	began := time.Now()
	err := s.aroundStream(srv, stream, info, handle)
	s.meter(info.FullMethod, true, began, err)
	return err
}
