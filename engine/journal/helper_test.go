package journal

import (
	"context"
	"fmt"
	"log/slog"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// kept is what a journal was found to hold, by line.
type kept struct {
	found *Found
	lines map[Place][]Record
}

// openAt opens a journal with the options; the test ends with it closed.
func openAt(t testing.TB, o Options) (*Journal, kept) {
	t.Helper()
	j, k, err := tryOpen(o)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { j.Close() })
	return j, k
}

func tryOpen(o Options) (*Journal, kept, error) {
	k := kept{lines: map[Place][]Record{}}
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	j, found, err := Open(ctx, o, func(r Record) error {
		r.Data = append([]byte(nil), r.Data...)
		k.lines[r.Place] = append(k.lines[r.Place], r)
		return nil
	})
	k.found = found
	return j, k, err
}

func within(t testing.TB) Options { return Options{Dir: t.TempDir(), Log: logTo(t), FreeBytes: 1} }

// logTo has warnings in the test's log.
func logTo(t testing.TB) *slog.Logger {
	return slog.New(slog.NewTextHandler(testWriter{t}, &slog.HandlerOptions{Level: slog.LevelWarn}))
}

type testWriter struct{ t testing.TB }

func (w testWriter) Write(b []byte) (int, error) {
	w.t.Helper()
	w.t.Logf("%s", b)
	return len(b), nil
}

// put appends a record and waits until it is in.
func put(l *Line, kind byte, data []byte) (pack uint64, err error) {
	done := make(chan struct{})
	l.Append(kind, data, false, func(at At, e error) {
		pack, err = at.Pack, e
		close(done)
	})
	<-done
	return pack, err
}

func mustPut(t testing.TB, l *Line, data string) uint64 {
	t.Helper()
	pack, err := put(l, 1, []byte(data))
	if err != nil {
		t.Fatal(err)
	}
	return pack
}

// texts are the data of records.
func texts(rs []Record) (out []string) {
	for _, r := range rs {
		out = append(out, string(r.Data))
	}
	return out
}

// flood appends n records to each of some lines, from as many goroutines, and
// returns the first error.
func flood(lines []*Line, n, bytes int) error {
	var all sync.WaitGroup
	errs := make(chan error, len(lines))
	for k, l := range lines {
		all.Go(func() {
			for i := range n {
				data := make([]byte, bytes)
				copy(data, fmt.Sprintf("%d/%d", k, i))
				if _, err := put(l, 1, data); err != nil {
					errs <- err
					return
				}
			}
		})
	}
	all.Wait()
	close(errs)
	return <-errs
}
