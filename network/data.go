package network

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"hash"
	"math"
	"unsafe"

	"leadline/engine/geo"
)

// Data is a map as columns: what a compiled map file holds. There are four
// groups. Charts have one entry a chart. Vertices, knots and stations have
// several entries a chart: those of chart c are Start[c]:Start[c+1]. Links
// likewise. Nothing in it may be changed once a Map is made of it.
type Data struct {
	Origin geo.LonLat // of the frame
	CellM  float64    // width that no cell of level 0 exceeds

	Source, Licence, Note string

	// Charts.
	From, To []int32 // junctions
	Twin     []int32 // the same road the other way, -1 if that is not allowed
	Name     Words
	Ref      Words
	Class    Words
	Feature  Words
	Speed    []float32 // speed limit, m/s, 0 if unknown
	Flags    []uint8   // see the Flag constants
	Layer    []int8

	// Vertices: the polyline in the frame, and the true distance along it,
	// from 0 to the chart's length, strictly increasing.
	VertexStart        []int32
	East, North, Along []float64

	// Knots: the smoothed heading, linear between them; see headingKnots.
	KnotStart              []int32
	KnotAlong, KnotHeading []float32

	// Stations at equal distances of at most StationM, ends included, at least
	// two a chart: heading variance for the narrow and the wide window as
	// multiples of VarStep, and the height, if any chart has one (otherwise
	// both columns are empty).
	StationStart      []int32
	SpreadN, SpreadW  []uint16
	Height, HeightVar []float32

	// Links forward.
	LinkStart  []int32
	LinkTo     []int32
	LinkWeight []float64
}

// Words is a column of strings, of which many are alike: entry c is
// Text[Index[c]].
type Words struct {
	Index []int32
	Text  []string
}

// Of returns an entry.
func (w *Words) Of(chart int32) string { return w.Text[w.Index[chart]] }

// Flags of a chart.
const (
	FlagTunnel uint8 = 1 << iota
	FlagBridge
	FlagCircle // part of a roundabout
)

// StationM is the greatest distance between stations. Heading variance has
// features of the size of its window, 12 m and more; a third of its half
// follows them.
const StationM = 2.0

// VarStep is the unit of the stored heading variances: the largest possible,
// that of a uniform angle, in 65535 steps.
const VarStep = math.Pi * math.Pi / 3 / 65535

// Charts returns the number of charts.
func (d *Data) Charts() int { return len(d.From) }

// Fingerprint is the SHA-256, in hexadecimal, of everything in d but source,
// licence and note: each column's name, length and little-endian bytes in a
// fixed order, after the frame's origin and the cell width.
func (d *Data) Fingerprint() string {
	h := sha256.New()
	hashColumn(h, "frame", []float64{d.Origin.Lon, d.Origin.Lat, d.CellM})
	d.EachColumn(func(name string, bytes []byte) {
		hashColumn(h, name, bytes)
	})
	return hex.EncodeToString(h.Sum(nil))
}

func hashColumn[T any](h hash.Hash, name string, column []T) {
	b := Bytes(column)
	h.Write([]byte(name))
	h.Write([]byte{0})
	h.Write(binary.LittleEndian.AppendUint64(nil, uint64(len(b))))
	h.Write(b)
}

// Bytes returns the memory of a column of numbers.
func Bytes[T any](column []T) []byte {
	if len(column) == 0 {
		return nil
	}
	var t T
	return unsafe.Slice((*byte)(unsafe.Pointer(unsafe.SliceData(column))), len(column)*int(unsafe.Sizeof(t)))
}

