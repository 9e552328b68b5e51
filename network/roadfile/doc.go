// Package roadfile reads road maps from GeoJSON (RFC 7946) and OpenStreetMap
// extracts (XML or PBF), repairs them, and reads and writes compiled maps.
//
// # What is read
//
// From GeoJSON every LineString and MultiLineString, bare or in features and
// collections, with OpenStreetMap's tags as properties, all of them optional:
// highway, name, ref, oneway (yes, no, -1, reversible), junction=roundabout,
// bridge, tunnel, layer, maxspeed (km/h, or "30 mph"), access, area. A third
// coordinate is a height in metres. Points and polygons are no roads and are
// counted in Notes. Lines whose highway tag names no class that Options
// accepts are left out; lines without that tag are roads.
//
// One property is ours: no_turn_to, the id of a feature or a list of ids, says
// that one may not turn from this feature into those wherever they meet. The
// restrictions of OpenStreetMap extracts (no_…, only_… via a node) are read;
// those via a way are counted and left out.
//
// # What is joined
//
// Lines join where they share a vertex (within 1e-9 degrees), and where an end
// comes within Options.JoinM of another line's end or middle; there the other
// line gets a vertex. The middle of a line on another layer (another layer
// tag, bridge or tunnel) is not joined. Lines that merely cross do not meet,
// unless Options.SplitCrossings is set and both are on one layer.
package roadfile
