package roadfile

import (
	"bytes"
	"compress/zlib"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/paulmach/osm"
	"google.golang.org/protobuf/encoding/protowire"
)

// OpenStreetMap's PBF is blocks of protobuf, each after its length and a
// header (fileformat.proto, osmformat.proto in the OpenStreetMap wiki). The
// decoder of package osmpbf indexes strings and coordinates by what the file
// says and panics, in goroutines of its own where nobody can catch it, on files
// that say something else; so the few messages that roads need are decoded
// here, into that module's types.

// Bounds of the format: a header must be below 64 KiB, a block, packed or not,
// below 32 MiB.
const (
	maxPBFHeader = 64 << 10
	maxPBFBlock  = 32 << 20
)

// isPBF recognises the first block's header: its length, then field 1, the
// type "OSMHeader".
func isPBF(head []byte) bool {
	return len(head) >= 15 && head[0] == 0 && head[1] == 0 && string(head[4:15]) == "\n\tOSMHeader"
}

// readPBF reads the file twice: ways and relations first, then those nodes
// that the ways need, as nodes come first in such files and are many.
func (c *collector) readPBF(r io.ReadSeeker) error {
	c.notes.Format = "OpenStreetMap PBF"
	o := &osmReader{collector: c, places: map[osm.NodeID][2]float64{}}
	pass := func(b *pbfBlock) error {
		if _, err := r.Seek(0, io.SeekStart); err != nil {
			return err
		}
		return eachBlock(io.LimitReader(r, c.opt.MaxBytes), b.decode)
	}
	err := pass(&pbfBlock{
		way:      o.way,
		relation: o.relation,
	})
	if err != nil {
		return err
	}
	needed := map[osm.NodeID]struct{}{}
	for i := range o.ways {
		for _, n := range o.ways[i].nodes {
			needed[n] = struct{}{}
		}
	}
	err = pass(&pbfBlock{node: func(id osm.NodeID, lon, lat float64) error {
		if _, ok := needed[id]; !ok {
			return nil
		}
		return o.place(id, lon, lat)
	}})
	if err != nil {
		return err
	}
	return o.finish()
}

// eachBlock calls f with the content of each data block. Errors say at which
// byte the block begins.
func eachBlock(r io.Reader, f func([]byte) error) error {
	count := &counter{r: r}
	var packed []byte
	var unpacked bytes.Buffer
	for {
		at := count.n
		err := func() error {
			var size [4]byte
			if _, err := io.ReadFull(count, size[:]); err != nil {
				return err // io.EOF here is the end of the file
			}
			n := binary.BigEndian.Uint32(size[:])
			if n > maxPBFHeader {
				return fmt.Errorf("a block header of %d bytes, more than the format's %d", n, maxPBFHeader)
			}
			header, err := readExactly(count, packed[:0], int(n))
			if err != nil {
				return err
			}
			kind, length, err := blobHeader(header)
			if err != nil {
				return err
			}
			if packed, err = readExactly(count, header[:0], length); err != nil {
				return err
			}
			content, err := unpackBlob(packed, &unpacked)
			if err != nil {
				return err
			}
			switch kind {
			case "OSMHeader":
				return checkFeatures(content)
			case "OSMData":
				return f(content)
			}
			return nil // other kinds are to be skipped, says the format
		}()
		switch {
		case err == io.EOF:
			return nil
		case errors.Is(err, io.ErrUnexpectedEOF):
			return fmt.Errorf("block at byte %d: the file ends in the middle of it: it is truncated", at)
		case err != nil:
			return fmt.Errorf("block at byte %d: %w", at, err)
		}
	}
}

func readExactly(r io.Reader, b []byte, n int) ([]byte, error) {
	if cap(b) < n {
		b = make([]byte, n)
	}
	b = b[:n]
	_, err := io.ReadFull(r, b)
	if err == io.EOF && n > 0 {
		err = io.ErrUnexpectedEOF
	}
	return b, err
}

func blobHeader(b []byte) (kind string, length int, err error) {
	err = eachField(b, func(f field) error {
		switch f.number {
		case 1:
			kind = string(f.bytes)
		case 3:
			if f.value > maxPBFBlock {
				return fmt.Errorf("a block of %d bytes, more than the format's %d", f.value, maxPBFBlock)
			}
			length = int(f.value)
		}
		return nil
	})
	return kind, length, err
}

// unpackBlob returns the content, which is valid until the next call with the
// same buffer.
func unpackBlob(b []byte, buffer *bytes.Buffer) ([]byte, error) {
	var raw, packed []byte
	other := protowire.Number(0)
	err := eachField(b, func(f field) error {
		switch f.number {
		case 1:
			raw = f.bytes
		case 2: // size of the content, which the content itself tells
		case 3:
			packed = f.bytes
		default:
			other = f.number
		}
		return nil
	})
	switch {
	case err != nil:
		return nil, err
	case raw != nil:
		return raw, nil
	case packed == nil && other != 0:
		return nil, fmt.Errorf("it is packed by method %d; zlib and none are read: convert the file", other)
	case packed == nil:
		return nil, nil
	}
	z, err := zlib.NewReader(bytes.NewReader(packed))
	if err != nil {
		return nil, fmt.Errorf("unpacking it: %w", err)
	}
	buffer.Reset()
	n, err := buffer.ReadFrom(io.LimitReader(z, maxPBFBlock+1))
	if err != nil {
		return nil, fmt.Errorf("unpacking it: %v", err) // %v: its "unexpected EOF" is not the file's
	}
	if n > maxPBFBlock {
		return nil, fmt.Errorf("it unpacks to more than the format's %d bytes", maxPBFBlock)
	}
	return buffer.Bytes(), nil
}

