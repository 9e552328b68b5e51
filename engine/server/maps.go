package server

import (
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"sync"

	"google.golang.org/protobuf/proto"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// MapAbout is what a map's file says of it, for those who ask. What is not
// known is zero.
type MapAbout struct {
	// SouthWest and NorthEast span the smallest rectangle of longitudes and
	// latitudes around the map.
	SouthWest, NorthEast geo.LonLat
	// Source and Licence are where it comes from and what allows to use it.
	Source, Licence string
	// VerticalDatum names what its heights are above; empty without heights.
	VerticalDatum string
	// HeightSigmaM is the standard deviation of the heights, m.
	HeightSigmaM float64
	// Columns, Rows and SpacingM are those of a raster of heights.
	Columns, Rows int
	SpacingM      float64
}

// atlas is the maps of a server: those that drives may name, and those that
// have been replaced and are still in use.
type atlas struct {
	changing sync.Mutex // held while a map is put in

	mu      sync.Mutex
	current map[string]*mapUse
	older   []*mapUse
}

// mapUse is a map and how many sessions use it.
type mapUse struct {
	Map
	described *leadlinev1.MapDescription // without the sessions
	sessions  int
	replaced  bool
	outlines  outlines
	checking  sync.Once
	checked   string
}

func newAtlas(ms []Map) *atlas {
	out := &atlas{current: map[string]*mapUse{}}
	for _, m := range ms {
		out.current[m.Name] = &mapUse{Map: m, described: m.describe()}
	}
	return out
}

// acquire returns the map of a name for a session; nil if there is none. It
// must be given back with release.
func (a *atlas) acquire(name string) *mapUse {
	a.mu.Lock()
	defer a.mu.Unlock()
	m := a.current[name]
	if m != nil {
		m.sessions++
	}
	return m
}

// hold is acquire for a map that some session has; false if the last one has
// just left one that was replaced.
func (a *atlas) hold(m *mapUse) bool {
	a.mu.Lock()
	defer a.mu.Unlock()
	if m.replaced && m.sessions == 0 {
		return false
	}
	m.sessions++
	return true
}

// release gives back a map that a session uses no more, and reports whether it
// is to be closed: the last session of one that has been replaced has left.
func (a *atlas) release(m *mapUse) (unused bool) {
	a.mu.Lock()
	defer a.mu.Unlock()
	m.sessions--
	if unused = m.replaced && m.sessions == 0; unused {
		a.older = slices.DeleteFunc(a.older, func(o *mapUse) bool { return o == m })
	}
	return unused
}

// put adds a map, which takes the place of one of its name if that is wanted.
// commit makes it last, once nothing speaks against it. most bounds the number
// of maps. What it replaces is returned if it is to be closed.
func (a *atlas) put(m Map, replace bool, most int, commit func() error) (unused *mapUse, err error) {
	a.changing.Lock()
	defer a.changing.Unlock()
	if err := a.mayPut(m.Name, m.kind(), replace, most); err != nil {
		return nil, err
	}
	if err := commit(); err != nil {
		return nil, err
	}
	next := &mapUse{Map: m, described: m.describe()}
	a.mu.Lock()
	defer a.mu.Unlock()
	old := a.current[m.Name]
	a.current[m.Name] = next
	if old == nil {
		return nil, nil
	}
	if old.replaced = true; old.sessions == 0 {
		return old, nil
	}
	a.older = append(a.older, old)
	return nil, nil
}

// mayPut says what speaks against a map of that name and kind.
func (a *atlas) mayPut(name string, kind leadlinev1.MapKind, replace bool, most int) error {
	a.mu.Lock()
	old, n := a.current[name], len(a.current)
	a.mu.Unlock()
	where := about{"map": name}
	switch {
	case old == nil && n >= most:
		return full("maps", most, "upload: the server has its %d maps: replace one, or raise the limit", most)
	case old == nil:
		return nil
	case !replace:
		return refuse(leadlinev1.Reason_REASON_MAP_EXISTS, where, "upload: there is a map %q here: give another name, or set replace", name)
	case old.kind() != kind:
		return refuse(leadlinev1.Reason_REASON_MAP_EXISTS, where, "upload: the map %q here is one of %s, and a map of the other kind cannot take its place: give another name", name, kindWord(old.kind()))
	}
	return nil
}

func kindWord(k leadlinev1.MapKind) string {
	if k == leadlinev1.MapKind_MAP_KIND_ROADS {
		return "roads"
	}
	return "heights"
}

// newer returns the fingerprint of a newer map of a name; empty if there is
// none.
func (a *atlas) newer(name, fingerprint string) string {
	a.mu.Lock()
	defer a.mu.Unlock()
	if m := a.current[name]; m != nil && m.described.GetFingerprint() != fingerprint {
		return m.described.GetFingerprint()
	}
	return ""
}

// names lists the maps that drives may name.
func (a *atlas) names() []string {
	a.mu.Lock()
	defer a.mu.Unlock()
	return slices.Sorted(maps.Keys(a.current))
}

// close closes every map. No session may be left.
func (a *atlas) close() error {
	a.mu.Lock()
	defer a.mu.Unlock()
	var errs []error
	for _, m := range a.current {
		errs = append(errs, m.close())
	}
	a.current = nil
	return errors.Join(errs...)
}

func (m Map) close() error {
	if m.Close == nil {
		return nil
	}
	return m.Close()
}

func (m Map) kind() leadlinev1.MapKind {
	if m.onRoads() {
		return leadlinev1.MapKind_MAP_KIND_ROADS
	}
	return leadlinev1.MapKind_MAP_KIND_HEIGHTS
}

// describe says what the map of a name is, or all if the name is empty.
func (a *atlas) describe(name string) (out []*leadlinev1.MapDescription) {
	a.mu.Lock()
	defer a.mu.Unlock()
	for _, n := range slices.Sorted(maps.Keys(a.current)) {
		if name != "" && n != name {
			continue
		}
		m := a.current[n]
		d := proto.CloneOf(m.described)
		d.Sessions = uint32(m.sessions)
		for _, o := range a.older {
			if o.Name == n {
				d.OlderSessions += uint32(o.sessions)
			}
		}
		out = append(out, d)
	}
	return out
}

func (m Map) describe() *leadlinev1.MapDescription {
	a := m.About
	lon, lat := m.Space.Frame().Origin().Degrees()
	d := &leadlinev1.MapDescription{
		Name: m.Name, Fingerprint: m.Space.Fingerprint(), Kind: m.kind(),
		SouthWest: wire.FromPosition(a.SouthWest), NorthEast: wire.FromPosition(a.NorthEast),
		Source: a.Source, Licence: a.Licence, VerticalDatum: a.VerticalDatum, HeightSigmaM: a.HeightSigmaM,
		Frame:   fmt.Sprintf("transverse Mercator on WGS 84, scale 1 on the meridian %.9g°, origin at latitude %.9g°, metres", lon, lat),
		Columns: uint32(a.Columns), Rows: uint32(a.Rows), SpacingM: a.SpacingM,
	}
	if ls, ok := m.Space.(filter.LineSpace); ok {
		lengths := ls.Lines(0).LengthM
		d.Edges = uint32(len(lengths))
		for _, l := range lengths {
			d.LengthM += l
		}
	}
	return d
}

// MapNames lists the maps that drives may name.
func (s *Server) MapNames() []string { return s.atlas.names() }

// releaseMap gives back a session's map.
func (s *Server) releaseMap(m *mapUse) {
	if s.atlas.release(m) {
		s.closeMap(m)
	}
}

// closeMap closes a map that has been replaced.
func (s *Server) closeMap(m *mapUse) {
	s.cfg.Log.Info("replaced map closed", "map", m.Name, "fingerprint", m.described.GetFingerprint())
	if err := m.close(); err != nil {
		s.cfg.Log.Error("replaced map cannot be closed", "map", m.Name, "error", err)
	}
}

// ListMaps lists the maps that drives may use: see the .proto file.
func (s *Server) ListMaps(context.Context, *leadlinev1.ListMapsRequest) (*leadlinev1.ListMapsResponse, error) {
	return &leadlinev1.ListMapsResponse{Maps: s.atlas.describe("")}, nil
}

// DescribeMap says what a map is: see the .proto file.
func (s *Server) DescribeMap(_ context.Context, req *leadlinev1.DescribeMapRequest) (*leadlinev1.DescribeMapResponse, error) {
	if req.GetMap() == "" {
		return nil, badField("map", "map is missing: give the name of a map")
	}
	ds := s.atlas.describe(req.GetMap())
	if len(ds) != 1 {
		return nil, s.unknownMap(req.GetMap())
	}
	out := &leadlinev1.DescribeMapResponse{Map: ds[0]}
	if !req.GetCheck() {
		return out, nil
	}
	m := s.atlas.acquire(req.GetMap())
	if m == nil {
		return nil, s.unknownMap(req.GetMap())
	}
	defer s.releaseMap(m)
	if m.Check == nil {
		return nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, about{"map": m.Name, "field": "check"}, "map %q cannot be checked here: leave check out", m.Name)
	}
	m.checking.Do(func() { m.checked = m.Check() })
	out.Check = m.checked
	return out, nil
}

func (s *Server) unknownMap(name string) error {
	return refuse(leadlinev1.Reason_REASON_UNKNOWN_MAP, about{"map": name}, "there is no map %q here: known are %s", clip(name), known(s.atlas.names()))
}
