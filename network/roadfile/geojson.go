package roadfile

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
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
		if _, err = g.dec.Token(); errors.Is(err, io.EOF) {
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
		if errors.Is(err, io.EOF) {
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
