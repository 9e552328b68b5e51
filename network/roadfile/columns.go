package roadfile

import (
	"fmt"
	"unsafe"

	"github.com/apache/arrow-go/v18/arrow"
	"github.com/apache/arrow-go/v18/arrow/array"
	"github.com/apache/arrow-go/v18/arrow/memory"

	"leadline/network"
)

// A compiled map is an Arrow IPC file with one record batch, of one row a
// directed edge. The layout is given by one list of columns, which writing and
// opening both follow.
//
// Why Arrow IPC and not GeoParquet: the file is the map. Its buffers are
// mapped and used where they lie, so that opening costs one pass over them for
// checksums and bounds. The same columns as Parquet, read into memory on two
// cores, next to BenchmarkOpen:
//
//	map        cells   Arrow, open       Parquet, read     Parquet zstd, read
//	Andorra    0.9 M   4.4 MB,  2.6 ms   3.6 MB,  26 ms    3.3 MB,   26 ms
//	a city     2.2 M  11.8 MB,  9.5 ms   8.1 MB,  65 ms    7.0 MB,   73 ms
//	Delaware  30.7 M   107 MB,   73 ms    60 MB, 538 ms     43 MB, 1008 ms
//
// Arrow's buffers also need no memory of their own: processes that use one map
// share its pages.

// column is one column of the file: where it is in a network.Data.
type column struct {
	name  string
	about string // for people who open the file with other tools
	// put returns the type and content; get takes the content.
	put func(d *network.Data) arrow.ArrayData
	get func(d *network.Data, a arrow.ArrayData) error
	// optional columns are left out when they are empty.
	optional func(d *network.Data) bool
}

// columns lists the columns in the order of the file.
var columns = []column{
	plain("from", "junction where the edge begins", arrow.PrimitiveTypes.Int32, func(d *network.Data) *[]int32 { return &d.From }),
	plain("to", "junction where it ends", arrow.PrimitiveTypes.Int32, func(d *network.Data) *[]int32 { return &d.To }),
	plain("twin", "row of the same road in the other direction, -1 if none", arrow.PrimitiveTypes.Int32, func(d *network.Data) *[]int32 { return &d.Twin }),
	words("name", "name of the road", func(d *network.Data) *network.Words { return &d.Name }),
	words("ref", "number of the road", func(d *network.Data) *network.Words { return &d.Ref }),
	words("class", "highway tag of the source", func(d *network.Data) *network.Words { return &d.Class }),
	words("feature", "feature of the source", func(d *network.Data) *network.Words { return &d.Feature }),
	plain("speed_limit_mps", "speed limit in m/s, 0 if unknown", arrow.PrimitiveTypes.Float32, func(d *network.Data) *[]float32 { return &d.Speed }),
	plain("flags", "1 tunnel, 2 bridge, 4 roundabout, added up", arrow.PrimitiveTypes.Uint8, func(d *network.Data) *[]uint8 { return &d.Flags }),
	plain("layer", "layer tag of the source", arrow.PrimitiveTypes.Int8, func(d *network.Data) *[]int8 { return &d.Layer }),
	geometry(),
	list("along_m", "true distance of each vertex from the start", arrow.PrimitiveTypes.Float64, vertexStart, func(d *network.Data) *[]float64 { return &d.Along }),
	list("heading_at_m", "places where the smoothed heading has a corner, as distances from the start", arrow.PrimitiveTypes.Float32, knotStart, func(d *network.Data) *[]float32 { return &d.KnotAlong }),
	list("heading_rad", "smoothed heading there, radians clockwise from the frame's north, unwrapped", arrow.PrimitiveTypes.Float32, knotStart, func(d *network.Data) *[]float32 { return &d.KnotHeading }),
	list("heading_var_narrow", "variance of heading at equally spaced stations, ends included, in units of π²/3/65535 rad²: narrow window", arrow.PrimitiveTypes.Uint16, stationStart, func(d *network.Data) *[]uint16 { return &d.SpreadN }),
	list("heading_var_wide", "the same, wide window", arrow.PrimitiveTypes.Uint16, stationStart, func(d *network.Data) *[]uint16 { return &d.SpreadW }),
	optional(list("height_m", "height at the stations, NaN where unknown", arrow.PrimitiveTypes.Float32, stationStart, func(d *network.Data) *[]float32 { return &d.Height })),
	optional(list("height_var_m2", "variance of the height's error", arrow.PrimitiveTypes.Float32, stationStart, func(d *network.Data) *[]float32 { return &d.HeightVar })),
	list("next", "rows where the edge leads on to", arrow.PrimitiveTypes.Int32, linkStart, func(d *network.Data) *[]int32 { return &d.LinkTo }),
	list("next_weight", "the probability of each", arrow.PrimitiveTypes.Float64, linkStart, func(d *network.Data) *[]float64 { return &d.LinkWeight }),
}

