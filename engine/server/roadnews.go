package server

import (
	"maps"
	"slices"
	"sync"

	leadlinev1 "leadline/proto/leadline/v1"
)

// roadBook is which roads there are. Owners bring what begins and ends, and never
// wait.
type roadBook struct {
	news broadcast // that something in it has changed

	mu      sync.Mutex
	all     map[string]*leadlinev1.FollowResponse // by name; one is replaced and never changed
	readers map[*roadReader]bool
}

func newRoadBook() *roadBook {
	return &roadBook{all: map[string]*leadlinev1.FollowResponse{}, readers: map[*roadReader]bool{}}
}

// reader is a new one, for as long as it is not closed.
func (b *roadBook) reader() *roadReader {
	r := &roadReader{book: b, told: map[string]*leadlinev1.FollowResponse{}, moved: map[string]bool{}}
	b.mu.Lock()
	defer b.mu.Unlock()
	b.readers[r] = true
	return r
}

// put notes that a road has this drive. Of one that has been replaced nothing
// more is noted.
func (b *roadBook) put(o *owner, ended bool) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if old := b.all[o.vehicle]; ended && old.GetDrive() != o.drive {
		return
	}
	for r := range b.readers {
		delete(r.moved, o.vehicle)
	}
	b.all[o.vehicle] = &leadlinev1.FollowResponse{Vehicle: o.vehicle, Drive: o.drive, News: &leadlinev1.FollowResponse_Road{Road: &leadlinev1.FollowedRoad{Ended: ended}}}
	b.news.tell()
}

// drop notes that a road's drive is here no more.
func (b *roadBook) drop(o *owner, moved bool) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.all[o.vehicle].GetDrive() != o.drive {
		return // another one has taken its place
	}
	delete(b.all, o.vehicle)
	for r := range b.readers {
		if moved && r.told[o.vehicle] != nil {
			r.moved[o.vehicle] = true
		}
	}
	b.news.tell()
}

// roadReader is one who is told which roads there are. It remembers what it has
// told, so that nothing has to wait for it in line.
type roadReader struct {
	book *roadBook // nil tells of nothing
	// Guarded by book.mu: what was told, and of that what another server goes on with,
	// which tells of it.
	told  map[string]*leadlinev1.FollowResponse
	moved map[string]bool
	wake  <-chan struct{} // closed when there may be something to tell
	next  []*leadlinev1.FollowResponse
}

// close has the book forget the reader.
func (r *roadReader) close() {
	if b := r.book; b != nil {
		b.mu.Lock()
		defer b.mu.Unlock()
		delete(b.readers, r)
	}
}

// take returns what to tell next; nil if there is nothing until wake.
func (r *roadReader) take() *leadlinev1.FollowResponse {
	if r.book == nil {
		return nil
	}
	if len(r.next) == 0 {
		r.look()
	}
	if len(r.next) == 0 {
		return nil
	}
	m := r.next[0]
	r.next = r.next[1:]
	return m
}

// look compares what there is with what was told.
func (r *roadReader) look() {
	b := r.book
	r.wake = b.news.wait() // before it looks, so that nothing is missed
	b.mu.Lock()
	defer b.mu.Unlock()
	for _, name := range slices.Sorted(maps.Keys(r.told)) {
		if b.all[name] != nil {
			continue
		}
		if was := r.told[name]; !r.moved[name] {
			r.next = append(r.next, &leadlinev1.FollowResponse{Vehicle: name, Drive: was.GetDrive(), News: &leadlinev1.FollowResponse_Road{Road: &leadlinev1.FollowedRoad{Ended: was.GetRoad().GetEnded(), Gone: true}}})
		}
		delete(r.told, name)
		delete(r.moved, name)
	}
	for _, name := range slices.Sorted(maps.Keys(b.all)) {
		if now := b.all[name]; r.told[name] != now {
			r.told[name] = now
			r.next = append(r.next, now)
		}
	}
}
