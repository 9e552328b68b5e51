package heightfile

import (
	"bytes"
	"encoding/binary"
	"encoding/xml"
	"errors"
	"fmt"
	"hash/crc32"
	"math"
	"strconv"
	"strings"

	"leadline/terrain"
)

// ErrDamaged is returned by Open for a compiled map that is not as it was
// written.
var ErrDamaged = errors.New("the compiled map is damaged")

// Suffix is how the names of compiled height maps end.
const Suffix = ".heights.tif"

// Items of tag 42112 in a compiled map.
const (
	itemFormat      = "LEADLINE_FORMAT" // its value is formatName
	itemDatum       = "VERTICAL_DATUM"
	itemSigma       = "VERTICAL_SIGMA_M" // 0: unstated
	itemSource      = "SOURCE"
	itemLicence     = "LICENCE"
	itemFingerprint = "LEADLINE_FINGERPRINT_SHA256"
	itemRange       = "LEADLINE_HEIGHT_RANGE_M" // lowest and highest
	itemVoids       = "LEADLINE_VOIDS"          // samples
	itemKnown       = "LEADLINE_KNOWN"          // first and last column, first and last row
	itemHeaderCRC   = "LEADLINE_HEADER_CRC32C"  // of all bytes before the first strip, with these eight digits as zeros
	itemStripCRC    = "LEADLINE_STRIP_CRC32C"   // of each strip
)

// formatName is the version of the items above; a reader takes no other.
const formatName = "heights 1"

var castagnoli = crc32.MakeTable(crc32.Castagnoli)

const zeroCRC = "00000000"

// Strips of a quarter mebibyte name the damaged place well and cost 9 bytes
// of checksum each; at most 4096 of them keep the header below 100 kB.
const (
	stripBytes = 1 << 18
	maxStrips  = 4096
)

func rowsPerStrip(g terrain.Grid) int {
	return max(1, stripBytes/(4*g.Cols), (g.Rows+maxStrips-1)/maxStrips)
}

func strips(g terrain.Grid) int {
	rps := rowsPerStrip(g)
	return (g.Rows + rps - 1) / rps
}

// header builds everything before the first strip. Its length does not depend
// on the checksums.
func header(r *terrain.Raster, crc []uint32) ([]byte, error) {
	g, m, s := r.Grid(), r.Meta(), r.Scan()
	f := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	sums := make([]string, len(crc))
	for i, c := range crc {
		sums[i] = fmt.Sprintf("%08x", c)
	}
	doc := metaDocument{}
	add := func(name, text string) {
		doc.Items = append(doc.Items, metaItem{Name: name, Text: escape.Replace(text)})
	}
	add(itemFormat, formatName)
	add(itemDatum, m.VerticalDatum)
	add(itemSigma, f(m.SigmaM))
	add(itemSource, m.Source)
	add(itemLicence, m.Licence)
	add(itemFingerprint, r.Fingerprint())
	add(itemRange, f(s.MinM)+" "+f(s.MaxM))
	add(itemVoids, strconv.Itoa(s.Voids))
	add(itemKnown, fmt.Sprint(s.Col0, s.Col1, s.Row0, s.Row1))
	add(itemHeaderCRC, zeroCRC)
	add(itemStripCRC, strings.Join(sums, " "))
	doc.Items = append(doc.Items, metaItem{Name: "UNITTYPE", Sample: "0", Role: "unittype", Text: "m"})
	text, err := xml.Marshal(doc)
	if err != nil {
		return nil, err
	}
	w := &ifdWriter{}
	w.longs(tagWidth, uint32(g.Cols))
	w.longs(tagHeight, uint32(g.Rows))
	w.shorts(tagBits, 32)
	w.shorts(tagCompression, 1)
	w.shorts(tagPhotometric, 1)
	w.text(tagDescription, "Heights in metres above: "+m.VerticalDatum)
	w.longs(tagStripOffsets, make([]uint32, len(crc))...)
	w.shorts(tagSamples, 1)
	rps := rowsPerStrip(g)
	w.longs(tagRowsPerStrip, uint32(rps))
	lengths := make([]uint32, len(crc))
	for i := range lengths {
		lengths[i] = uint32(4 * g.Cols * min(rps, g.Rows-i*rps))
	}
	w.longs(tagStripBytes, lengths...)
	w.shorts(tagPlanar, 1)
	w.text(tagSoftware, "leadline")
	w.shorts(tagSampleFormat, 3)
	w.text(tagCopyright, m.Licence)
	w.doubles(tagPixelScale, g.StepX, -g.StepY, 0)
	w.doubles(tagTiepoint, 0, 0, 0, g.FirstX, g.FirstY, 0)
	keys, doubles := geoDirectory(g.CRS, m.VerticalDatum)
	w.shorts(tagGeoKeys, keys...)
	if len(doubles) > 0 {
		w.doubles(tagGeoDoubles, doubles...)
	}
	w.text(tagMetadata, string(text))
	w.text(tagNodata, "nan")
	out, offsets := w.finish(tagStripOffsets)
	for i := range crc {
		binary.LittleEndian.PutUint32(out[offsets+4*i:], uint32(len(out)+i*4*g.Cols*rps))
	}
	at, err := headerCRCPlace(out)
	if err != nil {
		return nil, err
	}
	copy(out[at:], fmt.Sprintf("%08x", crc32.Checksum(out, castagnoli)))
	return out, nil
}

