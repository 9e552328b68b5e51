package journal

import (
	"bytes"
	"context"
	"encoding/base64"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"
)

// holdsText reports which files under a folder hold some text, as it is or in
// base64.
func holdsText(t *testing.T, dir, text string) (paths []string) {
	t.Helper()
	err := filepath.WalkDir(dir, func(path string, e os.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		b, err := os.ReadFile(path)
		if bytes.Contains(b, []byte(text)) || bytes.Contains(b, []byte(base64.StdEncoding.EncodeToString([]byte(text)))) {
			paths = append(paths, path)
		}
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return paths
}

// secret is what a test's records of a vehicle hold.
const secret = "the secret place of"

// TestErase erases one vehicle's lines, once broken off, among many that share
// its packs: not a byte of them is left in the folder, all else is there in its
// order and without a word of damage, and the journal goes on.
func TestErase(t *testing.T) {
	o := within(t)
	o.Partitions = 1
	j, _ := openAt(t, o)
	want := map[Place][]string{}
	begin := func(name string) *Line {
		l := j.Begin(name)
		mustPut(t, l, "begin "+name)
		want[l.Place()] = []string{"begin " + name}
		return l
	}
	var lines []*Line
	for i := range 5 {
		lines = append(lines, begin(fmt.Sprint("van ", i)))
	}
	victims := []*Line{begin("victim"), begin("victim")}
	add := func(n int) {
		for i := range n {
			done := make(chan struct{}, 10)
			all := append(slices.Clone(lines), victims[i%2])
			for k, l := range all { // they wait together, and share packs
				text := fmt.Sprintf("%d of %d", i, k)
				if l == victims[i%2] {
					text = secret + " the victim"
				}
				if i == 5 { // in parts
					text += strings.Repeat(" and so on", maxPart/5)
				}
				want[l.Place()] = append(want[l.Place()], text)
				l.Append(1, []byte(text), false, func(_ At, err error) {
					if err != nil {
						t.Error(err)
					}
					done <- struct{}{}
				})
			}
			for range all {
				<-done
			}
		}
	}
	add(20)
	owns := func(r Record) bool { return string(r.Data) == "begin victim" }
	marker := j.Begin("victim")
	mustPut(t, marker, "erase "+secret)
	after := begin("victim") // a later drive stays
	if got := holdsText(t, o.Dir, secret); len(got) == 0 {
		t.Fatal("what is to be erased is not found before")
	}

	// One that is broken off changes nothing that cannot be gone on with.
	ctx, cancel := context.WithCancel(context.Background())
	n := 0
	_, err := j.Erase(ctx, marker, func(r Record) bool {
		if n++; n == 3 {
			cancel()
		}
		return owns(r)
	})
	if err == nil {
		t.Error("an erasure that is broken off has no error")
	}
	j.Close()
	j, k := openAt(t, o)
	if len(k.found.Damage) > 0 {
		t.Errorf("after a broken one: damage %v", k.found.Damage)
	}
	if m := j.Line(marker.Place()); m == nil {
		t.Fatal("the line that is given is gone before the others")
	} else {
		marker = m
	}
	e, err := j.Erase(t.Context(), marker, owns)
	if err != nil || e.Lines != 3 || e.Records != 23 {
		t.Errorf("erased %+v, %v", e, err)
	}
	// Another one from what has been copied already.
	other := j.Line(lines[1].Place())
	e, err = j.Erase(t.Context(), other, func(Record) bool { return false })
	if err != nil || e.Lines != 1 || e.Records != 21 {
		t.Errorf("erased %+v, %v", e, err)
	}
	mustPut(t, j.Line(after.Place()), "goes on")
	want[after.Place()] = append(want[after.Place()], "goes on")
	j.Close()
	if got := holdsText(t, o.Dir, secret); len(got) > 0 {
		t.Errorf("what was erased is in %v", got)
	}
	for _, p := range []Place{victims[0].Place(), victims[1].Place(), marker.Place(), other.Place()} {
		delete(want, p)
	}
	j, k = openAt(t, o)
	if len(k.found.Damage) > 0 {
		t.Errorf("damage %v", k.found.Damage)
	}
	if len(k.lines) != len(want) {
		t.Errorf("%d lines are left, want %d", len(k.lines), len(want))
	}
	for place, texts := range want {
		var got []string
		for i, r := range k.lines[place] {
			if got = append(got, string(r.Data)); i > 0 && r.Pack < k.lines[place][i-1].Pack {
				t.Errorf("%v: record %d is in an earlier pack than the one before it", place, r.Number)
			}
		}
		if !slices.Equal(got, texts) {
			t.Errorf("%v holds %d records, want %d", place, len(got), len(texts))
		}
	}
	if fresh := j.Begin("victim"); fresh.id <= after.id {
		t.Errorf("line %d is given twice", fresh.id)
	}
}

// TestStale has a journal in which a pack is there beside its copy, as a server
// leaves it that dies between the two: the copy counts, and the pack is
// overwritten.
func TestStale(t *testing.T) {
	o := within(t)
	o.Partitions = 1
	j, _ := openAt(t, o)
	l := j.Begin("v")
	mustPut(t, l, "before")
	at := mustPut(t, l, secret)
	mustPut(t, l, "after")
	without := pack{epoch: 1, number: at, first: 1, lines: 1}
	if _, err := j.broker.Load().js.Publish(t.Context(), copySubject(0), without.appendTo(nil)); err != nil {
		t.Fatal(err)
	}
	j.Close()
	_, k := openAt(t, o)
	if got := texts(k.lines[l.Place()]); !slices.Equal(got, []string{"before", "after"}) {
		t.Errorf("it is read as %q", got)
	}
	if len(k.found.Damage) != 1 || k.found.Damage[0].From != 2 { // the copy here lacks what no erasure leaves out alone
		t.Errorf("damage %v", k.found.Damage)
	}
	if got := holdsText(t, o.Dir, secret); len(got) > 0 {
		t.Errorf("what was erased is in %v", got)
	}
}

// TestAge proves that records go when they are older than they may be, that who
// still needs some is asked for them anew before, and that nothing of it is
// called damage.
func TestAge(t *testing.T) {
	o := within(t)
	o.Partitions, o.MaxAge = 1, time.Second
	j, _ := openAt(t, o)
	l := j.Begin("needs")
	l.OnPressed(func() {
		l.Append(5, []byte("all of it in short"), true, func(at At, err error) {
			if errors.Is(err, ErrClosed) {
				return // pressed once more while the test closes it
			}
			if err != nil {
				t.Error(err)
			}
			l.Keep(at.First)
		})
	})
	ended := j.Begin("ended")
	for i := range 5 {
		mustPut(t, l, fmt.Sprint(secret, i))
		mustPut(t, ended, fmt.Sprint(secret, i))
	}
	if j.State().Oldest.IsZero() {
		t.Error("the oldest record has no time")
	}
	ended.Release()
	first := func() uint64 {
		l.p.mu.Lock()
		defer l.p.mu.Unlock()
		return l.p.pack.first
	}
	for end := time.Now().Add(time.Minute); first() < 11; time.Sleep(20 * time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("pack %d is still there", first())
		}
	}
	func() { // until what has been chosen is gone
		j.sweep.Lock()
		defer j.sweep.Unlock()
	}()
	mustPut(t, l, "goes on")
	j.Close()
	_, k := openAt(t, o)
	if len(k.found.Damage) > 0 {
		t.Errorf("damage %v", k.found.Damage)
	}
	got := texts(k.lines[l.Place()])
	if len(got) < 2 || strings.Contains(fmt.Sprint(got), secret) || got[0] != "all of it in short" || got[len(got)-1] != "goes on" || len(k.lines[ended.Place()]) > 0 {
		t.Errorf("left are %q and %q", got, texts(k.lines[ended.Place()]))
	}
}
