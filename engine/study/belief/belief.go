// Package belief writes a whole belief for a geographic information system: as
// GeoTIFF on a plane, as GeoJSON or Parquet on roads.
package belief

import (
	"bytes"
	"cmp"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"time"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Belief is one spelled out, at a time.
type Belief struct {
	TimeNS  int64
	Drive   string
	Cloud   filter.Cloud
	Space   filter.Space
	Level   int            // of the cells on roads
	Lattice filter.Lattice // on a plane
}

// Suffix is that of the file that Write makes.
func (b *Belief) Suffix() string {
	if _, ok := b.Space.(filter.LineSpace); ok {
		return ".geojson"
	}
	return ".tif"
}

// Write writes the belief in the form that its space has.
func (b *Belief) Write(w io.Writer) error {
	if lines, ok := b.Space.(filter.LineSpace); ok {
		return b.writeGeoJSON(w, lines)
	}
	return b.writeGeoTIFF(w)
}

// mostCells bounds a file. A grid with more is made coarser; of cells on roads the
// lightest are left out, and their probability is said.
const mostCells = 1 << 22

func (b *Belief) stamp() string { return time.Unix(0, b.TimeNS).UTC().Format(time.RFC3339Nano) }

// grid gathers a belief on a plane in square cells, row by row from the north: each
// cell's probability, that of Gaussians by their means. It is the lattice's cells,
// or by times as many a side if they are too many.
func (b *Belief) grid() (mass []float64, cols, rows int, cellM float64, northWest geo.Point) {
	l := b.Lattice
	at := func(v, origin float64, by int) int { return int(math.Floor((v-origin)/l.SpacingM+0.5)) >> by }
	c := &b.Cloud
	for by := 0; ; by++ {
		west, east, south, north := math.MaxInt, math.MinInt, math.MaxInt, math.MinInt
		for i := range c.Mass {
			col, row := at(c.East[i], l.Origin.E, by), at(c.North[i], l.Origin.N, by)
			west, east, south, north = min(west, col), max(east, col), min(south, row), max(north, row)
		}
		if cols, rows = east-west+1, north-south+1; float64(cols)*float64(rows) > mostCells {
			continue
		}
		mass = make([]float64, cols*rows)
		for i, m := range c.Mass {
			mass[(north-at(c.North[i], l.Origin.N, by))*cols+at(c.East[i], l.Origin.E, by)-west] += m
		}
		cellM = l.SpacingM * float64(int(1)<<by)
		// A lattice's origin is the middle of a cell.
		northWest = l.Origin.Add(geo.Point{E: (float64(west<<by) - 0.5) * l.SpacingM, N: (float64((north+1)<<by) - 0.5) * l.SpacingM})
		return mass, cols, rows, cellM, northWest
	}
}

// writeGeoTIFF writes one strip of float32 in the map's frame, a transverse
// Mercator on WGS 84. Source of tags and keys: OGC GeoTIFF 1.1.
func (b *Belief) writeGeoTIFF(w io.Writer) error {
	if len(b.Cloud.Mass) == 0 {
		return errors.New("the belief is empty")
	}
	mass, cols, rows, cellM, nw := b.grid()
	lon, lat := b.Space.Frame().Origin().Degrees()
	text := fmt.Sprintf("probability of each cell: %s at %s", ascii(b.Drive), b.stamp())
	const citation = "map frame: transverse Mercator on WGS 84|"
	doubles := []float64{lon, lat, 1, 0, 0}
	keys := []uint16{
		1, 1, 0, 13,
		1024, 0, 1, 1, // GTModelType: projected
		1025, 0, 1, 1, // GTRasterType: pixel is area
		1026, 34737, uint16(len(citation)), 0, // GTCitation
		2048, 0, 1, 4326, // GeodeticCRS: WGS 84
		3072, 0, 1, 32767, // ProjectedCRS: user-defined
		3074, 0, 1, 32767, // Projection: user-defined
		3075, 0, 1, 1, // ProjMethod: transverse Mercator
		3076, 0, 1, 9001, // ProjLinearUnits: metre
		3080, 34736, 1, 0, // ProjNatOriginLong
		3081, 34736, 1, 1, // ProjNatOriginLat
		3082, 34736, 1, 3, // ProjFalseEasting
		3083, 34736, 1, 4, // ProjFalseNorthing
		3092, 34736, 1, 2, // ProjScaleAtNatOrigin
	}
	order := binary.LittleEndian
	type entry struct {
		tag, kind uint16
		value     any // uint16 or uint32 for one that fits, bytes, or a slice
	}
	entries := []entry{
		{256, 4, uint32(cols)},
		{257, 4, uint32(rows)},
		{258, 3, uint16(32)},
		{259, 3, uint16(1)}, // uncompressed
		{262, 3, uint16(1)}, // black is zero
		{270, 2, []byte(text + "\x00")},
		{273, 4, uint32(0)}, // the strip's place
		{277, 3, uint16(1)},
		{278, 4, uint32(rows)},
		{279, 4, uint32(4 * cols * rows)},
		{339, 3, uint16(3)}, // float
		{33550, 12, []float64{cellM, cellM, 0}},
		{33922, 12, []float64{0, 0, 0, nw.E, nw.N, 0}},
		{34735, 3, keys},
		{34736, 12, doubles},
		{34737, 2, []byte(citation + "\x00")},
	}
	var head, rest bytes.Buffer
	put := func(v any) { // into memory, of sizes that are known
		if err := binary.Write(&head, order, v); err != nil {
			panic("belief: " + err.Error())
		}
	}
	size := 8 + 2 + 12*len(entries) + 4
	head.WriteString("II")
	put(uint16(42))
	put(uint32(8))
	put(uint16(len(entries)))
	strip := -1
	for _, e := range entries {
		put(e.tag)
		put(e.kind)
		switch v := e.value.(type) {
		case uint16:
			put(uint32(1))
			put(v)
			put(uint16(0))
		case uint32:
			put(uint32(1))
			if e.tag == 273 {
				strip = head.Len()
			}
			put(v)
		default:
			if rest.Len()%2 == 1 {
				rest.WriteByte(0)
			}
			put(uint32(binary.Size(v) / map[uint16]int{2: 1, 3: 2, 12: 8}[e.kind]))
			put(uint32(size + rest.Len()))
			if err := binary.Write(&rest, order, v); err != nil {
				return err
			}
		}
	}
	put(uint32(0))
	for rest.Len()%4 != 0 {
		rest.WriteByte(0)
	}
	order.PutUint32(head.Bytes()[strip:], uint32(size+rest.Len()))
	out := append(head.Bytes(), rest.Bytes()...)
	for _, m := range mass {
		out = order.AppendUint32(out, math.Float32bits(float32(m)))
	}
	_, err := w.Write(out)
	return err
}

// ascii is text as TIFF has it.
func ascii(s string) string {
	out := []byte(s)
	for i, c := range out {
		if c < ' ' || c > '~' {
			out[i] = '?'
		}
	}
	return string(out)
}

// road is a cell of a directed edge.
type road struct {
	chart, cell int32
	mass        float64
}

type feature struct {
	Type       string `json:"type"`
	Properties any    `json:"properties"`
	Geometry   any    `json:"geometry"`
}

type line struct {
	Type        string       `json:"type"`
	Coordinates [][2]float64 `json:"coordinates"`
}

// roadCells are the cells of a belief on roads, the heaviest first, with where each
// begins and ends; what is left out of them is rest. Gaussians count in the cell of
// their mean.
func (b *Belief) roadCells(space filter.LineSpace) (cells []roadCell, rest float64) {
	const mostLines = 200_000
	lines := space.Lines(b.Level)
	sums := map[road]float64{}
	for i, m := range b.Cloud.Mass {
		chart := b.Cloud.Chart[i]
		cell := int32(b.Cloud.AlongM[i] / lines.WidthM[chart])
		sums[road{chart: chart, cell: min(max(cell, 0), lines.Cells[chart]-1)}] += m
	}
	all := make([]road, 0, len(sums))
	for r, m := range sums {
		all = append(all, road{r.chart, r.cell, m})
	}
	slices.SortFunc(all, func(x, y road) int {
		return cmp.Or(cmp.Compare(y.mass, x.mass), cmp.Compare(x.chart, y.chart), cmp.Compare(x.cell, y.cell))
	})
	for len(all) > mostLines {
		rest += all[len(all)-1].mass
		all = all[:len(all)-1]
	}
	var charts []int32
	var along []float64
	for _, r := range all {
		width := lines.WidthM[r.chart]
		charts = append(charts, r.chart, r.chart)
		along = append(along, float64(r.cell)*width, float64(r.cell+1)*width)
	}
	var at filter.Columns
	at.Resize(filter.WantPosition, 1, len(charts))
	space.Sample(&at, charts, along, 0)
	frame := space.Frame()
	position := func(i int) [2]float64 {
		lon, lat := frame.Inverse(geo.Point{E: at.East[i], N: at.North[i]}).Degrees()
		return [2]float64{math.Round(lon*1e8) / 1e8, math.Round(lat*1e8) / 1e8}
	}
	for i, r := range all {
		cells = append(cells, roadCell{r, along[2*i], along[2*i+1], position(2 * i), position(2*i + 1)})
	}
	return cells, rest
}

// roadCell is a cell with where it is: metres along its edge, and degrees.
type roadCell struct {
	road
	fromM, toM float64
	from, to   [2]float64
}

// writeGeoJSON writes a line for each cell, the heaviest first, with its
// probability.
func (b *Belief) writeGeoJSON(w io.Writer, space filter.LineSpace) error {
	cells, rest := b.roadCells(space)
	collection := struct {
		Type     string    `json:"type"`
		Drive    string    `json:"drive"`
		Time     string    `json:"time"`
		Rest     float64   `json:"probability_left_out"`
		Features []feature `json:"features"`
	}{"FeatureCollection", b.Drive, b.stamp(), rest, []feature{}}
	for _, r := range cells {
		collection.Features = append(collection.Features, feature{
			"Feature",
			map[string]any{"edge": r.chart, "from_m": r.fromM, "to_m": r.toM, "probability": r.mass, "time": b.stamp()},
			line{"LineString", [][2]float64{r.from, r.to}},
		})
	}
	return json.NewEncoder(w).Encode(collection)
}
