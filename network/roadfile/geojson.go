package roadfile

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
)

// maxNesting bounds geometry collections inside one another.
const maxNesting = 8

// geoJSON reads a GeoJSON text as a stream, feature by feature.
type geoJSON struct {
	*collector
	dec     *json.Decoder
	feature int // index of the feature being read, for errors
	nodes   []int32
	heights []float64
}

// readGeoJSON fills the collector. Errors begin with the place in the text.
func (c *collector) readGeoJSON(r io.Reader) error {
	c.notes.Format = "GeoJSON"
	g := &geoJSON{collector: c, dec: json.NewDecoder(r)}
	err := g.document()
	if err == nil {
		if _, err = g.dec.Token(); err == io.EOF {
			return nil
		} else if err == nil {
			err = errors.New("there is more after the end of the GeoJSON object")
		}
	}
	return fmt.Errorf("at byte %d: %w", g.dec.InputOffset(), plainJSON(err))
}

// plainJSON says what a JSON error means for who sent the file.
func plainJSON(err error) error {
	var syntax *json.SyntaxError
	switch {
	case errors.Is(err, io.EOF), errors.Is(err, io.ErrUnexpectedEOF):
		return errors.New("the file ends in the middle of the JSON text: it is truncated")
	case errors.As(err, &syntax):
		return fmt.Errorf("not valid JSON: %s", strings.TrimPrefix(err.Error(), "json: "))
	}
	return err
}

// document reads the top-level object, whose members come in any order.
func (g *geoJSON) document() error {
	if t, err := g.dec.Token(); err != nil {
		if err == io.EOF {
			return errors.New("the file is empty")
		}
		return err
	} else if t != json.Delim('{') {
		return fmt.Errorf("a GeoJSON text is an object in braces, this begins with %v", t)
	}
	members := map[string]json.RawMessage{}
	hasFeatures := false
	for g.dec.More() {
		key, err := g.dec.Token()
		if err != nil {
			return err
		}
		if key == "features" {
			if hasFeatures {
				return errors.New("there are two features members")
			}
			hasFeatures = true
			if err := g.collection(); err != nil {
				return err
			}
			continue
		}
		var raw json.RawMessage
		if err := g.dec.Decode(&raw); err != nil {
			return err
		}
		switch key {
		case "type", "geometry", "properties", "id", "coordinates", "geometries", "crs":
			members[key.(string)] = raw
		case "copyright", "license", "licence", "attribution":
			c := text(raw)
			if g.licence == "" {
				g.licence = c
			} else if c != "" {
				g.licence += "\n" + c
			}
		}
	}
	if _, err := g.dec.Token(); err != nil {
		return err
	}
	if err := checkCRS(members["crs"]); err != nil {
		return err
	}
	kind := text(members["type"])
	if hasFeatures != (kind == "FeatureCollection") {
		return fmt.Errorf("the object's type is %q and it has %s features member", kind, map[bool]string{true: "a", false: "no"}[hasFeatures])
	}
	switch kind {
	case "FeatureCollection":
		return nil
	case "Feature":
		return g.oneFeature(members["geometry"], members["properties"], members["id"])
	}
	whole := rawGeometry{Type: kind, Coordinates: members["coordinates"], Geometries: members["geometries"]}
	g.notes.Features = 1
	return g.geometry(whole, func(string) string { return "" }, "geometry", 0)
}

// checkCRS refuses coordinates that are not longitude and latitude. RFC 7946
// has no crs member, its predecessor had.
func checkCRS(raw json.RawMessage) error {
	if len(raw) == 0 || string(raw) == "null" {
		return nil
	}
	var crs struct {
		Properties struct{ Name string }
	}
	if json.Unmarshal(raw, &crs) == nil {
		name := crs.Properties.Name
		if strings.HasSuffix(name, "CRS84") || strings.HasSuffix(name, ":4326") || strings.HasSuffix(name, "::4979") {
			return nil
		}
	}
	return fmt.Errorf("its crs member is %.100s: GeoJSON is in WGS 84 longitude and latitude; reproject the file", raw)
}

