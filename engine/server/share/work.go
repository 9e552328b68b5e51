package share

import (
	"context"
	"errors"
	"slices"
	"strconv"
	"strings"

	"github.com/nats-io/nats.go/jetstream"
)

// work does what follows from the keys, one step at a time.
func (s *Share) work() {
	defer close(s.rested)
	for {
		select {
		case <-s.resting:
			return
		default:
		}
		s.mu.Lock()
		do := s.core.next(s.now())
		s.mu.Unlock()
		if do.verb == nothing {
			select {
			case <-s.ended.Done():
				return
			case <-s.resting:
				return
			case <-s.poke:
			}
			continue
		}
		s.do(do)
		if s.ended.Err() != nil {
			return
		}
	}
}

// do does one step.
func (s *Share) do(do step) {
	i, key := do.partition, partitionPrefix+strconv.Itoa(do.partition)
	ctx, cancel := context.WithTimeout(s.ended, giveTimeout)
	defer cancel()
	var err error
	switch do.verb {
	case drop:
		s.set(i, away)
		s.o.Drop(i)
		s.o.Log.Warn("partition is another server's now", "partition", i+1)
	case take:
		if err = s.o.Take(s.ended, i); err == nil {
			s.set(i, mine)
		}
	case give:
		if s.set(i, away) == mine {
			s.o.Give(ctx, i)
		}
		if err = s.put(ctx, i, "", do.revision); err == nil {
			s.o.Log.Info("partition given up", "partition", i+1)
		}
	case claim:
		err = s.claim(ctx, do)
	case hold:
		err = s.put(ctx, i, s.o.Self.ID, do.revision)
	case sweep:
		err = s.kv.Delete(ctx, serverPrefix+do.dead, do.deadAt)
		if err == nil || wrongRevision(err) {
			_ = s.learn(ctx, serverPrefix+do.dead) // it is known then, or asked for again
		}
	}
	if err == nil || s.ended.Err() != nil {
		return
	}
	if wrongRevision(err) { // another one was faster
		_ = s.learn(ctx, key) // likewise
	} else {
		s.o.Log.Warn("a partition cannot change hands yet", "partition", i+1, "error", err)
	}
	s.mu.Lock()
	s.core.later(i, s.now().Add(s.o.Lease/beats))
	s.mu.Unlock()
}

// claim writes a partition's key. Of a server that seems dead it asks once more.
func (s *Share) claim(ctx context.Context, do step) error {
	if do.dead != "" {
		e, err := s.kv.Get(ctx, serverPrefix+do.dead)
		if err != nil && !errors.Is(err, jetstream.ErrKeyNotFound) {
			return err
		}
		if err == nil && e.Revision != do.deadAt {
			s.saw(e)
			return nil
		}
		s.o.Log.Warn("server is not heard of any more", "server", do.dead, "partition", do.partition+1)
	}
	return s.put(ctx, do.partition, s.o.Self.ID, do.revision)
}

// put writes a partition's key over a revision of it: an empty owner frees it.
func (s *Share) put(ctx context.Context, i int, owner string, over uint64) error {
	ctx, cancel := context.WithTimeout(ctx, s.o.Lease/2) // what should have answered may be gone
	defer cancel()
	revision, err := s.kv.Update(ctx, partitionPrefix+strconv.Itoa(i), []byte(owner), over)
	if err != nil {
		return err
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	s.core.wrote(i, owner, revision, s.now())
	s.news()
	return nil
}

// learn reads a key that is not, or may not be, as it was thought to be.
func (s *Share) learn(ctx context.Context, key string) error {
	switch e, err := s.kv.Get(ctx, key); {
	case err == nil:
		s.saw(e)
	case errors.Is(err, jetstream.ErrKeyNotFound):
		s.mu.Lock()
		defer s.mu.Unlock()
		if id, ok := strings.CutPrefix(key, serverPrefix); ok {
			delete(s.core.servers, id)
		}
	default:
		return err
	}
	return nil
}

// set notes what this server does with a partition, and returns what it did.
func (s *Share) set(i int, to state) (was state) {
	s.mu.Lock()
	defer s.mu.Unlock()
	was, s.core.parts[i].state = s.core.parts[i].state, to
	s.news()
	return was
}

// Lost says that another server writes a partition: this one has stopped with it,
// and takes it again if its key still names this one.
func (s *Share) Lost(i int) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.core.parts[i].state = away
	s.core.later(i, s.now().Add(s.o.Lease/beats))
	s.news()
	s.wake()
}

// free takes out the keys that name this server.
func (s *Share) free(ctx context.Context) {
	s.mu.Lock()
	parts, own := slices.Clone(s.core.parts), s.own
	s.mu.Unlock()
	for i, p := range parts {
		if p.owner == s.o.Self.ID {
			if err := s.put(ctx, i, "", p.revision); err != nil {
				s.o.Log.Warn("partition cannot be freed: others take it when the lease is over", "partition", i+1, "error", err)
			}
		}
	}
	if err := s.kv.Delete(ctx, serverPrefix+s.o.Self.ID, own); err != nil {
		s.o.Log.Warn("this server's key cannot be taken out: it ends by itself", "error", err)
	}
}
