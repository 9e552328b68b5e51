package server

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	mathrand "math/rand/v2"
	"sync"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"google.golang.org/grpc"

	"leadline/engine/journal"
	"leadline/engine/server/share"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Share is how a server shares its journal with others: each serves some of the
// journal's partitions, and passes on to the others what is theirs.
type Share struct {
	// Address is where the others reach this server.
	Address string
	// Dial prepares a connection to another one, by its address.
	Dial func(address string) (*grpc.ClientConn, error)
	// OpenMap opens a compiled map that another server has stored. It must take any
	// file, and check all of it.
	OpenMap func(path string) (Map, error)
	// Lease is for how long a server that is not heard of keeps its partitions.
	// Default 5 s.
	Lease time.Duration
}

var (
	errMoved = refuse(leadlinev1.Reason_REASON_RECOVERING, nil, "another server goes on with the vehicle: call again")
	errLost  = refuse(leadlinev1.Reason_REASON_RECOVERING, nil, "another server has taken the vehicle over: call again")
)

// whoseWait is for how long a call waits until somebody serves its vehicle: for as
// long as a takeover takes, and less than commands wait.
const whoseWait = 9 * time.Second

// shared is this server among others.
type shared struct {
	*share.Share // nil until it has joined
	conn         *nats.Conn
	peers        peers
	maps         sharedMaps
	storing      sync.WaitGroup // of maps
	open         []bool         // the partitions whose drives are here; srv.mu guards it
	cut          spell          // during which this server is cut off
}

func (s *Server) openShared() {
	s.shared.open = make([]bool, s.journal.Partitions())
	s.alarms.last = mathrand.Uint64N(1 << 52) // so that no two servers give the same numbers
	s.cfg.Metrics.Gauge("leadline_owned_partitions", "Partitions of the journal that this server serves.", nil, func() float64 { return float64(s.journal.State().Own) })
	s.cfg.Metrics.Gauge("leadline_other_servers", "Servers that share the journal, without this one.", nil, func() float64 { return float64(len(s.shared.others())) })
}

