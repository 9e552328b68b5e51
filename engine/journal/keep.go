package journal

import (
	"context"
	"errors"
	"fmt"
	"sync"
	"time"

	"github.com/nats-io/nats.go/jetstream"
)

// Old records go when the journal is past goFrom of its bound, until it is at
// goTo, but for what lines need. New records are refused past fullFrom, and
// urgent ones, which let others go, past urgentFrom.
const (
	goFrom     = 0.75
	goTo       = 0.65
	fullFrom   = 0.90
	urgentFrom = 0.97
	keepEvery  = time.Second
	// ages is in how many steps records reach the age at which they go.
	ages = 16
)

// room remembers whether the journal was full, so that it is said once.
type room struct {
	mu   sync.Mutex
	full bool
}

// full is why there is no room for a record, of urgency 0 or 1.
func (j *Journal) full(urgency int) error {
	share, leave := fullFrom, j.o.FreeBytes
	if urgency > 0 {
		share, leave = urgentFrom, j.o.FreeBytes/4
	}
	if b := j.bytes.Load(); float64(b) > share*float64(j.o.MaxBytes) {
		return fmt.Errorf("%w: it takes %d MiB of %d, all of which is needed", ErrFull, b>>20, j.o.MaxBytes>>20)
	}
	if j.o.Dir == "" {
		return nil
	}
	free, err := freeBytes(j.o.Dir)
	if err == nil && free < leave {
		return fmt.Errorf("%w: %d MiB are free on its disk, and %d are to be left free", ErrFull, free>>20, leave>>20)
	}
	return nil
}

// keep is a goroutine: it lets old records go, and says when the journal fills.
func (j *Journal) keep() {
	tick := time.NewTicker(keepEvery)
	defer tick.Stop()
	var seen uint64
	var aged time.Time
	for {
		select {
		case <-j.ended.Done():
			return
		case <-tick.C:
		}
		j.say()
		if now := time.Now(); j.o.MaxAge > 0 && now.Sub(aged) >= j.o.MaxAge/(4*ages) {
			aged = now
			if err := j.age(j.ended, now); err != nil && j.ended.Err() == nil {
				j.o.Log.Warn("journal cannot be tidied", "error", err)
			}
		}
		if n := j.commits.Load(); n == seen && float64(j.bytes.Load()) < goFrom*float64(j.o.MaxBytes) {
			continue
		} else {
			seen = n
		}
		if err := j.tidy(j.ended); err != nil && j.ended.Err() == nil {
			j.o.Log.Warn("journal cannot be tidied", "error", err)
		}
	}
}

// say logs that the journal has become full, or has room again.
func (j *Journal) say() {
	err := j.full(0)
	j.room.mu.Lock()
	defer j.room.mu.Unlock()
	switch {
	case err != nil && !j.room.full:
		j.o.Log.Error("journal takes nothing new", "error", err)
	case err == nil && j.room.full:
		j.o.Log.Info("journal has room again")
	}
	j.room.full = err != nil
}

// tidy lets go what is too much, and asks those who stand in the way.
func (j *Journal) tidy(ctx context.Context) error {
	call, cancel := context.WithTimeout(ctx, callTimeout)
	defer cancel()
	st, err := j.stream(call)
	if err != nil {
		return err
	}
	state := st.CachedInfo().State
	j.bytes.Store(int64(state.Bytes))
	if float64(state.Bytes) < goFrom*float64(j.o.MaxBytes) || state.Msgs == 0 {
		return nil
	}
	// As if all messages were of one size.
	over := 1 - goTo*float64(j.o.MaxBytes)/float64(state.Bytes)
	until := state.FirstSeq + uint64(over*float64(state.LastSeq-state.FirstSeq))
	if !j.sweep.TryLock() {
		return nil // something is being erased, which makes no less room
	}
	defer j.sweep.Unlock()
	for _, p := range j.own() {
		if err := j.drop(call, p, until); err != nil {
			return fmt.Errorf("partition %d: %w", p.index+1, err)
		}
	}
	if st, err = j.stream(call); err == nil {
		j.bytes.Store(int64(st.CachedInfo().State.Bytes))
	}
	return err
}

// age lets go what is older than records may be, and asks those who stand in the
// way.
func (j *Journal) age(ctx context.Context, now time.Time) error {
	if !j.sweep.TryLock() {
		return nil
	}
	defer j.sweep.Unlock()
	call, cancel := context.WithTimeout(ctx, callTimeout)
	defer cancel()
	for _, p := range j.own() {
		p.mu.Lock()
		quiet := p.pack.number > p.pack.first && now.Sub(p.written) >= j.o.MaxAge/ages
		var until uint64
		for _, at := range p.places {
			if now.Sub(at.at) >= j.o.MaxAge {
				until = at.sequence
			}
		}
		p.mu.Unlock()
		if quiet { // so that there is something to begin with once the rest is gone
			if err := p.header(call); err != nil {
				return fmt.Errorf("partition %d: %w", p.index+1, err)
			}
		}
		if err := j.drop(call, p, until); err != nil {
			return fmt.Errorf("partition %d: %w", p.index+1, err)
		}
	}
	return nil
}

// drop lets go of a partition's packs before a sequence of the broker's, but for
// what is needed. The pack that says so comes first: who reads knows then what
// is missing by intent.
func (j *Journal) drop(ctx context.Context, p *partition, until uint64) error {
	target, asks := p.target(until)
	for _, ask := range asks {
		ask()
	}
	if target.number == 0 {
		return nil
	}
	if err := p.header(ctx); err != nil {
		return err
	}
	st, err := j.stream(ctx)
	if err != nil {
		return err
	}
	if err := st.Purge(ctx, purgeBefore(p.subject, target.sequence)...); err != nil {
		return err
	}
	return p.dropCopies(ctx, st, target.number)
}

// dropCopies lets go of the copies of packs before one.
func (p *partition) dropCopies(ctx context.Context, st jetstream.Stream, before uint64) error {
	p.mu.Lock()
	old := map[uint64]uint64{}
	for number, sequence := range p.copies {
		if number < before {
			old[number] = sequence
			delete(p.copies, number)
		}
	}
	p.mu.Unlock()
	for number, sequence := range old {
		if err := st.DeleteMsg(ctx, sequence); err != nil && !errors.Is(err, jetstream.ErrMsgNotFound) {
			return fmt.Errorf("copy of pack %d: %w", number, err)
		}
	}
	return nil
}

// target chooses the first pack that is to be kept, and who is to be asked to
// need less.
func (p *partition) target(until uint64) (at indexed, asks []func()) {
	p.mu.Lock()
	defer p.mu.Unlock()
	needed := p.pack.number
	for _, l := range p.lines {
		needed = min(needed, l.keep)
	}
	n := 0 // of the index, goes
	for n+1 < len(p.places) && p.places[n+1].sequence <= until && p.places[n+1].number <= needed {
		n++
	}
	for _, l := range p.lines {
		// Those within the older half of what is to go, or all if nothing can.
		if n+1 < len(p.places) && p.places[n+1].sequence <= until && l.keep < p.places[n+1].number+indexEvery && l.ask != nil && !l.pressed {
			l.pressed = true
			asks = append(asks, l.ask)
		}
	}
	if n == 0 {
		return indexed{}, asks
	}
	at = p.places[n]
	p.places = append([]indexed(nil), p.places[n:]...)
	p.pack.first = at.number
	return at, asks
}
