package journal

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"sync"
	"testing"
	"time"

	"github.com/nats-io/nats-server/v2/server"
)

// sharedAt is a broker that several can reach.
func sharedAt(t *testing.T) Options {
	t.Helper()
	b, err := server.NewServer(&server.Options{Host: "127.0.0.1", Port: -1, NoSigs: true, JetStream: true, StoreDir: t.TempDir(), DisableJetStreamBanner: true, MaxPayload: maxMessage + 4096})
	if err != nil {
		t.Fatal(err)
	}
	b.Start()
	t.Cleanup(func() { b.Shutdown(); b.WaitForShutdown() })
	if !b.ReadyForConnections(time.Minute) {
		t.Fatal("the broker does not start")
	}
	return Options{Broker: Broker{URL: b.ClientURL()}, MaxBytes: minBytes, Partitions: 3, Shared: true}
}

// TestShared proves that of servers which take partitions from one another, at any
// moment, one at a time writes a partition, and that nothing which was acknowledged
// is lost or there twice: read afterwards from the log.
func TestShared(t *testing.T) {
	o := sharedAt(t)
	type said struct {
		place Place
		text  string
	}
	var mu sync.Mutex
	var acknowledged []said
	lost := make(map[string]int)
	var servers sync.WaitGroup
	for name := range 3 {
		servers.Go(func() {
			rng := rand.New(rand.NewPCG(7, uint64(name)))
			mine := o
			mine.Lost = func(int) {
				mu.Lock()
				defer mu.Unlock()
				lost[fmt.Sprint(name)]++
			}
			j, _, err := Open(context.Background(), mine, nil)
			if err != nil {
				t.Error(err)
				return
			}
			defer j.Close()
			for round := range 25 {
				i := rng.IntN(o.Partitions)
				seen := map[Place][]string{}
				_, err := j.Take(context.Background(), i, func(r Record) error {
					seen[r.Place] = append(seen[r.Place], string(r.Data))
					return nil
				})
				if errors.Is(err, ErrTaken) {
					continue // another one was faster
				}
				if err != nil {
					t.Error(err)
					return
				}
				var l *Line
				for k := 0; l == nil; k++ { // a key of the partition
					if key := fmt.Sprint(k); j.Partition(key) == i {
						l = j.Begin(key)
					}
				}
				for n := range rng.IntN(12) {
					text := fmt.Sprint(name, " ", round, " ", n)
					_, err := put(l, 1, []byte(text))
					if errors.Is(err, ErrTaken) {
						break
					}
					if err != nil {
						t.Error(err)
						return
					}
					mu.Lock()
					acknowledged = append(acknowledged, said{l.Place(), text})
					mu.Unlock()
				}
				j.Give(context.Background(), i)
				if _, err := put(l, 1, []byte("too late")); !errors.Is(err, ErrClosed) && !errors.Is(err, ErrTaken) {
					t.Errorf("a line of a partition that was given up takes a record: %v", err)
				}
			}
		})
	}
	servers.Wait()
	if len(acknowledged) < 50 {
		t.Fatalf("only %d records were taken", len(acknowledged))
	}
	alone := o
	alone.Shared = false
	j, k := openAt(t, alone)
	if len(k.found.Damage) > 0 {
		t.Error(k.found.Damage)
	}
	for _, a := range acknowledged {
		n := 0
		for _, text := range texts(k.lines[a.place]) {
			if text == a.text {
				n++
			}
		}
		if n != 1 {
			t.Errorf("%q was acknowledged in %v and is there %d times", a.text, a.place, n)
		}
	}
	j.Close()
	oneAtATime(t, o)
	t.Logf("%d records, taken away while they were written: %v", len(acknowledged), lost)
}

// oneAtATime reads from the log that each partition had one writer at a time: with
// another writer there comes a greater epoch, and no earlier one comes back.
func oneAtATime(t *testing.T, o Options) {
	t.Helper()
	all, err := Writers(context.Background(), o.Broker)
	if err != nil {
		t.Fatal(err)
	}
	for i, of := range all {
		for k, w := range of {
			if w.Name == "" || k > 0 && w.Epoch <= of[k-1].Epoch {
				t.Errorf("partition %d: epoch %d by %q comes after epoch %d by %q", i, w.Epoch, w.Name, of[k-1].Epoch, of[k-1].Name)
			}
		}
		if len(of) < 4 {
			t.Errorf("partition %d changed hands too rarely: %v", i, of)
		}
	}
}
