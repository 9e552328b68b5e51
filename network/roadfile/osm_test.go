package roadfile

import (
	"bytes"
	"compress/gzip"
	"compress/zlib"
	"context"
	"encoding/binary"
	"fmt"
	"os"
	"strings"
	"testing"

	"github.com/paulmach/osm"
	"github.com/paulmach/osm/osmpbf"
	"google.golang.org/protobuf/encoding/protowire"

	"leadline/fixtures/outside"
	"leadline/network"
)

// extract is a small OpenStreetMap extract: four roads that meet at node 1,
// to the west (way 10), north (11), south (12) and east (13), a footpath, and
// turn restrictions.
var extract = osm.OSM{
	Nodes: osm.Nodes{
		{ID: 1, Lon: -30, Lat: 45},
		{ID: 2, Lon: -30.001, Lat: 45},
		{ID: 3, Lon: -30, Lat: 45.001},
		{ID: 4, Lon: -30, Lat: 44.999},
		{ID: 5, Lon: -29.999, Lat: 45},
	},
	Ways: osm.Ways{
		way(10, "highway", "primary", "name", "West", "maxspeed", "50", 2, 1),
		way(11, "highway", "residential", "name", "North", 1, 3),
		way(12, "highway", "residential", "name", "South", "tunnel", "yes", 4, 1),
		way(13, "highway", "primary", "name", "East", "oneway", "-1", 5, 99, 1),
		way(14, "highway", "footway", 1, 3),
		way(15, "building", "yes", 1, 3, 4, 1),
	},
	Relations: osm.Relations{
		restriction(20, "no_left_turn", "from", osm.TypeWay, 10, "via", osm.TypeNode, 1, "to", osm.TypeWay, 11),
		restriction(21, "only_straight_on", "from", osm.TypeWay, 12, "via", osm.TypeNode, 1, "to", osm.TypeWay, 11),
		restriction(22, "no_u_turn", "from", osm.TypeWay, 10, "via", osm.TypeWay, 11, "to", osm.TypeWay, 12),
	},
}

func way(id osm.WayID, rest ...any) *osm.Way {
	w := &osm.Way{ID: id, Visible: true}
	for i := 0; i < len(rest); i++ {
		if k, ok := rest[i].(string); ok {
			w.Tags = append(w.Tags, osm.Tag{Key: k, Value: rest[i+1].(string)})
			i++
			continue
		}
		w.Nodes = append(w.Nodes, osm.WayNode{ID: osm.NodeID(rest[i].(int))})
	}
	return w
}

func restriction(id osm.RelationID, kind string, members ...any) *osm.Relation {
	r := &osm.Relation{ID: id, Visible: true, Tags: osm.Tags{{Key: "type", Value: "restriction"}, {Key: "restriction", Value: kind}}}
	for i := 0; i < len(members); i += 3 {
		r.Members = append(r.Members, osm.Member{Role: members[i].(string), Type: members[i+1].(osm.Type), Ref: int64(members[i+2].(int))})
	}
	return r
}

// asXML writes the extract as OpenStreetMap XML.
func asXML() string {
	var b strings.Builder
	b.WriteString(`<?xml version="1.0" encoding="UTF-8"?>` + "\n<osm version=\"0.6\">\n")
	for _, n := range extract.Nodes {
		fmt.Fprintf(&b, `<node id="%d" visible="true" lon="%g" lat="%g"/>`+"\n", n.ID, n.Lon, n.Lat)
	}
	tags := func(t osm.Tags) {
		for _, x := range t {
			fmt.Fprintf(&b, `<tag k="%s" v="%s"/>`, x.Key, x.Value)
		}
	}
	for _, w := range extract.Ways {
		fmt.Fprintf(&b, `<way id="%d" visible="true">`, w.ID)
		for _, n := range w.Nodes {
			fmt.Fprintf(&b, `<nd ref="%d"/>`, n.ID)
		}
		tags(w.Tags)
		b.WriteString("</way>\n")
	}
	for _, r := range extract.Relations {
		fmt.Fprintf(&b, `<relation id="%d" visible="true">`, r.ID)
		for _, m := range r.Members {
			fmt.Fprintf(&b, `<member type="%s" ref="%d" role="%s"/>`, m.Type, m.Ref, m.Role)
		}
		tags(r.Tags)
		b.WriteString("</relation>\n")
	}
	b.WriteString("</osm>\n")
	return b.String()
}