func vertexStart(d *network.Data) *[]int32  { return &d.VertexStart }
func knotStart(d *network.Data) *[]int32    { return &d.KnotStart }
func stationStart(d *network.Data) *[]int32 { return &d.StationStart }
func linkStart(d *network.Data) *[]int32    { return &d.LinkStart }

func optional(c column) column {
	c.optional = func(d *network.Data) bool { return len(d.Height) == 0 }
	return c
}

func plain[T any](name, about string, t arrow.DataType, of func(*network.Data) *[]T) column {
	return column{
		name: name, about: about,
		put: func(d *network.Data) arrow.ArrayData { return primitive(t, *of(d)) },
		get: func(d *network.Data, a arrow.ArrayData) (err error) {
			*of(d), err = numbers[T](a, t)
			return err
		},
	}
}

func list[T any](name, about string, t arrow.DataType, start func(*network.Data) *[]int32, of func(*network.Data) *[]T) column {
	lt := arrow.ListOfNonNullable(t)
	return column{
		name: name, about: about,
		put: func(d *network.Data) arrow.ArrayData { return lists(lt, *start(d), primitive(t, *of(d))) },
		get: func(d *network.Data, a arrow.ArrayData) error {
			inner, err := listed(a, lt, start(d))
			if err != nil {
				return err
			}
			*of(d), err = numbers[T](inner, t)
			return err
		},
	}
}

// geometry is the polyline as GeoArrow lays it out: lists of x, y pairs kept
// as two arrays.
func geometry() column {
	pair := arrow.StructOf(
		arrow.Field{Name: "x", Type: arrow.PrimitiveTypes.Float64},
		arrow.Field{Name: "y", Type: arrow.PrimitiveTypes.Float64},
	)
	lt := arrow.ListOfNonNullable(pair)
	return column{
		name: "geometry", about: "vertices in metres east and north in the map's frame",
		put: func(d *network.Data) arrow.ArrayData {
			xy := array.NewData(pair, len(d.East), []*memory.Buffer{nil}, []arrow.ArrayData{
				primitive(arrow.PrimitiveTypes.Float64, d.East), primitive(arrow.PrimitiveTypes.Float64, d.North),
			}, 0, 0)
			return lists(lt, d.VertexStart, xy)
		},
		get: func(d *network.Data, a arrow.ArrayData) error {
			xy, err := listed(a, lt, &d.VertexStart)
			if err != nil {
				return err
			}
			if len(xy.Children()) != 2 || xy.NullN() != 0 || xy.Offset() != 0 {
				return fmt.Errorf("its pairs are not two columns without gaps")
			}
			if d.East, err = numbers[float64](xy.Children()[0], arrow.PrimitiveTypes.Float64); err != nil {
				return err
			}
			d.North, err = numbers[float64](xy.Children()[1], arrow.PrimitiveTypes.Float64)
			return err
		},
	}
}

// words is a dictionary-encoded column of strings.
func words(name, about string, of func(*network.Data) *network.Words) column {
	t := &arrow.DictionaryType{IndexType: arrow.PrimitiveTypes.Int32, ValueType: arrow.BinaryTypes.String}
	return column{
		name: name, about: about,
		put: func(d *network.Data) arrow.ArrayData {
			w := of(d)
			b := array.NewStringBuilder(memory.DefaultAllocator)
			b.AppendValues(w.Text, nil)
			index := primitive(arrow.PrimitiveTypes.Int32, w.Index)
			return array.NewDataWithDictionary(t, len(w.Index), index.Buffers(), 0, 0, b.NewArray().Data().(*array.Data))
		},
		get: func(d *network.Data, a arrow.ArrayData) (err error) {
			w := of(d)
			if !arrow.TypeEqual(a.DataType(), t) || a.Dictionary() == nil {
				return fmt.Errorf("its type is %v, want %v", a.DataType(), t)
			}
			if w.Index, err = raw[int32](a, 1, a.Len()); err != nil {
				return err
			}
			text, err := dictionaryText(a.Dictionary())
			w.Text = text
			return err
		},
	}
}

