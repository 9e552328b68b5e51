package outbox

import (
	"errors"

	bolt "go.etcd.io/bbolt"
)

// state is what is in "about", but for the header.
type state struct {
	asked, name          string
	base, after, durable uint64
	open                 bool // the drive is not to be ended
}

var openKey = []byte("open")

func (s *state) put(about *bolt.Bucket) error {
	return errors.Join(about.Put([]byte("asked"), []byte(s.asked)), about.Put([]byte("name"), []byte(s.name)),
		about.Put([]byte("base"), key(s.base)), about.Put([]byte("after"), key(s.after)), about.Put([]byte("durable"), key(s.durable)), s.putOpen(about))
}

func (s *state) putOpen(about *bolt.Bucket) error {
	if s.open {
		return about.Put(openKey, []byte("1"))
	}
	return about.Delete(openKey)
}

// keepOpen notes whether the drive is not to be ended.
func (f *file) keepOpen(open bool) error {
	f.mu.Lock()
	defer f.mu.Unlock()
	next := f.state
	next.open = open
	return f.write(next)
}

func (f *file) drive() string {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.state.name
}

func (f *file) durable() uint64 {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.durably
}

func (f *file) bytes() int64 {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.size
}

func (f *file) waiting() int {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.count
}