// message builds a protobuf message field by field.
type message []byte

func (m *message) bytes(n protowire.Number, b []byte) {
	*m = protowire.AppendTag(*m, n, protowire.BytesType)
	*m = protowire.AppendBytes(*m, b)
}

func (m *message) number(n protowire.Number, v uint64) {
	*m = protowire.AppendTag(*m, n, protowire.VarintType)
	*m = protowire.AppendVarint(*m, v)
}

func packed(signed bool, x ...int64) []byte {
	var b []byte
	last := int64(0)
	for _, v := range x {
		if signed { // as differences
			b = protowire.AppendVarint(b, protowire.EncodeZigZag(v-last))
			last = v
			continue
		}
		b = protowire.AppendVarint(b, uint64(v))
	}
	return b
}

// asPBF writes the extract as PBF, with dense nodes and zlib or with plain
// nodes and without.
func asPBF(plain bool) []byte {
	var file []byte
	block := func(kind string, content []byte) {
		var blob, head message
		if plain {
			blob.bytes(1, content)
		} else {
			var z bytes.Buffer
			w := zlib.NewWriter(&z)
			if _, err := w.Write(content); err != nil {
				panic(err) // a bytes.Buffer takes everything
			}
			if err := w.Close(); err != nil {
				panic(err)
			}
			blob.number(2, uint64(len(content)))
			blob.bytes(3, z.Bytes())
		}
		head.bytes(1, []byte(kind))
		head.number(3, uint64(len(blob)))
		file = binary.BigEndian.AppendUint32(file, uint32(len(head)))
		file = append(append(file, head...), blob...)
	}
	var header message
	header.bytes(4, []byte("OsmSchema-V0.6"))
	header.bytes(4, []byte("DenseNodes"))
	block("OSMHeader", header)

	text := []string{""}
	index := map[string]int64{}
	word := func(s string) int64 {
		if i, ok := index[s]; ok {
			return i
		}
		index[s] = int64(len(text))
		text = append(text, s)
		return index[s]
	}
	var group message
	var ids, lats, lons []int64
	for _, n := range extract.Nodes {
		lat, lon := int64(n.Lat*1e7+0.5), -int64(-n.Lon*1e7+0.5)
		ids, lats, lons = append(ids, int64(n.ID)), append(lats, lat), append(lons, lon)
		if plain {
			var m message
			m.number(1, protowire.EncodeZigZag(int64(n.ID)))
			m.number(8, protowire.EncodeZigZag(lat))
			m.number(9, protowire.EncodeZigZag(lon))
			group.bytes(1, m)
		}
	}
	if !plain {
		var m message
		m.bytes(1, packed(true, ids...))
		m.bytes(8, packed(true, lats...))
		m.bytes(9, packed(true, lons...))
		group.bytes(2, m)
	}
	tags := func(m *message, t osm.Tags) {
		var k, v []int64
		for _, x := range t {
			k, v = append(k, word(x.Key)), append(v, word(x.Value))
		}
		m.bytes(2, packed(false, k...))
		m.bytes(3, packed(false, v...))
	}
	for _, w := range extract.Ways {
		var m message
		m.number(1, uint64(w.ID))
		tags(&m, w.Tags)
		var refs []int64
		for _, n := range w.Nodes {
			refs = append(refs, int64(n.ID))
		}
		m.bytes(8, packed(true, refs...))
		group.bytes(3, m)
	}
	for _, r := range extract.Relations {
		var m message
		m.number(1, uint64(r.ID))
		tags(&m, r.Tags)
		var roles, refs, types []int64
		for _, x := range r.Members {
			roles, refs = append(roles, word(x.Role)), append(refs, x.Ref)
			types = append(types, map[osm.Type]int64{osm.TypeNode: 0, osm.TypeWay: 1}[x.Type])
		}
		m.bytes(8, packed(false, roles...))
		m.bytes(9, packed(true, refs...))
		m.bytes(10, packed(false, types...))
		group.bytes(4, m)
	}
	var table, data message
	for _, s := range text {
		table.bytes(1, []byte(s))
	}
	data.bytes(1, table)
	data.bytes(2, group)
	block("OSMData", data)
	return file
}

// headerBytes is the length of the first block that asPBF writes without
// packing: its length, its header (13 bytes), and a blob of 30 bytes.
const headerBytes = 4 + 13 + 30

