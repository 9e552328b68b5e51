package roadfile

import (
	"fmt"

	"github.com/paulmach/osm"
	"google.golang.org/protobuf/encoding/protowire"
)

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
