package journal

import (
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"sync"
	"testing"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go/jetstream"
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
	oneAtATime(t, j)
	t.Logf("%d records, taken away while they were written: %v", len(acknowledged), lost)
}

// oneAtATime reads from the log that each partition had one writer at a time: with
// another writer there comes a greater epoch, and no earlier one comes back.
func oneAtATime(t *testing.T, j *Journal) {
	t.Helper()
	st, err := j.stream(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for i := range j.Partitions() {
		var epochs []uint64
		var writers []string
		cfg := jetstream.OrderedConsumerConfig{DeliverPolicy: jetstream.DeliverAllPolicy, FilterSubjects: []string{subject(i)}}
		err := messages(context.Background(), st, cfg, func(m message) error {
			var k pack
			if err := k.read(m.data); err != nil {
				return err
			}
			raw, err := st.GetMsg(context.Background(), m.sequence)
			if err != nil {
				return err
			}
			w := raw.Header.Get(writerHeader)
			if n := len(epochs); n > 0 && (k.epoch < epochs[n-1] || (k.epoch == epochs[n-1]) && w != writers[n-1]) {
				t.Errorf("partition %d: pack %d of epoch %d by %s comes after epoch %d by %s", i, k.number, k.epoch, w, epochs[n-1], writers[n-1])
			}
			epochs, writers = append(epochs, k.epoch), append(writers, w)
			return nil
		})
		if err != nil {
			t.Fatal(err)
		}
		if len(slices.Compact(slices.Clone(writers))) < 3 {
			t.Errorf("partition %d changed hands too rarely: %d times", i, len(slices.Compact(writers)))
		}
	}
}
