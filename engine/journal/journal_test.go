package journal

import (
	"bytes"
	"errors"
	"fmt"
	"slices"
	"strings"
	"testing"
)

// What was acknowledged is there after opening again, in the order of its line.
func TestReopen(t *testing.T) {
	o := within(t)
	j, k := openAt(t, o)
	if len(k.lines) != 0 || len(k.found.Damage) != 0 {
		t.Fatalf("a new journal holds %v, damage %v", k.lines, k.found.Damage)
	}
	var lines []*Line
	for i := range 8 {
		lines = append(lines, j.Begin(fmt.Sprintf("vehicle-%d", i)))
	}
	if err := flood(lines, 50, 100); err != nil {
		t.Fatal(err)
	}
	s := j.State()
	if s.Records != 400 || s.Lines != 8 || s.Err != nil || s.Epoch != 1 {
		t.Errorf("state %+v", s)
	}
	big := bytes.Repeat([]byte("a long record "), 100_000)
	if _, err := put(lines[0], 7, big); err != nil {
		t.Fatal(err)
	}
	if err := j.Close(); err != nil {
		t.Fatal(err)
	}
	if _, err := put(lines[0], 1, nil); !errors.Is(err, ErrClosed) {
		t.Errorf("a closed journal says %v", err)
	}
	j, k = openAt(t, o)
	if len(k.found.Damage) > 0 {
		t.Errorf("damage %v", k.found.Damage)
	}
	for i, l := range lines {
		rs := k.lines[l.Place()]
		for n := range 50 {
			if want := fmt.Sprintf("%d/%d", i, n); !strings.HasPrefix(string(rs[n].Data), want+"\x00") || rs[n].Number != uint64(n+1) {
				t.Fatalf("line %d, record %d: %q, number %d", i, n, rs[n].Data[:10], rs[n].Number)
			}
		}
		if i == 0 {
			if len(rs) != 51 || rs[50].Kind != 7 || !bytes.Equal(rs[50].Data, big) {
				t.Errorf("the long record is not what it was (%d records)", len(rs))
			}
		} else if len(rs) != 50 {
			t.Errorf("line %d has %d records", i, len(rs))
		}
	}
	// Lines go on, and new ones do not take the names of old ones.
	l := j.Line(lines[3].Place())
	mustPut(t, l, "more")
	fresh := j.Begin("vehicle-3")
	if _, ok := k.lines[fresh.Place()]; ok || fresh.Place().Partition != l.Place().Partition {
		t.Errorf("a new line is %v after %v", fresh.Place(), l.Place())
	}
	mustPut(t, fresh, "first")
	j.Close()
	_, k = openAt(t, o)
	if got := texts(k.lines[l.Place()]); len(got) != 51 || got[50] != "more" {
		t.Errorf("the line that went on has %d records", len(got))
	}
	if got := texts(k.lines[fresh.Place()]); !slices.Equal(got, []string{"first"}) {
		t.Errorf("the new line has %q", got)
	}
}

// A folder is one server's.
func TestLocked(t *testing.T) {
	o := within(t)
	openAt(t, o)
	if _, _, err := tryOpen(o); err == nil || !strings.Contains(err.Error(), "in use by another server") {
		t.Errorf("a folder in use: %v", err)
	}
}

func TestOptions(t *testing.T) {
	for _, c := range []struct {
		o    Options
		want string
	}{
		{Options{}, "neither a folder nor a broker"},
		{Options{Dir: "x", Broker: Broker{URL: "nats://localhost:1"}}, "both a folder"},
		{Options{Broker: Broker{URL: "localhost"}}, "no broker's address"},
		{Options{Dir: "x", MaxBytes: 1000}, "too few"},
		{Options{Dir: "x", Partitions: 1000}, "give 1 to 256"},
		{Options{Dir: "x", FreeBytes: -1}, "negative"},
		{Options{Broker: Broker{URL: "nats://localhost:1", Key: "k"}}, "only one is given"},
		{Options{Broker: Broker{URL: "nats://localhost:1", Replicas: 9}}, "9 replicas"},
	} {
		if err := c.o.Validate(); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", c.o, err, c.want)
		}
	}
}

// Many records that wait together are one commit.
func TestGroupCommit(t *testing.T) {
	j, _ := openAt(t, within(t))
	lines := make([]*Line, 64)
	for i := range lines {
		lines[i] = j.Begin("one partition")
	}
	before := j.State()
	if err := flood(lines, 20, 100); err != nil {
		t.Fatal(err)
	}
	after := j.State()
	if n, c := after.Records-before.Records, after.Commits-before.Commits; n != 1280 || c > n/4 {
		t.Errorf("%d records took %d commits", n, c)
	}
}
