package server

import (
	"runtime"
	"sync"
	"sync/atomic"
)

// searchesAtOnce is how many of a whole server run: each takes a core for seconds, of
// which half are left to the others, and what a thousand openings take of memory.
func searchesAtOnce() int { return max(1, min(2, runtime.GOMAXPROCS(0)/2)) }

// searches runs what a session has done beside it, such as a search of the whole
// map: elsewhere than on the owner's goroutine, which goes on with measurements
// meanwhile, and few at once on the whole server.
type searches struct {
	slots   chan struct{} // the server's, holds a token each that runs
	waiting *atomic.Int64 // the server's, counts those that wait for one
	running sync.WaitGroup
}

// begin begins work and returns what waits for its end; that panics with what
// work panicked with.
func (s *searches) begin(work func()) (wait func()) {
	ended := make(chan any, 1)
	s.running.Go(func() {
		s.waiting.Add(1)
		s.slots <- struct{}{}
		s.waiting.Add(-1)
		defer func() {
			<-s.slots
			ended <- recover()
		}()
		work()
	})
	return sync.OnceFunc(func() {
		if r := <-ended; r != nil {
			panic(r)
		}
	})
}

// wait waits for all that has begun: it reads the map.
func (s *searches) wait() { s.running.Wait() }
