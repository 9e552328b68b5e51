package server

import (
	"sync/atomic"
	"testing"
	"time"

	"leadline/engine/client"
	"leadline/engine/session"
)

// TestSearches: work runs beside who began it, no more of it at once than there
// are slots, and its end and its panic come to whoever waits.
func TestSearches(t *testing.T) {
	s := &searches{slots: make(chan struct{}, 2), waiting: new(atomic.Int64)}
	var running, most, done atomic.Int32
	var waits []func()
	for range 8 {
		waits = append(waits, s.begin(func() {
			n := running.Add(1)
			for m := most.Load(); n > m && !most.CompareAndSwap(m, n); m = most.Load() {
			}
			time.Sleep(2 * time.Millisecond)
			running.Add(-1)
			done.Add(1)
		}))
	}
	for _, wait := range waits {
		wait()
		wait() // once more is nothing
	}
	if done.Load() != 8 || most.Load() > 2 {
		t.Errorf("%d done, up to %d at once", done.Load(), most.Load())
	}
	wait := s.begin(func() { panic("lost") })
	s.wait()
	func() {
		defer func() {
			if r := recover(); r != "lost" {
				t.Errorf("the panic is %v", r)
			}
		}()
		wait()
	}()
}

// TestSessionsSearchBeside: the server gives every session a place to search.
func TestSessionsSearchBeside(t *testing.T) {
	var got session.Config
	_, conn := serve(t, Config{NewSession: func(c session.Config) (Session, error) {
		got = c
		return newTally(c)
	}})
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(3, 5)); err != nil {
		t.Fatal(err)
	}
	if got.Begin == nil {
		t.Fatal("a session has nowhere to search")
	}
	ran := false
	got.Begin(func() { ran = true })()
	if !ran {
		t.Error("what was begun did not run")
	}
}