// dictionaryText copies the strings, which are few: strings that refer to a
// mapped file would outlive it unnoticed.
func dictionaryText(a arrow.ArrayData) ([]string, error) {
	if !arrow.TypeEqual(a.DataType(), arrow.BinaryTypes.String) || a.Offset() != 0 || a.NullN() != 0 {
		return nil, fmt.Errorf("its words are %v with %d gaps, want strings", a.DataType(), a.NullN())
	}
	if a.Len() == 0 {
		return nil, nil
	}
	start, err := raw[int32](a, 1, a.Len()+1)
	if err != nil {
		return nil, err
	}
	var all []byte
	if b := a.Buffers()[2]; b != nil {
		all = b.Bytes()
	}
	text := make([]string, a.Len())
	for i := range text {
		from, to := start[i], start[i+1]
		if from < 0 || to < from || int(to) > len(all) {
			return nil, fmt.Errorf("word %d lies at bytes %d to %d of %d", i, from, to, len(all))
		}
		text[i] = string(all[from:to])
	}
	return text, nil
}

func primitive[T any](t arrow.DataType, x []T) arrow.ArrayData {
	return array.NewData(t, len(x), []*memory.Buffer{nil, memory.NewBufferBytes(network.Bytes(x))}, nil, 0, 0)
}

func lists(t arrow.DataType, start []int32, inner arrow.ArrayData) arrow.ArrayData {
	return array.NewData(t, len(start)-1, []*memory.Buffer{nil, memory.NewBufferBytes(network.Bytes(start))},
		[]arrow.ArrayData{inner}, 0, 0)
}

// listed checks a list column and takes its offsets, which several columns
// share and must agree on.
func listed(a arrow.ArrayData, want arrow.DataType, start *[]int32) (arrow.ArrayData, error) {
	if !arrow.TypeEqual(a.DataType(), want) || len(a.Children()) != 1 {
		return nil, fmt.Errorf("its type is %v, want %v", a.DataType(), want)
	}
	s, err := raw[int32](a, 1, a.Len()+1)
	if err != nil {
		return nil, err
	}
	if *start == nil {
		*start = s
		return a.Children()[0], nil
	}
	if len(s) != len(*start) {
		return nil, fmt.Errorf("it has %d lists, want %d", len(s)-1, len(*start)-1)
	}
	for i := range s {
		if s[i] != (*start)[i] {
			return nil, fmt.Errorf("its list %d begins at %d, that of the column before at %d", i, s[i], (*start)[i])
		}
	}
	return a.Children()[0], nil
}

// numbers returns a column's values where they lie.
func numbers[T any](a arrow.ArrayData, want arrow.DataType) ([]T, error) {
	if !arrow.TypeEqual(a.DataType(), want) {
		return nil, fmt.Errorf("its type is %v, want %v", a.DataType(), want)
	}
	return raw[T](a, 1, a.Len())
}

// raw returns a buffer's first n entries where they lie, or a copy if they are
// not aligned.
func raw[T any](a arrow.ArrayData, buffer, n int) ([]T, error) {
	if a.NullN() != 0 || a.Offset() != 0 {
		return nil, fmt.Errorf("it has %d gaps and begins at entry %d, want none and 0", a.NullN(), a.Offset())
	}
	if n == 0 {
		return nil, nil
	}
	var t T
	size := int(unsafe.Sizeof(t))
	if len(a.Buffers()) <= buffer || a.Buffers()[buffer] == nil || n < 0 || a.Buffers()[buffer].Len()/size < n {
		return nil, fmt.Errorf("its buffer is too short for %d entries", n)
	}
	b := a.Buffers()[buffer].Bytes()
	p := unsafe.Pointer(unsafe.SliceData(b))
	if uintptr(p)%unsafe.Alignof(t) != 0 {
		x := make([]T, n)
		copy(network.Bytes(x), b)
		return x, nil
	}
	return unsafe.Slice((*T)(p), n), nil
}
