package main

import (
	"math"
	"strings"

	"leadline/engine/geo"
	"leadline/engine/server"
	"leadline/network"
	"leadline/network/roadfile"
	leadlinev1 "leadline/proto/leadline/v1"
	"leadline/terrain"
	"leadline/terrain/heightfile"
)

// served is the map under a name, for a server, which closes it.
func (m *mapFile) served(name string) server.Map {
	out := server.Map{Name: name, File: m.Path, Space: m.Space, Names: m.Names, About: m.about(), Close: m.Close}
	if m.Roads != nil {
		out.Roads = m.Roads
		out.Check = func() string { return network.Check(m.Roads).String() }
	} else {
		out.Check = func() string {
			var b strings.Builder
			must(heightfile.Check(m.Heights).WriteText(&b)) // a Builder does not fail
			return b.String()
		}
	}
	return out
}

// uploadsTo keeps maps that clients send in a folder.
func uploadsTo(folder string) *server.Uploads {
	return &server.Uploads{Folder: folder, Suffixes: suffixes, Open: openServed}
}

// openServed opens a map as a server has it.
func openServed(path string) (server.Map, error) {
	m, err := openMap(path)
	if err != nil {
		return server.Map{}, err
	}
	return m.served(mapName(path)), nil
}

// suffixes are how the names of compiled maps end.
var suffixes = map[leadlinev1.MapKind]string{
	leadlinev1.MapKind_MAP_KIND_ROADS: roadfile.Suffix, leadlinev1.MapKind_MAP_KIND_HEIGHTS: heightfile.Suffix,
}

// about is what the map's file says of it.
func (m *mapFile) about() server.MapAbout {
	if m.Heights != nil {
		meta, g := m.Heights.Meta(), m.Heights.Grid()
		east, north := m.Heights.StepM()
		a := server.MapAbout{
			Source: meta.Source, Licence: meta.Licence, VerticalDatum: meta.VerticalDatum, HeightSigmaM: meta.SigmaM,
			Columns: g.Cols, Rows: g.Rows, SpacingM: math.Min(east, north),
		}
		a.SouthWest, a.NorthEast = around(m.Space.Frame(), m.Heights.Bounds())
		return a
	}
	d := m.Roads.Data()
	a := server.MapAbout{Source: d.Source, Licence: d.Licence}
	box := geo.EmptyBox()
	for i := range d.East {
		box = box.Extend(geo.Point{E: d.East[i], N: d.North[i]})
	}
	a.SouthWest, a.NorthEast = around(m.Space.Frame(), box)
	if !m.Roads.HasHeights() {
		return a
	}
	a.VerticalDatum = terrain.Unstated // road files do not say
	sum, n := 0.0, 0
	for i, v := range d.HeightVar {
		if h := d.Height[i]; h == h { // known
			sum += float64(v)
			n++
		}
	}
	if n > 0 {
		a.HeightSigmaM = math.Sqrt(sum / float64(n))
	}
	return a
}

// around is the rectangle of longitudes and latitudes around a box of a frame:
// its sides bend there, so points along them count.
func around(f geo.Frame, b geo.Box) (southWest, northEast geo.LonLat) {
	const n = 64
	southWest = geo.LonLat{Lon: math.Inf(1), Lat: math.Inf(1)}
	northEast = geo.LonLat{Lon: math.Inf(-1), Lat: math.Inf(-1)}
	put := func(u, v float64) {
		p := f.Inverse(geo.Point{E: b.Min.E + u*(b.Max.E-b.Min.E), N: b.Min.N + v*(b.Max.N-b.Min.N)})
		southWest = geo.LonLat{Lon: math.Min(southWest.Lon, p.Lon), Lat: math.Min(southWest.Lat, p.Lat)}
		northEast = geo.LonLat{Lon: math.Max(northEast.Lon, p.Lon), Lat: math.Max(northEast.Lat, p.Lat)}
	}
	for i := range n + 1 {
		s := float64(i) / n
		put(s, 0)
		put(s, 1)
		put(0, s)
		put(1, s)
	}
	return southWest, northEast
}