// EachColumn calls f with every column's name and bytes in a fixed order.
func (d *Data) EachColumn(f func(name string, bytes []byte)) {
	f("from", Bytes(d.From))
	f("to", Bytes(d.To))
	f("twin", Bytes(d.Twin))
	for _, w := range []struct {
		name string
		*Words
	}{{"name", &d.Name}, {"ref", &d.Ref}, {"class", &d.Class}, {"feature", &d.Feature}} {
		f(w.name, Bytes(w.Index))
		f(w.name+" text", textBytes(w.Text))
	}
	f("speed", Bytes(d.Speed))
	f("flags", d.Flags)
	f("layer", Bytes(d.Layer))
	f("vertex start", Bytes(d.VertexStart))
	f("east", Bytes(d.East))
	f("north", Bytes(d.North))
	f("along", Bytes(d.Along))
	f("knot start", Bytes(d.KnotStart))
	f("knot along", Bytes(d.KnotAlong))
	f("knot heading", Bytes(d.KnotHeading))
	f("station start", Bytes(d.StationStart))
	f("narrow spread", Bytes(d.SpreadN))
	f("wide spread", Bytes(d.SpreadW))
	f("height", Bytes(d.Height))
	f("height variance", Bytes(d.HeightVar))
	f("link start", Bytes(d.LinkStart))
	f("link to", Bytes(d.LinkTo))
	f("link weight", Bytes(d.LinkWeight))
}

// textBytes is the strings one after another, each after its length, so that
// no two lists have the same bytes.
func textBytes(text []string) []byte {
	var b []byte
	for _, s := range text {
		b = binary.LittleEndian.AppendUint32(b, uint32(len(s)))
		b = append(b, s...)
	}
	return b
}

// Check reports the first thing that makes d no map: what Sample and the
// filter rely on without looking again. It takes time linear in the columns.
func (d *Data) Check() error {
	n := d.Charts()
	if err := d.Origin.Check(); err != nil {
		return fmt.Errorf("frame origin: %w", err)
	}
	if n == 0 {
		return fmt.Errorf("there are no edges")
	}
	if !(d.CellM >= 0.05 && d.CellM <= 1000) {
		return fmt.Errorf("cell width %v m is not between 0.05 and 1000 m", d.CellM)
	}
	for _, c := range []struct {
		name string
		n    int
	}{
		{"to", len(d.To)},
		{"twin", len(d.Twin)},
		{"name", len(d.Name.Index)},
		{"ref", len(d.Ref.Index)},
		{"class", len(d.Class.Index)},
		{"feature", len(d.Feature.Index)},
		{"speed", len(d.Speed)},
		{"flags", len(d.Flags)},
		{"layer", len(d.Layer)},
	} {
		if c.n != n {
			return fmt.Errorf("column %s has %d entries, want %d, one an edge", c.name, c.n, n)
		}
	}
	for _, c := range []struct {
		name    string
		start   []int32
		least   int32
		columns []int
	}{
		{"vertex", d.VertexStart, 2, []int{len(d.East), len(d.North), len(d.Along)}},
		{"knot", d.KnotStart, 2, []int{len(d.KnotAlong), len(d.KnotHeading)}},
		{"station", d.StationStart, 2, []int{len(d.SpreadN), len(d.SpreadW)}},
		{"link", d.LinkStart, 0, []int{len(d.LinkTo), len(d.LinkWeight)}},
	} {
		if err := checkStart(c.name, c.start, n, c.least, c.columns); err != nil {
			return err
		}
	}
	if len(d.Height) != len(d.HeightVar) || (len(d.Height) != 0 && len(d.Height) != len(d.SpreadN)) {
		return fmt.Errorf("height columns have %d and %d entries, want none or %d", len(d.Height), len(d.HeightVar), len(d.SpreadN))
	}
	for c := range n {
		if err := d.checkChart(c); err != nil {
			return fmt.Errorf("edge %d: %w", c, err)
		}
	}
	for i := range d.SpreadN {
		if d.SpreadN[i] == 0 || d.SpreadW[i] == 0 {
			return fmt.Errorf("station %d: the heading variance is 0", i)
		}
	}
	for i, h := range d.HeightVar {
		if !(h >= 0) || math.IsInf(float64(h), 0) || math.IsInf(float64(d.Height[i]), 0) {
			return fmt.Errorf("station %d: height %v m with variance %v m²", i, d.Height[i], h)
		}
	}
	return nil
}