// collection reads the array of features.
func (g *geoJSON) collection() error {
	if t, err := g.dec.Token(); err != nil {
		return err
	} else if t != json.Delim('[') {
		return fmt.Errorf("features is not an array but begins with %v", t)
	}
	for g.feature = 0; g.dec.More(); g.feature++ {
		var f struct {
			Type       string
			ID         json.RawMessage
			Geometry   json.RawMessage
			Properties json.RawMessage
		}
		err := g.dec.Decode(&f)
		if err == nil && f.Type != "Feature" {
			err = fmt.Errorf("its type is %q, want Feature", f.Type)
		}
		if err == nil {
			err = g.oneFeature(f.Geometry, f.Properties, f.ID)
		}
		if err != nil {
			return fmt.Errorf("feature %d: %w", g.feature, plainJSON(err))
		}
		if g.feature >= maxFeatures {
			return fmt.Errorf("more than %d features: cut the region", maxFeatures)
		}
	}
	_, err := g.dec.Token()
	return err
}

type rawGeometry struct {
	Type        string
	Coordinates json.RawMessage
	Geometries  json.RawMessage
}

func (g *geoJSON) oneFeature(geometry, properties, id json.RawMessage) error {
	g.notes.Features++
	var members map[string]json.RawMessage
	if len(properties) > 0 {
		if err := json.Unmarshal(properties, &members); err != nil {
			return fmt.Errorf("its properties are no object: %w", err)
		}
	}
	t := tags(func(key string) string { return text(members[key]) })
	name := text(id)
	if name == "" {
		name = t("@id")
	}
	if name == "" {
		name = "feature " + strconv.Itoa(g.feature)
	}
	if len(geometry) == 0 || string(geometry) == "null" {
		g.notes.NoGeometry++
		return nil
	}
	var shape rawGeometry
	if err := json.Unmarshal(geometry, &shape); err != nil {
		return fmt.Errorf("its geometry is no geometry object: %w", err)
	}
	if err := g.noTurns(members["no_turn_to"], name); err != nil {
		return err
	}
	return g.geometry(shape, t, name, 0)
}

// noTurns reads the no_turn_to property: an id, or a list of ids.
func (g *geoJSON) noTurns(raw json.RawMessage, from string) error {
	if len(raw) == 0 || string(raw) == "null" {
		return nil
	}
	list := []json.RawMessage{raw}
	if raw[0] == '[' {
		if err := json.Unmarshal(raw, &list); err != nil {
			return err
		}
	}
	for _, x := range list {
		to := text(x)
		if to == "" {
			return fmt.Errorf("no_turn_to holds %.60s, want the id of a feature", x)
		}
		g.bans = append(g.bans, ban{from: from, to: to, node: -1})
	}
	return nil
}

// text returns a JSON string's content, and the text of a number or boolean.
func text(raw json.RawMessage) string {
	if len(raw) == 0 || raw[0] == 'n' || raw[0] == '{' || raw[0] == '[' {
		return ""
	}
	if raw[0] != '"' {
		return string(raw)
	}
	var s string
	if json.Unmarshal(raw, &s) != nil {
		return ""
	}
	return s
}

func (g *geoJSON) geometry(s rawGeometry, t tags, name string, depth int) error {
	switch s.Type {
	case "LineString":
		return g.lineString(s.Coordinates, t, name)
	case "MultiLineString":
		lines, err := elements(s.Coordinates)
		if err != nil {
			return err
		}
		for i, l := range lines {
			if err := g.lineString(l, t, name); err != nil {
				return fmt.Errorf("line %d: %w", i, err)
			}
		}
		return nil
	case "GeometryCollection":
		if depth >= maxNesting {
			return fmt.Errorf("geometry collections are nested more than %d deep", maxNesting)
		}
		var list []rawGeometry
		if err := json.Unmarshal(s.Geometries, &list); err != nil {
			return fmt.Errorf("its geometries are no array of geometry objects: %w", err)
		}
		for i, x := range list {
			if err := g.geometry(x, t, name, depth+1); err != nil {
				return fmt.Errorf("geometry %d: %w", i, err)
			}
		}
		return nil
	case "Point", "MultiPoint":
		g.notes.Points++
		return nil
	case "Polygon", "MultiPolygon":
		g.notes.Areas++
		return nil
	}
	return fmt.Errorf("its geometry has type %q, which is none of GeoJSON's; roads are LineString or MultiLineString", s.Type)
}

