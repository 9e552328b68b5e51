package share

import (
	"context"
	"time"
)

// Rehearse begins to share over keys and a clock of the caller's, who also says when
// something is done: there is no goroutine, and what is done is what Join's do.
func Rehearse(o Options, k Keys, now func() time.Time) *Share { return newShare(o, k, now) }

// Beat renews the lease.
func (s *Share) Beat(ctx context.Context) error {
	err := s.renew(ctx)
	if err == nil {
		s.catchUp(ctx)
	}
	return err
}

// Heard takes what a watch of the keys brings.
func (s *Share) Heard(e Entry) { s.told(e) }

// Step does the next thing that is to be done, if there is one.
func (s *Share) Step() (done bool) {
	s.mu.Lock()
	do := s.core.next(s.now())
	s.mu.Unlock()
	if do.verb == nothing {
		return false
	}
	s.do(do)
	return true
}

// BeatEvery is how often a lease of a length is renewed.
func BeatEvery(lease time.Duration) time.Duration { return lease / beats }
