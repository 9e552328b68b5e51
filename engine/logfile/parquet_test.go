package logfile

import (
	"bytes"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/parquet-go/parquet-go"

	"leadline/engine/sensor"
)

// written is rows as a Parquet file has them.
func written[T any](t testing.TB, rows ...T) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := parquet.Write(&b, rows); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// TestParquetTable: a Parquet file is read as the CSV table with its columns would
// be: times of any unit, integers, floats and texts, what is missing, groups; lists are
// left out.
func TestParquetTable(t *testing.T) {
	type row struct {
		Time  int64    `parquet:"t,timestamp(microsecond)"`
		Odo   float32  `parquet:"odo"`
		Turn  *float64 `parquet:"turn,optional"`
		Which string   `parquet:"which"`
		Wheel struct {
			Ticks int32 `parquet:"ticks"`
		} `parquet:"wheel"`
		List []int64 `parquet:"list"`
	}
	var rows []row
	for i := range 1000 { // more than are read at a time
		r := row{Time: int64(at("12:00:00"))/1000 + int64(i)*1e6, Odo: float32(i) * 10.5, Which: "a \"b\"\nc", List: []int64{1, 2}}
		r.Wheel.Ticks = int32(i)
		if i%2 == 0 {
			turn := float64(i) / 100
			r.Turn = &turn
		}
		rows = append(rows, r)
	}
	c, err := ParseColumns("c", []byte(`
time: {column: t, format: rfc3339}
sensors:
- {kind: travel, fields: {distance_m: {column: odo, counter: true}, sigma_m: {value: 0.1}}}
- {kind: turn, fields: {angle_deg: {column: turn, rate: instant, unit: deg/s}, sigma_deg: {value: 0.1}}}
- {name: ticks, kind: travel, when: {column: which, equals: "a \"b\" c"}, fields: {distance_m: {column: wheel.ticks, counter: true}, sigma_m: {value: 0.1}}}
`))
	if err != nil {
		t.Fatal(err)
	}
	g := &got{}
	g.tally, err = ReadParquet(bytes.NewReader(written(t, rows...)), "x", c, g.emit)
	g.sane(t, err)
	if err != nil {
		t.Fatal(err)
	}
	n := map[string]int{}
	for _, ev := range g.events {
		n[ev.Sensor]++
		if m, ok := ev.Measurement.(sensor.Travel); ok && ev.Sensor == "travel" && math.Abs(m.DistanceM-10.5) > 1e-3 {
			t.Fatalf("%+v", ev)
		}
	}
	if n["travel"] != 999 || n["ticks"] != 999 || n["turn"] < 490 || len(g.tally.Refused) > 0 {
		t.Errorf("%v, %+v", n, g.tally)
	}
	if _, err := ReadParquet(bytes.NewReader(written(t, struct{ A int64 }{1})), "x", c, g.emit); err == nil || !strings.Contains(err.Error(), "t") || strings.Contains(err.Error(), "\n") {
		t.Errorf("without its columns: %v", err)
	}
}

// TestParquetTrack: positions as truths, and as fixes.
func TestParquetTrack(t *testing.T) {
	type row struct {
		Time time.Time `parquet:"time,timestamp(nanosecond)"`
		Lon  float64   `parquet:"lon_deg"`
		Lat  float64   `parquet:"lat_deg"`
	}
	first := time.Unix(0, int64(at("12:00:00.000000007"))).UTC()
	data := written(t, row{first, -30, 45}, row{first.Add(time.Second), -30.001, 45.001}, row{first, 400, 45})
	for _, truth := range []bool{true, false} {
		g := &got{}
		var err error
		g.tally, err = ReadParquetTrack(bytes.NewReader(data), "x", truth, g.emit)
		g.sane(t, err)
		if err != nil || len(g.truths)+len(g.events) != 2 || g.tally.Unusable() != 1 || (len(g.truths) == 2) != truth {
			t.Fatalf("truth %v: %d truths, %d events, %+v, %v", truth, len(g.truths), len(g.events), g.tally, err)
		}
		if truth && g.truths[0].Time != sensor.Time(first.UnixNano()) {
			t.Errorf("%v", g.truths[0])
		}
		if !truth && g.events[0].Measurement.(sensor.Fix).SigmaM != trackSigmaM {
			t.Errorf("%v", g.events[0])
		}
	}
	for what, bad := range map[string][]byte{
		"columns time": written(t, struct{ A int64 }{1}),
		"no Parquet":   []byte("PAR1 and nothing"),
		"no Parquet f": data[:len(data)-20],
	} {
		if _, err := ReadParquetTrack(bytes.NewReader(bad), "x", true, (&got{}).emit); err == nil || !strings.Contains(err.Error(), what) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%v, want %q", err, what)
		}
	}
}

// FuzzReadParquet: whatever the bytes, reading ends with records or one line that says
// why not.
func FuzzReadParquet(f *testing.F) {
	type row struct {
		Time int64    `parquet:"time,timestamp(millisecond)"`
		Lon  float64  `parquet:"lon"`
		Lat  float64  `parquet:"lat"`
		H    *float64 `parquet:"height_m,optional"`
	}
	f.Add(written(f, row{1, 2, 3, nil}, row{2, 2, 3, nil}))
	f.Fuzz(func(t *testing.T, data []byte) {
		g := &got{}
		var err error
		g.tally, err = ReadParquetTrack(bytes.NewReader(data), "x", true, g.emit)
		g.sane(t, err)
	})
}
