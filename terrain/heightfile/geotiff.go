package heightfile

import (
	"encoding/xml"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"

	"leadline/terrain"
)

// readTIFF reads the first image of a GeoTIFF.
//
// Source: TIFF 6.0; OGC GeoTIFF 1.1; tags 42112 and 42113 as documented with
// GDAL's GeoTIFF driver.
func readTIFF(r io.ReaderAt, size int64, _ string, opt Options) (*raw, error) {
	t, err := openTIFF(r, size)
	if err != nil {
		return nil, err
	}
	l, err := t.layout(opt)
	if err != nil {
		return nil, err
	}
	f := &raw{}
	flip, err := t.georeference(f, l)
	if err != nil {
		return nil, err
	}
	items, err := t.items()
	if err != nil {
		return nil, err
	}
	scale, offset := 1.0, 0.0
	for _, p := range []struct {
		role string
		dst  *float64
	}{{"scale", &scale}, {"offset", &offset}} {
		if s := items.role(p.role); s != "" {
			if *p.dst, err = strconv.ParseFloat(strings.TrimSpace(s), 64); err != nil || *p.dst-*p.dst != 0 {
				return nil, fmt.Errorf("tag %d: %s %s is no number", tagMetadata, p.role, quote(s))
			}
		}
	}
	f.unit = unitByName(items.role("unittype"), f.unit)
	items.meta(f)
	isVoid, err := t.nodata(l)
	if err != nil {
		return nil, err
	}
	f.values = make([]float32, l.cols*l.rows)
	fill := float32(0) // what a chunk that is left out stands for
	if s, _ := t.text(tagNodata); s != "" {
		fill = float32(nan)
	}
	if fill != 0 {
		for i := range f.values {
			f.values[i] = fill
		}
	}
	if err = t.decode(f.values, l, isVoid); err != nil {
		return nil, err
	}
	if scale != 1 || offset != 0 {
		for i, v := range f.values {
			f.values[i] = float32(float64(float64(v)*scale) + offset)
		}
	}
	if flip {
		flipRows(f.values, l.cols)
	}
	return f, nil
}

// georeference sets the grid. flip says that the first row is the
// southernmost.
func (t *tiff) georeference(f *raw, l *layout) (flip bool, err error) {
	keys, err := t.geoKeys()
	if err != nil {
		return false, err
	}
	if f.grid.CRS, err = keys.crs(); err != nil {
		return false, err
	}
	keys.vertical(f)
	scale, err := t.floats(tagPixelScale)
	if err != nil {
		return false, err
	}
	tie, err := t.floats(tagTiepoint)
	if err != nil {
		return false, err
	}
	matrix, err := t.floats(tagTransform)
	if err != nil {
		return false, err
	}
	var x, y, dx, dy float64 // of the pixel coordinates' origin
	switch {
	case len(matrix) >= 8:
		if matrix[1] != 0 || matrix[4] != 0 {
			return false, fmt.Errorf("tag %d: the grid is turned or sheared: lay it north up with gdalwarp", tagTransform)
		}
		x, y, dx, dy = matrix[3], matrix[7], matrix[0], matrix[5]
	case len(scale) >= 2 && len(tie) >= 6:
		if len(tie) > 6 {
			return false, fmt.Errorf("tag %d: several tie points are not supported: lay the grid straight with gdalwarp", tagTiepoint)
		}
		dx, dy = scale[0], -scale[1]
		x, y = tie[3]-float64(tie[0]*dx), tie[4]-float64(tie[1]*dy)
	default:
		return false, fmt.Errorf("it does not say where it lies (tags %d with %d, or %d): georeference it, for example with gdal_translate -a_ullr", tagPixelScale, tagTiepoint, tagTransform)
	}
	// Key 1025: where pixels are areas, the origin is the corner of the first
	// pixel; where they are points, its middle.
	if kind, ok := keys.code[keyRaster]; !ok || kind == 1 {
		x, y = x+dx/2, y+dy/2
	} else if kind != 2 {
		return false, fmt.Errorf("key %d: raster type %d is neither area (1) nor point (2)", keyRaster, kind)
	}
	if !(dx > 0) || dy == 0 || math.IsNaN(dy) {
		return false, fmt.Errorf("tags %d, %d: steps of %v, %v between columns and rows: columns must go east", tagPixelScale, tagTransform, dx, dy)
	}
	if flip = dy > 0; flip {
		y += float64(dy * float64(l.rows-1))
		dy = -dy
	}
	g := terrain.Grid{CRS: f.grid.CRS, Cols: l.cols, Rows: l.rows, FirstX: x, FirstY: y, StepX: dx, StepY: dy}
	f.grid = g
	return flip, nil
}