// TestExtract proves that the three ways to write an extract give one map,
// with its tags, restrictions and licence.
func TestExtract(t *testing.T) {
	var zipped bytes.Buffer
	z := gzip.NewWriter(&zipped)
	if _, err := z.Write([]byte(asXML())); err != nil {
		t.Fatal(err)
	}
	if err := z.Close(); err != nil {
		t.Fatal(err)
	}
	var first *network.Map
	for name, file := range map[string][]byte{
		"XML": []byte(asXML()), "XML in gzip": zipped.Bytes(), "PBF": asPBF(false), "PBF of plain nodes": asPBF(true),
	} {
		t.Run(name, func(t *testing.T) {
			m, notes, err := ReadFrom(bytes.NewReader(file), Options{Map: network.Options{Note: "-"}})
			if err != nil {
				t.Fatal(err)
			}
			if notes.Lines != 4 || notes.OtherClass != 1 || notes.MissingNodes != 1 || notes.UnusedBans != 1 || notes.Tunnels != 1 || notes.Features != 6 {
				t.Errorf("%+v", notes)
			}
			if m.Data().Licence != osmLicence {
				t.Errorf("licence %q", m.Data().Licence)
			}
			if first == nil {
				first = m
			}
			sameColumns(t, m, first)
		})
	}
	// Charts: West there and back 0, 1; North 2, 3; South 4, 5; East, drawn
	// towards the junction but open away from it alone, 6.
	for _, c := range []struct {
		chart int32
		want  string
	}{
		{0, "[South East]"}, // not North
		{4, "[North]"},      // only straight on
		{3, "[West South East]"},
	} {
		to, _ := first.Lines(0).Forward.Of(c.chart)
		var names []string
		for _, x := range to {
			names = append(names, first.Name(x))
		}
		if fmt.Sprint(names) != c.want {
			t.Errorf("%s (chart %d) leads to %v, want %s", first.Name(c.chart), c.chart, names, c.want)
		}
	}
}

// TestBadExtracts proves what is said of extracts that are broken.
func TestBadExtracts(t *testing.T) {
	x, p := asXML(), asPBF(false)
	patch := func(b []byte, old, new string) []byte {
		return bytes.Replace(bytes.Clone(b), []byte(old), []byte(new), 1)
	}
	plain := asPBF(true)
	for _, c := range []struct {
		name string
		file []byte
		want string
	}{
		{"truncated XML", []byte(x[:len(x)/2]), "truncated"},
		{"broken XML", []byte(strings.Replace(x, `lat="45"`, `lat=45`, 1)), "line 3: not valid XML"},
		{"swapped XML", []byte(strings.Replace(x, `lat="45"`, `lat="-145"`, 1)), "node 1: longitude -30, latitude -145 is not on the globe: they look swapped"},
		{"another XML", []byte("<html><body/></html>"), "no roads found"},
		{"truncated PBF", p[:len(p)-10], "truncated"},
		{"PBF of another schema", patch(plain, "OsmSchema-V0.6", "OsmSchema-V0.7"), `needs a reader with "OsmSchema-V0.7"`},
		{"PBF with a damaged block", patch(plain, "restriction", "\xff\xff\xff\xff\xff\xff\xff\xff\xff\xff\xff"), "no roads found"},
		{"PBF without data", plain[:headerBytes], "no roads found"},
		{"broken gzip", []byte("\x1f\x8bxxxxxxxxxxxxxxxxxx"), "gzip"},
		{"broken bzip2", []byte("BZh9xxxxxxxxxxxxxxxxxx"), "bzip2"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, notes, err := ReadFrom(bytes.NewReader(c.file), Options{})
			if c.name == "PBF with a damaged block" && err == nil {
				return // strings are bytes: the word is another one
			}
			if err == nil || !strings.Contains(err.Error(), c.want) {
				t.Fatalf("error is %v (%+v), want one with %q", err, notes, c.want)
			}
		})
	}
}