func (g *geoJSON) lineString(raw json.RawMessage, t tags, name string) error {
	points, err := elements(raw)
	if err != nil {
		return err
	}
	if len(points) == 0 {
		g.notes.NoGeometry++
		return nil
	}
	if len(points) > maxPerLine {
		return fmt.Errorf("a line with %d vertices: more than %d are not read; split it", len(points), maxPerLine)
	}
	wanted := g.wanted(t)
	g.nodes, g.heights = g.nodes[:0], g.heights[:0]
	for i, p := range points {
		lon, lat, height, err := position(p)
		if err != nil {
			return fmt.Errorf("vertex %d: %w", i, err)
		}
		if wanted {
			g.nodes = append(g.nodes, g.node(lon, lat))
			g.heights = append(g.heights, height)
		}
	}
	if !wanted {
		return nil
	}
	a := t.attributes()
	return g.add(g.nodes, g.heights, name, a, t.direction(a))
}

// elements splits a JSON array, which is known to be valid JSON, without
// looking into what it holds.
func elements(raw json.RawMessage) ([]json.RawMessage, error) {
	raw = bytes.TrimSpace(raw)
	if len(raw) < 2 || raw[0] != '[' {
		return nil, fmt.Errorf("its coordinates are %.40s, want an array", orMissing(raw))
	}
	var list []json.RawMessage
	depth, start, quoted := 0, 1, false
	for i := 1; i < len(raw); i++ {
		b := raw[i]
		switch {
		case quoted:
			if b == '\\' {
				i++
			} else if b == '"' {
				quoted = false
			}
		case b == '"':
			quoted = true
		case b == '[' || b == '{':
			depth++
		case depth > 0 && (b == ']' || b == '}'):
			depth--
		case depth == 0 && (b == ',' || b == ']'):
			x := bytes.TrimSpace(raw[start:i])
			if len(x) > 0 {
				list = append(list, x)
			}
			start = i + 1
		}
	}
	return list, nil
}

func orMissing(raw []byte) string {
	if len(raw) == 0 {
		return "missing"
	}
	return string(raw)
}

// position reads [longitude, latitude] or [longitude, latitude, height, ...].
func position(raw json.RawMessage) (lon, lat, height float64, err error) {
	if len(raw) < 2 || raw[0] != '[' {
		return 0, 0, 0, fmt.Errorf("%.40s is no position, want [longitude, latitude]", raw)
	}
	height = math.NaN()
	inner := raw[1 : len(raw)-1]
	for i := range 3 {
		field, rest, more := bytes.Cut(inner, []byte{','})
		x, err := strconv.ParseFloat(string(bytes.TrimSpace(field)), 64)
		if err != nil || math.IsInf(x, 0) || math.IsNaN(x) {
			return 0, 0, 0, fmt.Errorf("%.60s is no position, want numbers [longitude, latitude]", raw)
		}
		switch i {
		case 0:
			lon = x
		case 1:
			lat = x
		case 2:
			height = x
		}
		inner = rest
		if !more {
			if i == 0 {
				return 0, 0, 0, fmt.Errorf("%.60s has one number, want [longitude, latitude]", raw)
			}
			break
		}
	}
	if err := checkPlace(lon, lat); err != nil {
		return 0, 0, 0, err
	}
	// Nothing on Earth's surface is farther from sea level.
	if math.Abs(height) > 20000 {
		return 0, 0, 0, fmt.Errorf("height %v m is not on this Earth: heights are in metres", height)
	}
	return lon, lat, height, nil
}

// checkPlace refuses what is not on the globe.
func checkPlace(lon, lat float64) error {
	switch {
	case math.Abs(lon) <= 180 && math.Abs(lat) <= 90:
		return nil
	case math.Abs(lon) <= 90 && math.Abs(lat) <= 180:
		return fmt.Errorf("longitude %v, latitude %v is not on the globe: they look swapped, longitude comes first", lon, lat)
	case math.Abs(lon) > 1000 || math.Abs(lat) > 1000:
		return fmt.Errorf("longitude %v, latitude %v is not on the globe: they look like metres; reproject to WGS 84 degrees", lon, lat)
	}
	return fmt.Errorf("longitude %v, latitude %v is not on the globe: longitude must be within ±180, latitude within ±90 degrees", lon, lat)
}