// nodata returns what tells void samples. The value in tag 42113 is compared
// as the file's own type stores it.
func (t *tiff) nodata(l *layout) (func(float64) bool, error) {
	s, err := t.text(tagNodata)
	if err != nil {
		return nil, err
	}
	s = strings.TrimSpace(s)
	if s == "" {
		return func(v float64) bool { return false }, nil
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil && !math.IsInf(v, 0) {
		return nil, fmt.Errorf("tag %d: NODATA %s is no number", tagNodata, quote(s))
	}
	if l.format == 3 && l.bits == 32 {
		v = float64(float32(v))
	}
	return func(x float64) bool { return x == v }, nil
}

func flipRows(v []float32, cols int) {
	rows := len(v) / cols
	for a, b := 0, rows-1; a < b; a, b = a+1, b-1 {
		top, bottom := v[a*cols:(a+1)*cols], v[b*cols:(b+1)*cols]
		for i := range top {
			top[i], bottom[i] = bottom[i], top[i]
		}
	}
}

// metaItems are the items of tag 42112.
type metaItems []metaItem

type metaItem struct {
	Name   string `xml:"name,attr"`
	Sample string `xml:"sample,attr,omitempty"`
	Role   string `xml:"role,attr,omitempty"`
	Text   string `xml:",chardata"`
}

type metaDocument struct {
	XMLName xml.Name   `xml:"GDALMetadata"`
	Items   []metaItem `xml:"Item"`
}

func (t *tiff) items() (metaItems, error) {
	s, err := t.text(tagMetadata)
	if err != nil || s == "" {
		return nil, err
	}
	var doc metaDocument
	if err := xml.Unmarshal([]byte(s), &doc); err != nil {
		return nil, fmt.Errorf("tag %d: the metadata is not XML: %w", tagMetadata, err)
	}
	return doc.Items, nil
}

func (m metaItems) role(role string) string {
	for _, i := range m {
		if i.Role == role && (i.Sample == "" || i.Sample == "0") {
			return i.Text
		}
	}
	return ""
}

// name returns an item's text. GDAL writes and reads texts escaped twice.
func (m metaItems) name(name string) string {
	for _, i := range m {
		if i.Name == name {
			return unescape.Replace(i.Text)
		}
	}
	return ""
}

var (
	escape   = strings.NewReplacer("&", "&amp;", "<", "&lt;", ">", "&gt;", `"`, "&quot;")
	unescape = strings.NewReplacer("&amp;", "&", "&lt;", "<", "&gt;", ">", "&quot;", `"`, "&apos;", "'")
)

// meta takes over what a compiled map knows.
func (m metaItems) meta(f *raw) {
	for _, p := range []struct {
		dst  *string
		name string
	}{{&f.meta.VerticalDatum, itemDatum}, {&f.meta.Source, itemSource}, {&f.meta.Licence, itemLicence}} {
		if s := m.name(p.name); s != "" && s != terrain.Unstated {
			*p.dst = s
		}
	}
	if s, err := strconv.ParseFloat(m.name(itemSigma), 64); err == nil && s >= 0 && s-s == 0 {
		f.meta.SigmaM = s
	}
	if m.name(itemFormat) != "" {
		f.unit, f.vertical = Metre, Up
	}
}

// unitByName understands the ways files name units of height.
func unitByName(s string, def Unit) Unit {
	switch strings.ToLower(strings.TrimSpace(s)) {
	case "m", "metre", "metres", "meter", "meters":
		return Metre
	case "ft", "foot", "feet", "international_foot":
		return Foot
	case "us-ft", "us survey foot", "us survey feet", "us_survey_foot":
		return USSurveyFoot
	}
	return def
}
