package main

import (
	"fmt"
	"io"
	"time"
)

// silence tells of a server that does not answer: once why, and then how long
// that has lasted, each time after twice as long. Client calls onBreak and
// over from one goroutine.
type silence struct {
	errs io.Writer
	at   string
	now  func() time.Time

	since, next time.Time // since is zero while the server answers
}

// The first line about how long it has lasted, and the most between two.
const (
	silenceFirst = 10 * time.Second
	silenceMost  = time.Hour
)

func (s *silence) onBreak(err error, anew bool) {
	if anew {
		fmt.Fprintln(s.errs, "leadline: the server does not know the stream any more: it begins anew")
		return
	}
	now := s.now()
	if s.since.IsZero() {
		s.since, s.next = now, now.Add(silenceFirst)
		fmt.Fprintln(s.errs, "leadline: "+oneLine(sentences(serverError(err, s.at), "Trying again.").Error()))
		return
	}
	if now.Before(s.next) {
		return
	}
	lasted := now.Sub(s.since)
	s.next = now.Add(min(lasted, silenceMost))
	fmt.Fprintf(s.errs, "leadline: no answer for %v, still trying\n", lasted.Round(time.Second))
}

// over notes that the server has answered.
func (s *silence) over() { s.since = time.Time{} }
