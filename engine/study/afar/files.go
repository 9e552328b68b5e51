package afar

import (
	"context"
	"fmt"
	"io"
	"os"
	"sync"

	"leadline/engine/study/sweep"
)

// files are what a worker has fetched for a job: each once.
type files struct {
	b    *broker
	open func(path string) (*sweep.Map, io.Closer, error)
	dir  string

	mu     sync.Mutex
	maps   map[string]*openedMap
	drives map[string]*fetched
}

type fetched struct {
	mu   sync.Mutex
	path string
}

type openedMap struct {
	mu     sync.Mutex
	m      *sweep.Map
	closer io.Closer
}

// drive is the file of a drive. A mistake of a moment is gone the next time.
func (f *files) drive(ctx context.Context, sum string) (path string, err error) {
	f.mu.Lock()
	x := f.drives[sum]
	if x == nil {
		x = &fetched{}
		f.drives[sum] = x
	}
	f.mu.Unlock()
	x.mu.Lock()
	defer x.mu.Unlock()
	if x.path == "" {
		x.path, err = f.b.files.Fetch(ctx, sum, f.dir)
	}
	return x.path, err
}

// chart is a map, which must be the one that was asked for.
func (f *files) chart(ctx context.Context, fingerprint string) (*sweep.Map, error) {
	f.mu.Lock()
	x := f.maps[fingerprint]
	if x == nil {
		x = &openedMap{}
		f.maps[fingerprint] = x
	}
	f.mu.Unlock()
	x.mu.Lock()
	defer x.mu.Unlock()
	if x.m != nil {
		return x.m, nil
	}
	path, err := f.b.maps.Fetch(ctx, fingerprint, f.dir)
	if err != nil {
		return nil, err
	}
	m, closer, err := f.open(path)
	if err != nil {
		return nil, err
	}
	if is := m.Space.Fingerprint(); is != fingerprint {
		_ = closer.Close()
		return nil, fmt.Errorf("the map that the broker has is another one, of fingerprint %s, where the job asks for %s: take it out of the broker's store LEADLINE_MAPS and start the replay again", is, fingerprint)
	}
	x.m, x.closer = m, closer
	return m, nil
}

// close closes the maps and takes the files away; nobody uses them any more.
func (f *files) close() {
	for _, x := range f.maps {
		if x.closer != nil {
			_ = x.closer.Close()
		}
	}
	_ = os.RemoveAll(f.dir)
}