func checkStart(name string, start []int32, n int, least int32, columns []int) error {
	if len(start) != n+1 || start[0] != 0 {
		return fmt.Errorf("%s offsets: %d entries beginning with %v, want %d beginning with 0", name, len(start), start[:min(1, len(start))], n+1)
	}
	for c := range n {
		if start[c+1]-start[c] < least || start[c+1] < start[c] {
			return fmt.Errorf("edge %d: %s offsets go from %d to %d, want at least %d", c, name, start[c], start[c+1], least)
		}
	}
	for _, l := range columns {
		if l != int(start[n]) {
			return fmt.Errorf("a %s column has %d entries, but the offsets end at %d", name, l, start[n])
		}
	}
	return nil
}

// farM bounds coordinates: no place is farther from the frame's origin.
const farM = 2.1e7

func (d *Data) checkChart(c int) error {
	n := int32(d.Charts())
	if d.From[c] < 0 || d.To[c] < 0 || d.From[c] >= 2*n || d.To[c] >= 2*n {
		return fmt.Errorf("junctions %d and %d are not among the possible %d", d.From[c], d.To[c], 2*n)
	}
	if t := d.Twin[c]; t < -1 || t >= n || t == int32(c) || (t >= 0 && d.Twin[t] != int32(c)) {
		return fmt.Errorf("twin %d is not another edge's, or that one's twin is another", t)
	}
	for _, w := range [4]*Words{&d.Name, &d.Ref, &d.Class, &d.Feature} {
		if i := w.Index[c]; i < 0 || int(i) >= len(w.Text) {
			return fmt.Errorf("text %d is not among the %d", i, len(w.Text))
		}
	}
	if v := d.Speed[c]; !(v >= 0 && v <= 1000) {
		return fmt.Errorf("speed limit %v m/s", v)
	}
	a, b := d.VertexStart[c], d.VertexStart[c+1]
	for i := a; i < b; i++ {
		if !(math.Abs(d.East[i]) <= farM && math.Abs(d.North[i]) <= farM) {
			return fmt.Errorf("vertex %d at %v, %v m is not in the frame", i-a, d.East[i], d.North[i])
		}
		if i == a && d.Along[i] != 0 || i > a && !(d.Along[i] > d.Along[i-1]) || !(d.Along[i] <= MaxLengthM) {
			return fmt.Errorf("vertex %d lies %v m along the edge, which does not rise from 0", i-a, d.Along[i])
		}
	}
	if cells := d.Along[b-1] / d.CellM; !(cells < math.MaxInt32/2) {
		return fmt.Errorf("%v m in cells of %v m are too many", d.Along[b-1], d.CellM)
	}
	a, b = d.KnotStart[c], d.KnotStart[c+1]
	for i := a; i < b; i++ {
		if i == a && d.KnotAlong[i] != 0 || i > a && !(d.KnotAlong[i] > d.KnotAlong[i-1]) ||
			!(math.Abs(float64(d.KnotHeading[i])) <= 1e7) {
			return fmt.Errorf("heading knot %d: heading %v at %v m", i-a, d.KnotHeading[i], d.KnotAlong[i])
		}
	}
	a, b = d.LinkStart[c], d.LinkStart[c+1]
	sum := 0.0
	for i := a; i < b; i++ {
		if d.LinkTo[i] < 0 || d.LinkTo[i] >= n || !(d.LinkWeight[i] > 0 && d.LinkWeight[i] <= 1) {
			return fmt.Errorf("link %d: to edge %d with weight %v", i-a, d.LinkTo[i], d.LinkWeight[i])
		}
		sum += d.LinkWeight[i]
	}
	// Weights are fractions of small numbers: a few roundings off at most.
	if a < b && !(math.Abs(sum-1) < 1e-12*float64(b-a)) {
		return fmt.Errorf("the weights of its links sum to %v, not 1", sum)
	}
	return nil
}
