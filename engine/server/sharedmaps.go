package server

import (
	"context"
	"errors"
	"fmt"
	"os"
	"slices"
	"sync"
	"time"

	"leadline/engine/server/share"
)

// Servers that share a journal share their maps, too: each stores the files of those
// that it has at the broker, by fingerprint, and fetches what a drive needs. A name
// stands for the same map at all of them.

// A map that cannot be stored, as while the brokers of a cluster elect, is tried again
// after a wait that doubles from the first to the last of these.
const (
	shareAgainFirst = 200 * time.Millisecond
	shareAgainLast  = 30 * time.Second
)

// mapTimeout bounds storing or fetching a map.
const mapTimeout = 5 * time.Minute

// sharedMaps are the maps of all servers.
type sharedMaps struct {
	*share.Maps // nil before the server has joined
	open        func(path string) (Map, error)
	folder      string     // for what is fetched
	one         sync.Mutex // held while one is fetched
}

// shareMaps stores the maps that this server was started with, and fetches those that
// others have named.
func (s *Server) shareMaps(ctx context.Context) {
	left := s.atlas.names()
	for wait := shareAgainFirst; ; wait = min(2*wait, shareAgainLast) {
		left = slices.DeleteFunc(left, func(name string) bool {
			m := s.atlas.acquire(name)
			if m == nil {
				return true
			}
			defer s.releaseMap(m)
			err := s.shareMap(ctx, m.Map, false)
			if err != nil && ctx.Err() == nil {
				s.cfg.Log.Error("map is not shared with other servers yet", "map", name, "error", err)
			}
			return err == nil
		})
		if len(left) == 0 {
			break
		}
		select {
		case <-time.After(wait):
		case <-ctx.Done():
			return
		}
	}
	names, err := s.shared.maps.Names(ctx)
	if err != nil && ctx.Err() == nil {
		s.cfg.Log.Error("other servers' maps are not known", "error", err)
	}
	for _, name := range names {
		if m := s.mapNamed(ctx, name); m != nil {
			s.releaseMap(m)
		}
	}
}

// shareMap stores a map, and names it: in place of another one, if replace is set.
func (s *Server) shareMap(ctx context.Context, m Map, replace bool) error {
	if s.shared == nil || s.shared.maps.Maps == nil || m.File == "" {
		return nil
	}
	ctx, cancel := context.WithTimeout(ctx, mapTimeout)
	defer cancel()
	fingerprint := m.Space.Fingerprint()
	if err := s.shared.maps.Keep(ctx, fingerprint, m.File); err != nil {
		return err
	}
	is, err := s.shared.maps.Name(ctx, m.Name, fingerprint, replace)
	if err == nil && is != fingerprint {
		s.cfg.Log.Warn("other servers have another map of this name, which drives that are opened get", "map", m.Name, "fingerprint", fingerprint, "theirs", is)
	}
	return err
}

// mapNamed is atlas.acquire, of the map that the name stands for at all servers.
func (s *Server) mapNamed(ctx context.Context, name string) *mapUse {
	here := s.atlas.acquire(name)
	if s.shared == nil || s.shared.maps.Maps == nil {
		return here
	}
	fingerprint, err := s.shared.maps.Named(ctx, name)
	if err == nil && (fingerprint == "" || here != nil && here.Space.Fingerprint() == fingerprint) {
		return here
	}
	var m *mapUse
	if err == nil {
		m, err = s.fetchMap(ctx, name, fingerprint, true)
	}
	if err != nil {
		s.cfg.Log.Error("map cannot be had from other servers", "map", name, "error", err)
		return here
	}
	if here != nil {
		s.releaseMap(here)
	}
	return m
}

// fetchMap fetches a map, unless it is here, and holds it for a session. named says
// that drives which name it get it from now on.
func (s *Server) fetchMap(ctx context.Context, name, fingerprint string, named bool) (*mapUse, error) {
	if s.shared == nil || s.shared.maps.Maps == nil {
		return nil, errors.New("it is shared with no other server")
	}
	x := &s.shared.maps
	x.one.Lock()
	defer x.one.Unlock()
	if m := s.atlas.acquireFingerprint(name, fingerprint); m != nil && (!named || !m.replaced) {
		return m, nil
	} else if m != nil {
		s.releaseMap(m)
	}
	ctx, cancel := context.WithTimeout(ctx, mapTimeout)
	defer cancel()
	path, err := x.Fetch(ctx, fingerprint, x.folder)
	if err != nil {
		return nil, err
	}
	m, err := x.open(path)
	if err != nil {
		return nil, err
	}
	if got := m.Space.Fingerprint(); got != fingerprint {
		_ = m.close()
		return nil, fmt.Errorf("the map that is stored as %s is %s", fingerprint, got)
	}
	m.Name, m.File = name, path
	s.cfg.Log.Info("map fetched from the broker", "map", name, "fingerprint", fingerprint)
	use, unused := s.atlas.add(m, named)
	if unused != nil {
		s.closeMap(unused)
	}
	return use, nil
}

// add puts in a map that was fetched, and holds it for a session: as the one of its
// name, if it is to be that or there is none; else beside it. What it replaces is
// returned if it is to be closed.
func (a *atlas) add(m Map, named bool) (use, unused *mapUse) {
	a.mu.Lock()
	defer a.mu.Unlock()
	use = &mapUse{Map: m, described: m.describe(), sessions: 1}
	old := a.current[m.Name]
	switch {
	case old == nil:
		a.current[m.Name] = use
	case !named:
		use.replaced = true
		a.older = append(a.older, use)
	default:
		a.current[m.Name] = use
		if old.replaced = true; old.sessions == 0 {
			return use, old
		}
		a.older = append(a.older, old)
	}
	return use, nil
}

// olderOf is a map that has been replaced and is still in use; a.mu is held.
func (a *atlas) olderOf(fingerprint string) *mapUse {
	if i := slices.IndexFunc(a.older, func(m *mapUse) bool { return m.Space.Fingerprint() == fingerprint }); i >= 0 {
		return a.older[i]
	}
	return nil
}

// keepFetched makes the folder for what is fetched, and forgetFetched removes it.
func (x *sharedMaps) keepFetched() (err error) {
	x.folder, err = os.MkdirTemp("", "leadline-maps-*")
	return err
}

func (x *sharedMaps) forgetFetched() {
	if x.folder != "" {
		_ = os.RemoveAll(x.folder)
	}
}
