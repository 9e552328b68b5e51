package share

import (
	"cmp"
	"context"
	"slices"
)

// Place is who has a partition.
type Place struct {
	// Mine says that this server serves it. Else Server does, if it is set: nobody
	// has it for the moment, or this server is about to.
	Mine   bool
	Server *Server
	// Changed is closed when something has changed.
	Changed <-chan struct{}
}

// Where says who has a partition now.
func (s *Share) Where(i int) Place {
	now := s.now()
	s.mu.Lock()
	defer s.mu.Unlock()
	p := &s.core.parts[i]
	out := Place{Changed: s.changed}
	switch {
	case p.owner == s.o.Self.ID:
		out.Mine = s.core.answers(i, now)
	case p.owner != "" && s.core.maybeAlive(p.owner, now):
		of := s.core.servers[p.owner].Server
		out.Server = &of
	}
	return out
}

// ID is this server's.
func (s *Share) ID() string { return s.o.Self.ID }

// Known are the other servers that there were a while ago, alive or not.
func (s *Share) Known() (out []Server) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for id, of := range s.core.servers {
		if id != s.o.Self.ID && !of.Leaving {
			out = append(out, of.Server)
		}
	}
	return out
}

// Others are the other servers that are alive, in the order of their names.
func (s *Share) Others() (out []Server) {
	now := s.now()
	s.mu.Lock()
	defer s.mu.Unlock()
	for id, of := range s.core.servers {
		if id != s.o.Self.ID && s.core.alive(id, now) {
			out = append(out, of.Server)
		}
	}
	slices.SortFunc(out, func(a, b Server) int { return cmp.Compare(a.ID, b.ID) })
	return out
}

// Own is how many partitions this server serves.
func (s *Share) Own() (n int) {
	now := s.now()
	s.mu.Lock()
	defer s.mu.Unlock()
	for i := range s.core.parts {
		if s.core.answers(i, now) {
			n++
		}
	}
	return n
}

// Fresh reports whether this server's lease holds.
func (s *Share) Fresh() bool {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.core.fresh(s.now())
}

// Retire has this server take and give nothing any more: it is about to leave.
func (s *Share) Retire(ctx context.Context) error {
	s.mu.Lock()
	s.core.self.Leaving = true
	s.mu.Unlock()
	return s.renew(ctx)
}

// Leave frees all that this server had, which must have been given up.
func (s *Share) Leave(ctx context.Context) {
	s.stop()
	s.free(ctx)
}

// Settle waits until what is being done with a partition is, and does nothing more
// with any.
func (s *Share) Settle() {
	s.rest.Do(func() { close(s.resting) })
	<-s.rested
}