// join begins to share, once the server listens.
func (s *Server) join() error {
	if s.shared == nil {
		return nil
	}
	b := &s.cfg.Journal.Broker
	var err error
	if s.shared.conn, err = b.Dial("leadline share"); err != nil {
		return fmt.Errorf("server: %w", err)
	}
	js, err := jetstream.New(s.shared.conn)
	if err != nil {
		return fmt.Errorf("server: %w", err)
	}
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	err = s.joinSoon(ctx, func(ctx context.Context) (err error) {
		s.shared.maps.Maps, err = share.OpenMaps(ctx, js, b.Replicas)
		return err
	})
	if err == nil {
		err = s.shared.maps.keepFetched()
	}
	if err != nil {
		return fmt.Errorf("server: %w", err)
	}
	self := share.Server{ID: rand.Text(), Address: s.cfg.Share.Address, Version: s.cfg.Version}
	var joined *share.Share
	err = s.joinSoon(ctx, func(ctx context.Context) (err error) {
		joined, err = share.Join(ctx, share.Options{
			JetStream: js, Replicas: b.Replicas, Self: self, Partitions: s.journal.Partitions(), Lease: s.cfg.Share.Lease,
			Take: s.takePartition, Log: s.cfg.Log,
			Give: func(ctx context.Context, i int) { s.leavePartition(ctx, i, errMoved) },
			Drop: func(i int) { s.leavePartition(cancelled, i, errLost) },
		})
		return err
	})
	if err != nil {
		return fmt.Errorf("server: %w", err)
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.shared.Share = joined
	s.shared.storing.Go(func() {
		whole, cancel := s.untilDraining(context.Background())
		defer cancel()
		s.shareMaps(whole)
	})
	s.cfg.Log.Info("shares the journal", "server", self.ID, "address", self.Address, "partitions", s.journal.Partitions())
	return nil
}

// joinSoon does a part of joining, again while the brokers of a cluster that has just
// started elect: for what was just made nobody answers yet, and what is asked meanwhile
// is never answered.
func (s *Server) joinSoon(ctx context.Context, do func(context.Context) error) error {
	for first := true; ; first = false {
		try, cancel := context.WithTimeout(ctx, joinTry)
		err := do(try)
		cancel()
		if err == nil || ctx.Err() != nil || !journal.Unanswered(err) {
			return err
		}
		if first {
			s.cfg.Log.Warn("the server cannot join the others yet", "error", err)
		}
		select {
		case <-time.After(joinPause):
		case <-ctx.Done():
			return err
		}
	}
}

const (
	joinTry   = 10 * time.Second
	joinPause = 200 * time.Millisecond
)

// joined is the share; nil before and without.
func (s *Server) joined() *share.Share {
	if s.shared == nil {
		return nil
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.shared.Share
}

var cancelled = func() context.Context {
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	return ctx
}()

// takePartition goes on with all drives of a partition.
func (s *Server) takePartition(ctx context.Context, i int) error {
	began := time.Now()
	c := &histories{build: s.cfg.Build, of: map[journal.Place]*history{}}
	found, err := s.journal.Take(ctx, i, c.take)
	if err != nil {
		return err
	}
	if err := s.goOnWith(c, found); err != nil {
		s.leavePartition(cancelled, i, errLost)
		return err
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.closed {
		return errors.New("the server stops")
	}
	s.shared.open[i] = true
	s.cfg.Log.Info("partition taken", "partition", i+1, "records", found.Records, "bytes", found.Bytes, "seconds", time.Since(began).Seconds())
	return nil
}

// leavePartition stops with the drives of a partition: in order, with checkpoints,
// until ctx is done.
func (s *Server) leavePartition(ctx context.Context, i int, why error) {
	s.mu.Lock()
	s.shared.open[i] = false
	var gone []*owner
	for vehicle, o := range s.owners {
		if s.journal.Partition(vehicle) == i {
			o.stop(why)
			gone = append(gone, o)
			delete(s.owners, vehicle)
		}
	}
	for vehicle := range s.kept {
		if s.journal.Partition(vehicle) == i {
			delete(s.kept, vehicle)
		}
	}
	s.forgetEnded(func(d *endedDrive) bool { return s.journal.Partition(d.about.GetVehicle()) == i })
	s.mu.Unlock()
	for _, o := range gone {
		s.awaits(ctx, o)
	}
	s.journal.Give(ctx, i)
}

// lost is told by the journal that another server writes a partition.
func (s *Server) lost(i int) {
	s.leavePartition(cancelled, i, errLost)
	if j := s.joined(); j != nil {
		j.Lost(i)
	}
}

// has reports whether a vehicle's drives are here; s.mu is held.
func (s *Server) has(vehicle string) bool {
	return s.shared == nil || s.shared.open[s.journal.Partition(vehicle)]
}

// whoseUntil finds out who serves a vehicle: nil is this server. While nobody does
// it waits.
func (s *Server) whoseUntil(ctx context.Context, vehicle string, until time.Time) (*share.Server, error) {
	if s.shared == nil {
		return nil, nil
	}
	late := time.NewTimer(time.Until(until))
	defer late.Stop()
	cut, nobody := s.cutOff(), error(nil)
	for {
		var changed <-chan struct{}
		if j := s.joined(); j != nil {
			at := j.Where(s.journal.Partition(vehicle))
			switch {
			case at.Mine:
				return nil, nil
			case cut == nil && nobody != nil, isOver(cut): // what was known of others may hold no more
			case at.Server != nil && !forwarded(ctx):
				return at.Server, nil
			case at.Server != nil: // whoever sent it here knows less
				return nil, refuse(leadlinev1.Reason_REASON_RECOVERING, about{"vehicle": vehicle}, "vehicle %q is not here but at %s: call again", clip(vehicle), at.Server.Address)
			}
			changed = at.Changed
		}
		select {
		case <-changed:
		case <-s.draining:
			return nil, errStopping
		case <-cut:
			cut, nobody = nil, errCutOff
			late.Reset(min(time.Until(until), cutWait))
		case <-late.C:
			if nobody != nil {
				return nil, nobody
			}
			return nil, refuse(leadlinev1.Reason_REASON_RECOVERING, about{"vehicle": vehicle}, "no server serves vehicle %q for now: one takes over what another one had: call again", clip(vehicle))
		case <-ctx.Done():
			return nil, gone(ctx)
		}
	}
}

// others are the other servers.
func (s *shared) others() []share.Server {
	if s.Share == nil {
		return nil
	}
	return s.Others()
}

// ready says why this server cannot serve its part.
func (s *shared) ready() error {
	switch {
	case s.Share == nil:
		return errors.New("the server has not joined the others that share its journal")
	case !s.Fresh():
		return errors.New("the server's lease is over: the broker cannot be reached")
	}
	return nil
}

// retire has others know that this server leaves.
func (s *Server) retire(ctx context.Context) {
	if j := s.joined(); j != nil {
		if err := j.Retire(ctx); err != nil {
			s.cfg.Log.Warn("others are not told that this server leaves", "error", err)
		}
	}
}

// settled waits until no partition is being taken, with the drives stopped.
func (s *Server) settled() {
	if j := s.joined(); j != nil {
		j.Settle()
	}
}

// part leaves the others.
func (s *Server) part() {
	if s.shared == nil {
		return
	}
	s.shared.storing.Wait()
	s.shared.maps.forgetFetched()
	if j := s.joined(); j != nil {
		ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
		j.Leave(ctx)
		cancel()
	}
	if s.shared.conn != nil {
		s.shared.conn.Close()
	}
	s.shared.peers.close()
}

// peers are connections to other servers, by address.
type peers struct {
	dial func(address string) (*grpc.ClientConn, error)
	mu   sync.Mutex
	of   map[string]*grpc.ClientConn
}

func (p *peers) conn(address string) (*grpc.ClientConn, error) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if c := p.of[address]; c != nil {
		return c, nil
	}
	c, err := p.dial(address)
	if err != nil {
		return nil, refuse(leadlinev1.Reason_REASON_RECOVERING, nil, "the server at %s cannot be reached: %v", address, err)
	}
	p.of[address] = c
	return c, nil
}

func (p *peers) close() {
	p.mu.Lock()
	defer p.mu.Unlock()
	for _, c := range p.of {
		c.Close()
	}
}