// checkFeatures refuses files that need more of a reader than this one knows.
func checkFeatures(b []byte) error {
	return eachField(b, func(f field) error {
		if f.number == 4 && string(f.bytes) != "OsmSchema-V0.6" && string(f.bytes) != "DenseNodes" {
			return fmt.Errorf("the file needs a reader with %.50q, which this one has not: convert the file", f.bytes)
		}
		return nil
	})
}

// pbfBlock decodes blocks and hands on what is asked for: node, or way and
// relation.
type pbfBlock struct {
	node     func(id osm.NodeID, lon, lat float64) error
	way      func(*osm.Way) error
	relation func(*osm.Relation)

	text             [][]byte
	granularity      int64 // nanodegrees
	offLat, offLon   int64
	ids, lats, lons  []int64
	keys, vals, refs []int64
}

func (p *pbfBlock) decode(b []byte) error {
	p.text = p.text[:0]
	p.granularity, p.offLat, p.offLon = 100, 0, 0
	var groups [][]byte
	err := eachField(b, func(f field) error {
		switch f.number {
		case 1:
			return eachField(f.bytes, func(s field) error {
				if s.number == 1 {
					p.text = append(p.text, s.bytes)
				}
				return nil
			})
		case 2:
			groups = append(groups, f.bytes)
		case 17:
			p.granularity = int64(f.value)
		case 19:
			p.offLat = int64(f.value)
		case 20:
			p.offLon = int64(f.value)
		}
		return nil
	})
	if err != nil {
		return err
	}
	for _, g := range groups {
		if err := eachField(g, p.element); err != nil {
			return err
		}
	}
	return nil
}

// element decodes one member of a group: 1 a node, 2 dense nodes, 3 a way, 4 a
// relation.
func (p *pbfBlock) element(f field) error {
	switch {
	case f.number == 1 && p.node != nil:
		return p.plainNode(f.bytes)
	case f.number == 2 && p.node != nil:
		return p.denseNodes(f.bytes)
	case f.number == 3 && p.way != nil:
		return p.oneWay(f.bytes)
	case f.number == 4 && p.relation != nil:
		return p.oneRelation(f.bytes)
	}
	return nil
}

// place turns a coordinate into degrees.
func (p *pbfBlock) place(offset, x int64) float64 {
	// In floating point: a hostile file's product would overflow. 1e-9 is not
	// exact, so divide.
	return (float64(offset) + float64(p.granularity)*float64(x)) / 1e9
}

func (p *pbfBlock) plainNode(b []byte) error {
	var id, lat, lon int64
	err := eachField(b, func(f field) error {
		switch f.number {
		case 1:
			id = protowire.DecodeZigZag(f.value)
		case 8:
			lat = protowire.DecodeZigZag(f.value)
		case 9:
			lon = protowire.DecodeZigZag(f.value)
		}
		return nil
	})
	if err != nil {
		return err
	}
	return p.node(osm.NodeID(id), p.place(p.offLon, lon), p.place(p.offLat, lat))
}

func (p *pbfBlock) denseNodes(b []byte) error {
	p.ids, p.lats, p.lons = p.ids[:0], p.lats[:0], p.lons[:0]
	err := eachField(b, func(f field) (err error) {
		switch f.number {
		case 1:
			p.ids, err = deltas(p.ids, f)
		case 8:
			p.lats, err = deltas(p.lats, f)
		case 9:
			p.lons, err = deltas(p.lons, f)
		}
		return err
	})
	if err != nil {
		return err
	}
	if len(p.ids) != len(p.lats) || len(p.ids) != len(p.lons) {
		return fmt.Errorf("%d nodes with %d latitudes and %d longitudes", len(p.ids), len(p.lats), len(p.lons))
	}
	for i, id := range p.ids {
		if err := p.node(osm.NodeID(id), p.place(p.offLon, p.lons[i]), p.place(p.offLat, p.lats[i])); err != nil {
			return err
		}
	}
	return nil
}

func (p *pbfBlock) oneWay(b []byte) error {
	var w osm.Way
	p.keys, p.vals, p.refs = p.keys[:0], p.vals[:0], p.refs[:0]
	err := eachField(b, func(f field) (err error) {
		switch f.number {
		case 1:
			w.ID = osm.WayID(f.value)
		case 2:
			p.keys, err = numbersOf(p.keys, f)
		case 3:
			p.vals, err = numbersOf(p.vals, f)
		case 8:
			p.refs, err = deltas(p.refs, f)
		}
		return err
	})
	if err != nil {
		return err
	}
	if w.Tags, err = p.tags(); err != nil {
		return fmt.Errorf("way %d: %w", w.ID, err)
	}
	w.Nodes = make(osm.WayNodes, len(p.refs))
	for i, id := range p.refs {
		w.Nodes[i].ID = osm.NodeID(id)
	}
	return p.way(&w)
}

