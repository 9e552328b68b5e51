package journal

import (
	"context"
	"log/slog"
)

// Readable is a log that a rehearsal also reads.
type Readable interface {
	Log
	// Read takes the messages of a partition in order, maybe without the latest.
	Read(ctx context.Context, partition int, take func(Message) error) error
}

// Rehearse makes a shared journal over a log of the caller's, who also says when
// something is done: it has no goroutine and no clock, and what it does is what a
// journal at a broker does. Partitions are taken and given as there; what waits in
// them is committed by Step. It cannot erase, and lets nothing go.
func Rehearse(l Readable, partitions int, writer string) *Journal {
	j := &Journal{o: Options{Shared: true}.withDefaults(), writer: writer, log: l, rehearsed: l, parts: make([]*partition, partitions)}
	j.o.Log = slog.New(slog.DiscardHandler)
	j.ended, j.end = context.WithCancel(context.Background())
	return j
}

// Step commits what waits in a partition, as much as fits into a pack, and reports
// whether another server was found to write it (see Options.Lost).
func (j *Journal) Step(index int) (lost bool) {
	p := j.part(index)
	if p == nil {
		return false
	}
	p.busy = true
	if batch, _ := p.take(); len(batch) > 0 {
		p.serve(batch)
	}
	p.busy = false
	return p.lost
}

// Waits reports whether something waits in a partition.
func (j *Journal) Waits(index int) bool {
	p := j.part(index)
	if p == nil {
		return false
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	return len(p.queue) > 0
}

// giveRehearsed is what the committer's goroutine would do when its partition goes.
func (p *partition) giveRehearsed(ctx context.Context) {
	if ctx.Err() != nil {
		p.cancel()
	}
	for p.busy { // somebody else's Step
		p.j.log.Wait(context.Background(), shortestWait)
	}
	p.run()
}
