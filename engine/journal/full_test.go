package journal

import (
	"errors"
	"fmt"
	"testing"
	"time"
)

// TestFull fills a journal to its bound: new records are refused with ErrFull and
// none of them is half in, urgent ones are taken, and there is room again once a
// line needs less; then old records are gone, and nothing else is.
func TestFull(t *testing.T) {
	o := within(t)
	o.MaxBytes, o.Partitions, o.Log = minBytes, 1, nil
	j, _ := openAt(t, o)
	asked := make(chan struct{}, 1)
	l := j.Begin("v")
	l.OnPressed(func() { asked <- struct{}{} })
	data := make([]byte, 400<<10)
	taken := 0
	var err error
	var last uint64
	for ; err == nil && taken < 200; taken++ {
		copy(data, fmt.Sprint(taken))
		var at uint64
		if at, err = put(l, 1, data); err == nil {
			last = at
		}
	}
	taken--
	if !errors.Is(err, ErrFull) || taken < 50 || taken > 80 {
		t.Fatalf("after %d records of 400 KiB: %v", taken, err)
	}
	if s := j.State(); !errors.Is(s.Err, ErrFull) {
		t.Errorf("state %+v", s)
	}
	if _, err := put(l, 1, []byte("before it is mended")); !errors.Is(err, ErrFull) {
		t.Errorf("a line that was refused takes records: %v", err)
	}
	l.Mend()
	select {
	case <-asked:
	case <-time.After(time.Minute):
		t.Fatal("nobody is asked to need less")
	}
	done := make(chan error, 1)
	l.Append(5, []byte("all of it in short"), true, func(_ At, err error) { done <- err })
	if err := <-done; err != nil {
		t.Fatalf("an urgent record: %v", err)
	}
	l.Keep(last)
	for end := time.Now().Add(time.Minute); j.State().Err != nil; time.Sleep(20 * time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("there is no room again: %+v", j.State())
		}
	}
	if _, err := put(l, 1, []byte("after it")); err != nil {
		t.Fatal(err)
	}
	j.Close()
	_, k := openAt(t, o)
	if len(k.found.Damage) > 0 {
		t.Errorf("what went on purpose is called damage: %v", k.found.Damage)
	}
	rs := k.lines[l.Place()]
	n := len(rs)
	if n < 2 || string(rs[n-1].Data) != "after it" || string(rs[n-2].Data) != "all of it in short" || n-2 >= taken {
		t.Errorf("%d records are left of %d", n, taken)
	}
}