// TestBlockBounds proves that sizes beyond the format's, and indices beyond a
// block's tables, are errors with the place of the block.
func TestBlockBounds(t *testing.T) {
	header := asPBF(true)[:headerBytes]
	block := func(f func(data *message)) []byte {
		var data, blob, head message
		f(&data)
		blob.bytes(1, data)
		head.bytes(1, []byte("OSMData"))
		head.number(3, uint64(len(blob)))
		file := binary.BigEndian.AppendUint32(bytes.Clone(header), uint32(len(head)))
		return append(append(file, head...), blob...)
	}
	element := func(kind protowire.Number, f func(m *message)) []byte {
		return block(func(data *message) {
			var m, group message
			f(&m)
			group.bytes(kind, m)
			data.bytes(2, group)
		})
	}
	for _, c := range []struct {
		name string
		file []byte
		want string
	}{
		{"a header of 1 MB", binary.BigEndian.AppendUint32(bytes.Clone(header), 1<<20), "block header of 1048576 bytes"},
		{"a block of 1 GB", append(binary.BigEndian.AppendUint32(bytes.Clone(header), 6), 0x18, 0x80, 0x80, 0x80, 0x80, 0x04), "a block of 1073741824 bytes"},
		{"a tag that is no string", element(3, func(m *message) { m.bytes(2, packed(false, 7)); m.bytes(3, packed(false, 7)) }), "string 7 of 0"},
		{"keys without values", element(3, func(m *message) { m.bytes(2, packed(false, 7)) }), "1 keys with 0 values"},
		{"a node without a place", element(2, func(m *message) { m.bytes(1, packed(true, 7)) }), "1 nodes with 0 latitudes"},
		{"members without roles", element(4, func(m *message) { m.bytes(9, packed(true, 7)) }), "1 members with 0 roles"},
		{"not protobuf", block(func(data *message) { *data = append(*data, 0xff, 0xff) }), "not valid protobuf"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, _, err := ReadFrom(bytes.NewReader(c.file), Options{})
			if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "block at byte") {
				t.Fatalf("error is %v, want one with %q and the place", err, c.want)
			}
		})
	}
}

// TestPBFAgainstModule compares every road way and node of a real extract with
// what the osmpbf package reads.
func TestPBFAgainstModule(t *testing.T) {
	if testing.Short() {
		t.Skip("reads a whole state twice")
	}
	path := outside.Path(t, "delaware-latest.osm.pbf")
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	type line struct {
		tags  string
		nodes string
	}
	ours := map[osm.WayID]line{}
	places := map[osm.NodeID][2]float64{}
	b := pbfBlock{
		way: func(w *osm.Way) error {
			ours[w.ID] = line{fmt.Sprint(w.Tags), fmt.Sprint(w.Nodes)}
			return nil
		},
		relation: func(*osm.Relation) {},
		node:     func(id osm.NodeID, lon, lat float64) error { places[id] = [2]float64{lon, lat}; return nil },
	}
	if err := eachBlock(f, b.decode); err != nil {
		t.Fatal(err)
	}
	if _, err := f.Seek(0, 0); err != nil {
		t.Fatal(err)
	}
	s := osmpbf.New(context.Background(), f, 1)
	defer s.Close()
	ways, nodes := 0, 0
	for s.Scan() {
		switch x := s.Object().(type) {
		case *osm.Way:
			ways++
			if got, want := ours[x.ID], (line{fmt.Sprint(x.Tags), fmt.Sprint(x.Nodes)}); got != want {
				t.Fatalf("way %d: %v, want %v", x.ID, got, want)
			}
		case *osm.Node:
			nodes++
			// Theirs multiplies by 1e-9, ours divides by 1e9: 2 roundings of
			// a number below 180.
			p := places[x.ID]
			if d := max(p[0]-x.Lon, x.Lon-p[0], p[1]-x.Lat, x.Lat-p[1]); d > 2*1.5e-14 {
				t.Fatalf("node %d at %v, want %v %v", x.ID, p, x.Lon, x.Lat)
			}
		}
	}
	if err := s.Err(); err != nil {
		t.Fatal(err)
	}
	if ways != len(ours) || nodes != len(places) || ways == 0 {
		t.Errorf("%d ways and %d nodes, want %d and %d", len(ours), len(places), ways, nodes)
	}
}

// FuzzExtract looks for extracts that make reading panic or hang.
func FuzzExtract(f *testing.F) {
	f.Add([]byte(asXML()))
	f.Add(asPBF(true))
	f.Add(asPBF(false))
	f.Fuzz(func(t *testing.T, file []byte) {
		if len(file) > 1<<16 {
			return
		}
		m, _, err := ReadFrom(bytes.NewReader(file), Options{MaxBytes: 1 << 16, Map: network.Options{CellM: 10}})
		if err == nil {
			walk(m)
		}
	})
}
