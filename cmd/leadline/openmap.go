package main

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"strings"
	"sync"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/session"
	"leadline/engine/study/score"
	"leadline/engine/study/sweep"
	"leadline/engine/study/track"
	"leadline/network"
	"leadline/network/roadfile"
	"leadline/terrain"
	"leadline/terrain/heightfile"
)

// mapFile is a compiled map that is open. Roads or Heights is set.
type mapFile struct {
	Path    string
	Space   filter.Space
	Names   session.Names
	Roads   *network.Map
	Heights *terrain.Raster
	io.Closer
}

// openMap opens a compiled map by its suffix.
func openMap(path string) (*mapFile, error) {
	if _, err := os.Stat(path); errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("there is no map file %s: check the path, or compile one with `leadline map roads` or `leadline map heights`", path)
	}
	switch {
	case strings.HasSuffix(path, roadfile.Suffix):
		m, c, err := roadfile.Open(path)
		if err != nil {
			return nil, err
		}
		return &mapFile{Path: path, Space: m, Names: m, Roads: m, Closer: c}, nil
	case strings.HasSuffix(path, heightfile.Suffix):
		r, c, err := heightfile.Open(path)
		if err != nil {
			return nil, err
		}
		east, north := r.StepM()
		return &mapFile{Path: path, Space: plane.Over(r, r.Fingerprint(), math.Min(east, north)), Heights: r, Closer: c}, nil
	}
	return nil, fmt.Errorf("%s is no compiled map by its name, which must end in %s or %s: compile it with `leadline map roads` or `leadline map heights`",
		path, roadfile.Suffix, heightfile.Suffix)
}

// mapName is a map file's name without folder and suffix.
func mapName(path string) string {
	name := filepath.Base(path)
	for _, s := range []string{roadfile.Suffix, heightfile.Suffix} {
		name = strings.TrimSuffix(name, s)
	}
	return name
}

// forStudies is the map as studies take it.
func (m *mapFile) forStudies() *sweep.Map {
	out := &sweep.Map{Path: m.Path, Space: m.Space, Names: m.Names, Near: m.near()}
	if m.Heights != nil {
		meta := m.Heights.Meta()
		out.Source, out.Licence = meta.Source, meta.Licence
	} else {
		d := m.Roads.Data()
		out.Source, out.Licence = d.Source, d.Licence
	}
	out.Ground = sync.OnceValue(func() track.Ground {
		return track.Ground{Frame: m.Space.Frame(), Roads: m.lines(), Relief: m.field()}
	})
	return out
}

// near returns the directed edges near a place, for scores; nil on a plane.
func (m *mapFile) near() func(at geo.LonLat, radiusM float64) []score.Road {
	if m.Roads == nil {
		return nil
	}
	return func(at geo.LonLat, radiusM float64) []score.Road {
		places := m.Roads.Near(m.Roads.Frame().Forward(at), radiusM)
		out := make([]score.Road, len(places))
		for i, p := range places {
			out[i] = score.Road{Chart: p.Chart, DistM: p.DistM}
		}
		return out
	}
}

// lines returns the roads as lines in the map's frame, each once; nil on a
// plane.
func (m *mapFile) lines() [][]geo.Point {
	if m.Roads == nil {
		return nil
	}
	var out [][]geo.Point
	for c := range int32(m.Roads.Charts()) {
		if t := m.Roads.Twin(c); t >= 0 && t < c {
			continue
		}
		east, north := m.Roads.Polyline(c)
		line := make([]geo.Point, len(east))
		for i := range line {
			line[i] = geo.Point{E: east[i], N: north[i]}
		}
		out = append(out, line)
	}
	return out
}

// field returns the heights under a plane; nil on roads.
func (m *mapFile) field() geo.Field {
	if m.Heights == nil {
		return nil
	}
	return m.Heights
}
