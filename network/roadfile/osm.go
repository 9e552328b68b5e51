package roadfile

import (
	"context"
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"strings"

	"github.com/paulmach/osm"
	"github.com/paulmach/osm/osmxml"
)

// osmReader turns OpenStreetMap elements into lines. Nodes may come in any
// order, before or after the ways that use them.
type osmReader struct {
	*collector
	ways      []osmWay
	relations []osmBan
	places    map[osm.NodeID][2]float64
}

type osmWay struct {
	id    osm.WayID
	nodes []osm.NodeID
	tags  osm.Tags
}

// osmBan is a turn restriction whose node is not yet known.
type osmBan struct {
	from, to osm.WayID
	via      osm.NodeID
	only     bool
}

// osmLicence is what the OpenStreetMap Foundation asks for.
const osmLicence = "Data © OpenStreetMap contributors, available under the Open Database License (ODbL) 1.0"

func wayName(id osm.WayID) string { return fmt.Sprintf("way/%d", id) }

func (o *osmReader) place(id osm.NodeID, lon, lat float64) error {
	if err := checkPlace(lon, lat); err != nil {
		return fmt.Errorf("node %d: %w", id, err)
	}
	if len(o.places) >= maxVertices {
		return fmt.Errorf("more than %d nodes: cut the region", maxVertices)
	}
	o.places[id] = [2]float64{lon, lat}
	return nil
}

// way keeps a way that is a road.
func (o *osmReader) way(w *osm.Way) error {
	o.notes.Features++
	t := tags(w.Tags.Find)
	if t("highway") == "" {
		return nil
	}
	if !o.wanted(t) {
		return nil
	}
	if len(w.Nodes) > maxPerLine || len(o.ways) >= maxFeatures {
		return fmt.Errorf("way %d: more than %d vertices a way or %d roads are not read: cut the region", w.ID, maxPerLine, maxFeatures)
	}
	x := osmWay{id: w.ID, tags: w.Tags, nodes: make([]osm.NodeID, len(w.Nodes))}
	for i, n := range w.Nodes {
		x.nodes[i] = n.ID
	}
	o.ways = append(o.ways, x)
	return nil
}

// relation keeps a turn restriction for motor vehicles via a node.
func (o *osmReader) relation(r *osm.Relation) {
	if r.Tags.Find("type") != "restriction" {
		return
	}
	kind := r.Tags.Find("restriction")
	if kind == "" {
		kind = r.Tags.Find("restriction:motor_vehicle")
	}
	only := strings.HasPrefix(kind, "only_")
	if !only && !strings.HasPrefix(kind, "no_") {
		return // conditional, or for some vehicles
	}
	var from, to []osm.WayID
	var via []osm.NodeID
	for _, m := range r.Members {
		switch {
		case m.Role == "from" && m.Type == osm.TypeWay:
			from = append(from, osm.WayID(m.Ref))
		case m.Role == "to" && m.Type == osm.TypeWay:
			to = append(to, osm.WayID(m.Ref))
		case m.Role == "via" && m.Type == osm.TypeNode:
			via = append(via, osm.NodeID(m.Ref))
		}
	}
	if len(via) != 1 || len(from) == 0 || len(to) == 0 || len(from)*len(to) > 1000 {
		o.notes.UnusedBans++
		return
	}
	for _, f := range from {
		for _, t := range to {
			o.relations = append(o.relations, osmBan{f, t, via[0], only})
		}
	}
}

// finish resolves the nodes.
func (o *osmReader) finish() error {
	node := map[osm.NodeID]int32{}
	var nodes []int32
	for i := range o.ways {
		w := &o.ways[i]
		nodes = nodes[:0]
		for _, id := range w.nodes {
			n, ok := node[id]
			if !ok {
				p, known := o.places[id]
				if !known {
					o.notes.MissingNodes++
					continue
				}
				n = o.node(p[0], p[1])
				node[id] = n
			}
			nodes = append(nodes, n)
		}
		t := tags(w.tags.Find)
		o.notes.unknown(t, wayName(w.id))
		a := t.attributes()
		if err := o.add(nodes, nil, wayName(w.id), a, t.direction(a)); err != nil {
			return err
		}
	}
	for _, r := range o.relations {
		n, ok := node[r.via]
		if !ok {
			o.notes.UnusedBans++
			continue
		}
		o.bans = append(o.bans, ban{wayName(r.from), wayName(r.to), n, r.only})
	}
	if o.licence == "" {
		o.licence = osmLicence
	}
	return nil
}

// readOSMXML fills the collector from OpenStreetMap XML.
func (c *collector) readOSMXML(r io.Reader) (err error) {
	c.notes.Format = "OpenStreetMap XML"
	o := &osmReader{collector: c, places: map[osm.NodeID][2]float64{}}
	count := &counter{r: r}
	s := osmxml.New(context.Background(), count)
	defer s.Close()
	defer func() {
		if err != nil {
			err = fmt.Errorf("near byte %d: %w", count.n, err)
		}
	}()
	for s.Scan() {
		switch x := s.Object().(type) {
		case *osm.Node:
			if x.Lon == 0 && x.Lat == 0 && !x.Visible {
				continue // deleted
			}
			err = o.place(x.ID, x.Lon, x.Lat)
		case *osm.Way:
			err = o.way(x)
		case *osm.Relation:
			o.relation(x)
		}
		if err != nil {
			return err
		}
	}
	if err := s.Err(); err != nil {
		var syntax *xml.SyntaxError
		if errors.As(err, &syntax) {
			if strings.Contains(syntax.Msg, "unexpected EOF") {
				return fmt.Errorf("line %d: the file ends in the middle of the XML text: it is truncated", syntax.Line)
			}
			return fmt.Errorf("line %d: not valid XML: %s", syntax.Line, syntax.Msg)
		}
		return err
	}
	return o.finish()
}

// counter counts the bytes that are read through it.
type counter struct {
	r io.Reader
	n int64
}

func (c *counter) Read(p []byte) (int, error) {
	n, err := c.r.Read(p)
	c.n += int64(n)
	return n, err
}
