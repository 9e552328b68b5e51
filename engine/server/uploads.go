package server

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"runtime/debug"
	"slices"
	"strings"

	leadlinev1 "leadline/proto/leadline/v1"
)

// Uploads lets clients add maps.
type Uploads struct {
	// Folder keeps them, one file a map, so that a server that starts again
	// finds them. It must exist, and be the server's alone.
	Folder string
	// Suffixes are how the names of compiled maps end, by their kind.
	Suffixes map[leadlinev1.MapKind]string
	// Open opens a compiled map, whose name ends in its suffix. It must take
	// any file, however damaged, and check all of it.
	Open func(path string) (Map, error)
	// MaxBytes bounds the size of a file; 0 is 4 GiB.
	MaxBytes int64
	// Maps bounds the number of maps, those that were there at the start
	// included; 0 is 100. AtOnce bounds the uploads at once; 0 is 2.
	Maps, AtOnce int
}

func (u *Uploads) withDefaults() *Uploads {
	c := *u
	if c.MaxBytes == 0 {
		c.MaxBytes = 4 << 30
	}
	if c.Maps == 0 {
		c.Maps = 100
	}
	if c.AtOnce == 0 {
		c.AtOnce = 2
	}
	return &c
}

// validate lists what is wrong.
func (u *Uploads) validate() (errs []error) {
	if info, err := os.Stat(u.Folder); err != nil || !info.IsDir() {
		errs = append(errs, fmt.Errorf("server: there is no folder %q for uploaded maps: make it first", u.Folder))
	}
	if u.Open == nil || u.Suffixes[leadlinev1.MapKind_MAP_KIND_ROADS] == "" || u.Suffixes[leadlinev1.MapKind_MAP_KIND_HEIGHTS] == "" {
		errs = append(errs, errors.New("server: uploads need Open and a suffix for each kind of map"))
	}
	if u.MaxBytes < 0 || u.Maps < 0 || u.AtOnce < 0 {
		errs = append(errs, errors.New("server: a limit of uploads is negative"))
	}
	return errs
}

// kept opens the maps in the folder, and removes what uploads left unfinished.
// A map that cannot be opened is passed over, with the reason.
func (u *Uploads) kept() (ms []Map, problems []error, err error) {
	entries, err := os.ReadDir(u.Folder)
	if err != nil {
		return nil, nil, err
	}
	for _, e := range entries {
		path := filepath.Join(u.Folder, e.Name())
		if strings.HasPrefix(e.Name(), part) {
			if err := os.Remove(path); err != nil {
				problems = append(problems, err)
			}
			continue
		}
		name, ok := u.mapName(e.Name())
		if !ok || slices.ContainsFunc(ms, func(m Map) bool { return m.Name == name }) {
			problems = append(problems, fmt.Errorf("%s is no map by its name, or another one has that name", path))
			continue
		}
		m, err := u.open(path, name)
		if err != nil {
			problems = append(problems, err)
			continue
		}
		ms = append(ms, m)
	}
	return ms, problems, nil
}

// keepMaps puts in the maps that were uploaded before the server was started.
// They take the place of configured ones, as they did when they came.
func (s *Server) keepMaps() error {
	s.uploads = s.cfg.Uploads.withDefaults()
	s.uploading = make(chan struct{}, s.uploads.AtOnce)
	ms, problems, err := s.uploads.kept()
	if err != nil {
		return fmt.Errorf("server: uploaded maps: %w", err)
	}
	for _, err := range problems {
		s.cfg.Log.Error("uploaded map passed over", "error", err)
	}
	for _, m := range ms {
		old := s.atlas.current[m.Name]
		s.atlas.current[m.Name] = &mapUse{Map: m, described: m.describe()}
		if old != nil {
			s.cfg.Log.Info("uploaded map in place of a configured one", "map", m.Name)
			s.closeMap(old)
		}
	}
	return nil
}

// mapName takes a file's name apart.
func (u *Uploads) mapName(file string) (name string, ok bool) {
	for _, suffix := range u.Suffixes {
		if name, ok := strings.CutSuffix(file, suffix); ok && checkMapName(name) == nil {
			return name, true
		}
	}
	return "", false
}

// open opens a map under a name. A defect of what reads it must not end the
// server.
func (u *Uploads) open(path, name string) (m Map, err error) {
	defer func() {
		if r := recover(); r != nil {
			m, err = Map{}, fmt.Errorf("it cannot be read (%v)\n%s", r, debug.Stack())
		}
	}()
	m, err = u.Open(path)
	m.Name, m.File = name, path
	return m, err
}

// mapNames are those that are file names everywhere, and of which none is
// hidden or leads elsewhere.
var mapNames = regexp.MustCompile(`^[A-Za-z0-9][A-Za-z0-9_-]{0,99}$`)

func checkMapName(name string) error {
	if !mapNames.MatchString(name) {
		return badField("beginning.name", "upload: name %q: give up to 100 letters, digits, - and _, a letter or digit first", clip(name))
	}
	return nil
}