func (p *pbfBlock) oneRelation(b []byte) error {
	var r osm.Relation
	var roles, types []int64
	p.keys, p.vals, p.refs = p.keys[:0], p.vals[:0], p.refs[:0]
	err := eachField(b, func(f field) (err error) {
		switch f.number {
		case 1:
			r.ID = osm.RelationID(f.value)
		case 2:
			p.keys, err = numbersOf(p.keys, f)
		case 3:
			p.vals, err = numbersOf(p.vals, f)
		case 8:
			roles, err = numbersOf(roles, f)
		case 9:
			p.refs, err = deltas(p.refs, f)
		case 10:
			types, err = numbersOf(types, f)
		}
		return err
	})
	if err != nil {
		return err
	}
	if r.Tags, err = p.tags(); err != nil {
		return fmt.Errorf("relation %d: %w", r.ID, err)
	}
	if len(roles) != len(p.refs) || len(types) != len(p.refs) {
		return fmt.Errorf("relation %d: %d members with %d roles and %d types", r.ID, len(p.refs), len(roles), len(types))
	}
	for i, ref := range p.refs {
		role, err := p.word(roles[i])
		if err != nil {
			return fmt.Errorf("relation %d: %w", r.ID, err)
		}
		m := osm.Member{Ref: ref, Role: role}
		switch types[i] {
		case 0:
			m.Type = osm.TypeNode
		case 1:
			m.Type = osm.TypeWay
		case 2:
			m.Type = osm.TypeRelation
		}
		r.Members = append(r.Members, m)
	}
	p.relation(&r)
	return nil
}

func (p *pbfBlock) word(i int64) (string, error) {
	if i < 0 || i >= int64(len(p.text)) {
		return "", fmt.Errorf("string %d of %d", i, len(p.text))
	}
	return string(p.text[i]), nil
}

func (p *pbfBlock) tags() (osm.Tags, error) {
	if len(p.keys) != len(p.vals) {
		return nil, fmt.Errorf("%d keys with %d values", len(p.keys), len(p.vals))
	}
	tags := make(osm.Tags, len(p.keys))
	for i := range tags {
		k, err := p.word(p.keys[i])
		if err != nil {
			return nil, err
		}
		v, err := p.word(p.vals[i])
		if err != nil {
			return nil, err
		}
		tags[i] = osm.Tag{Key: k, Value: v}
	}
	return tags, nil
}

// field is one field of a protobuf message: bytes or a number.
type field struct {
	number protowire.Number
	bytes  []byte
	value  uint64
}

// eachField calls f with each field of a message.
func eachField(b []byte, f func(field) error) error {
	for len(b) > 0 {
		number, kind, n := protowire.ConsumeTag(b)
		if n < 0 {
			return fmt.Errorf("not valid protobuf: %v", protowire.ParseError(n))
		}
		b = b[n:]
		x := field{number: number}
		switch kind {
		case protowire.VarintType:
			x.value, n = protowire.ConsumeVarint(b)
		case protowire.BytesType:
			x.bytes, n = protowire.ConsumeBytes(b)
			if x.bytes == nil {
				x.bytes = []byte{}
			}
		default:
			n = protowire.ConsumeFieldValue(number, kind, b)
		}
		if n < 0 {
			return fmt.Errorf("not valid protobuf: %v", protowire.ParseError(n))
		}
		b = b[n:]
		if err := f(x); err != nil {
			return err
		}
	}
	return nil
}

// numbersOf appends the numbers of a packed field, or the one of a field that
// is not packed.
func numbersOf(dst []int64, f field) ([]int64, error) {
	if f.bytes == nil {
		return append(dst, int64(f.value)), nil
	}
	for b := f.bytes; len(b) > 0; {
		v, n := protowire.ConsumeVarint(b)
		if n < 0 {
			return dst, fmt.Errorf("not valid protobuf: %v", protowire.ParseError(n))
		}
		if v > math.MaxInt64 {
			v = math.MaxInt64
		}
		dst, b = append(dst, int64(v)), b[n:]
	}
	return dst, nil
}

// deltas appends numbers of which each is kept as the difference from the one
// before.
func deltas(dst []int64, f field) ([]int64, error) {
	var x int64
	if len(dst) > 0 {
		x = dst[len(dst)-1]
	}
	if f.bytes == nil {
		return append(dst, x+protowire.DecodeZigZag(f.value)), nil
	}
	for b := f.bytes; len(b) > 0; {
		v, n := protowire.ConsumeVarint(b)
		if n < 0 {
			return dst, fmt.Errorf("not valid protobuf: %v", protowire.ParseError(n))
		}
		x += protowire.DecodeZigZag(v)
		dst, b = append(dst, x), b[n:]
	}
	return dst, nil
}