// headerCRCPlace finds the eight digits of the header's own checksum.
func headerCRCPlace(b []byte) (int, error) {
	mark := []byte(`"` + itemHeaderCRC + `">`)
	at := bytes.Index(b, mark)
	if at < 0 || at+len(mark)+len(zeroCRC) > len(b) {
		return 0, fmt.Errorf("%w: it has no checksum %s", ErrDamaged, itemHeaderCRC)
	}
	return at + len(mark), nil
}

// verticalCode is the EPSG code of a vertical datum that has one, or 0.
func verticalCode(datum string) uint16 {
	for _, code := range []uint16{3855, 5773, 5703, 5714, 5701, 5621, 5783, 7837, 5798} {
		if verticalNames[int(code)] == datum {
			return code
		}
	}
	return 0
}

// geoDirectory makes GeoTIFF's keys. Samples are points, so that the first
// sample's place is the tie point itself, to the last bit.
func geoDirectory(crs terrain.CRS, datum string) (keys []uint16, doubles []float64) {
	code := func(id, v uint16) { keys = append(keys, id, 0, 1, v) }
	num := func(id uint16, v float64) {
		keys = append(keys, id, tagGeoDoubles, 1, uint16(len(doubles)))
		doubles = append(doubles, v)
	}
	tm, projected := crs.TM()
	if projected {
		code(keyModel, 1)
		code(keyRaster, 2)
		if crs.EPSG() != 0 {
			code(keyProjected, uint16(crs.EPSG()))
			code(keyLinearUnit, unitMetre)
		} else {
			base := uint16(4326)
			if tm.GRS80 {
				base = 4019
			}
			code(keyGeodetic, base)
			code(keyAngularUnit, unitDegree)
			code(keyProjected, userDefined)
			code(keyProjection, userDefined)
			code(keyMethod, methodTM)
			code(keyLinearUnit, unitMetre)
			num(keyNatOriginLon, tm.LonDeg)
			num(keyNatOriginLat, tm.LatDeg)
			num(keyFalseEasting, tm.FalseEastM)
			num(keyFalseNorthing, tm.FalseNorthM)
			num(keyScale, tm.Scale)
		}
	} else {
		code(keyModel, 2)
		code(keyRaster, 2)
		code(keyGeodetic, uint16(crs.EPSG()))
		code(keyAngularUnit, unitDegree)
	}
	if v := verticalCode(datum); v != 0 {
		code(keyVertical, v)
		code(keyVerticalUnit, unitMetre)
	}
	return append([]uint16{1, 1, 1, uint16(len(keys) / 4)}, keys...), doubles // GeoTIFF 1.1
}

// ifdWriter collects the tags of a little-endian classic TIFF, in ascending
// order.
type ifdWriter struct {
	entries []ifdEntry
}

type ifdEntry struct {
	tag, kind uint16
	count     uint32
	data      []byte
}

func (w *ifdWriter) add(tag, kind uint16, count int, data []byte) {
	if n := len(w.entries); n > 0 && w.entries[n-1].tag >= tag {
		panic("heightfile: tags out of order")
	}
	w.entries = append(w.entries, ifdEntry{tag, kind, uint32(count), data})
}

func (w *ifdWriter) shorts(tag uint16, v ...uint16) {
	var b []byte
	for _, x := range v {
		b = binary.LittleEndian.AppendUint16(b, x)
	}
	w.add(tag, 3, len(v), b)
}

func (w *ifdWriter) longs(tag uint16, v ...uint32) {
	var b []byte
	for _, x := range v {
		b = binary.LittleEndian.AppendUint32(b, x)
	}
	w.add(tag, 4, len(v), b)
}

func (w *ifdWriter) doubles(tag uint16, v ...float64) {
	var b []byte
	for _, x := range v {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(x))
	}
	w.add(tag, 12, len(v), b)
}

func (w *ifdWriter) text(tag uint16, s string) {
	b := append([]byte(s), 0)
	w.add(tag, 2, len(b), b)
}

// finish lays out header, directory and values, padded to a page, and says
// where the values of one tag lie.
func (w *ifdWriter) finish(tag uint16) (out []byte, at int) {
	le := binary.LittleEndian
	out = append(out, "II*\x00\x08\x00\x00\x00"...)
	out = le.AppendUint16(out, uint16(len(w.entries)))
	place := len(out) + 12*len(w.entries) + 4
	var values []byte
	for i, e := range w.entries {
		out = le.AppendUint16(out, e.tag)
		out = le.AppendUint16(out, e.kind)
		out = le.AppendUint32(out, e.count)
		if len(e.data) <= 4 {
			if e.tag == tag {
				at = len(out)
			}
			var inline [4]byte
			copy(inline[:], e.data)
			out = append(out, inline[:]...)
			continue
		}
		if e.tag == tag {
			at = place + len(values)
		}
		out = le.AppendUint32(out, uint32(place+len(values)))
		values = append(values, w.entries[i].data...)
		for len(values)%8 != 0 {
			values = append(values, 0)
		}
	}
	out = append(out, 0, 0, 0, 0) // no further image
	out = append(out, values...)
	const page = 4096
	return append(out, make([]byte, (page-len(out)%page)%page)...), at
}
