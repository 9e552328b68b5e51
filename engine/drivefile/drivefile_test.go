package drivefile

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"reflect"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

const head = `{"time":"2030-05-01T12:00:00Z","header":{"vehicle":"van","map":"town"}}` + "\n"

// records reads everything, or fails.
func records(t *testing.T, data []byte) []*Record {
	t.Helper()
	var recs []*Record
	for r := NewReader(bytes.NewReader(data), "test"); ; {
		rec, err := r.Read()
		if errors.Is(err, io.EOF) {
			return recs
		}
		if err != nil {
			t.Fatal(err)
		}
		recs = append(recs, rec)
	}
}

func written(t *testing.T, recs []*Record) []byte {
	t.Helper()
	var b bytes.Buffer
	w := NewWriter(&b)
	for _, rec := range recs {
		if err := w.Write(rec); err != nil {
			t.Fatal(err)
		}
	}
	return b.Bytes()
}

// TestEveryKind proves that a file with every kind of line survives reading
// and writing byte for byte, and so that the format is what it was.
func TestEveryKind(t *testing.T) {
	want, err := os.ReadFile("testdata/kinds.drive.jsonl")
	if err != nil {
		t.Fatal(err)
	}
	recs := records(t, want)
	if got := written(t, recs); !bytes.Equal(got, want) {
		t.Errorf("written:\n%s\nwant:\n%s", got, want)
	}
	kinds := map[string]bool{}
	for _, rec := range recs {
		if rec.Event != nil {
			kinds[rec.Event.Measurement.Kind()] = true
		}
	}
	if len(kinds) != 15 {
		t.Errorf("the file holds %d of 15 kinds", len(kinds))
	}
	if got := *recs[2].Event; got != (sensor.Event{
		Time: 1903867201e9, Sensor: "odo", Number: 1<<64 - 1,
		Measurement: sensor.Travel{Since: 1903867200e9, DistanceM: -13.37, SigmaM: 0.02},
	}) {
		t.Errorf("the odometer's line gave %+v", got)
	}
	start := recs[0].Header.Start
	if lon, lat := start.Point.Degrees(); start.SigmaM != 50 || geo.Rad(1.52) != start.Point.Lon || lat > 42.52 || lon > 1.53 {
		t.Errorf("the start is %+v", start)
	}
}

// TestRoundTrip proves that any measurement that was read is written so that
// it reads the same, bit for bit, angles included.
func TestRoundTrip(t *testing.T) {
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 0))
	var b bytes.Buffer
	b.WriteString(head)
	for i := range 5000 {
		fmt.Fprintf(&b, `{"time":"2030-05-01T12:%02d:00.%09dZ","sensor":"s","number":%d,"measurement":{"heading":{"deg":%v,"sigma_deg":%v}}}`+"\n",
			i%60, rng.IntN(1e9), i, rng.Float64()*360, rng.ExpFloat64()+1e-9)
		fmt.Fprintf(&b, `{"time":"2030-05-01T12:00:00Z","truth":{"lon":%v,"lat":%v,"sigma_m":%v}}`+"\n",
			rng.Float64()*360-180, rng.Float64()*180-90, rng.ExpFloat64())
	}
	once := records(t, b.Bytes())
	twice := records(t, written(t, once))
	for i := range once {
		a, b := *once[i], *twice[i]
		a.Message, b.Message = nil, nil
		if !reflect.DeepEqual(a, b) {
			t.Fatalf("seed %d: record %d: %+v became %+v", seed, i, a, b)
		}
	}
}

// TestDefaults proves that a sensor is called after its kind, that a number
// comes from the line, and that both reach the message for sending on.
func TestDefaults(t *testing.T) {
	recs := records(t, []byte(head+"\r\n"+
		`{"time":"2030-05-01T14:00:00+02:00","measurement":{"heading":{"deg":1,"sigmaDeg":2}}}`+"\r\n"+
		`{"time":"2030-05-01T12:00:00Z","number":0,"sensor":"c","measurement":{"heading":{"deg":1,"sigma_deg":2}}}`))
	if len(recs) != 3 || recs[0].Header.Start.SigmaM != 0 || recs[0].Header.Start.Area != nil {
		t.Fatalf("got %d records, header %+v", len(recs), recs[0].Header)
	}
	a, b := recs[1], recs[2]
	if a.Event.Sensor != "heading" || a.Event.Number != 3 || a.Message.GetSensor() != "heading" || a.Message.GetNumber() != 3 {
		t.Errorf("defaults gave sensor %q, number %d, message %v", a.Event.Sensor, a.Event.Number, a.Message)
	}
	if b.Event.Sensor != "c" || b.Event.Number != 0 || !proto.Equal(a.Message.GetTime(), b.Message.GetTime()) {
		t.Errorf("got %+v, message %v", b.Event, b.Message)
	}
}

// TestBadLines proves that each mistake has one error that says where and what.
func TestBadLines(t *testing.T) {
	m := func(body string) string { return head + `{"time":"2030-05-01T12:00:01Z",` + body + "}\n" }
	fix := func(body string) string { return m(`"measurement":{"fix":{` + body + `}}`) }
	for _, c := range []struct{ in, want string }{
		{"", "f:1: no header: the file is empty"},
		{"\n\n", "f:2: no header: the file is empty"},
		{`{"time":"2030-05-01T12:00:00Z","truth":{"lon":1,"lat":2}}`, "f:1: no header before this line"},
		{head + head, "f:2: a second header"},
		{head + `{"time":"2030-05-01T12:00:01Z"}`, "f:2: no record: set exactly one of"},
		{head + `{"truth":{"lon":1,"lat":2}}`, "f:2: time: missing"},
		{head + `{"time":"yesterday","truth":{"lon":1,"lat":2}}`, "f:2: column 9: invalid google.protobuf.Timestamp value \"yesterday\""},
		{head + `{"time":"1500-05-01T12:00:01Z","truth":{"lon":1,"lat":2}}`, "f:2: time: 1500-05-01T12:00:01Z is out of range"},
		{head + `{"time":"2030-05-01T12:00:01.1234567891Z","truth":{"lon":1,"lat":2}}`, "f:2: column 9: invalid"},
		{m(`"truth":{"lon":1,"lat":2,"colour":3}`), `f:2: column 57: unknown field "colour"`},
		{m(`"wheel":1`), `f:2: column 32: unknown field "wheel"`},
		{m(`"truth":{"lon":1,"lat":2},"sensor":"s"`), "f:2: sensor and number belong beside a measurement"},
		{m(`"truth":{"lon":1,"lat":2},"measurement":{}`), "f:2: column 58: error parsing \"measurement\", oneof leadline.v1.DriveRecord.record is already set"},
		{m(`"truth":{"lon":1}`), "f:2: truth: lat is missing"},
		{m(`"truth":{"lon":42,"lat":91}`), "f:2: truth: position lon 42, lat 91 is not on the globe"},
		{m(`"truth":{"lon":1,"lat":2,"sigma_m":-1}`), "f:2: truth: sigma_m is -1"},
		{m(`"truth":{"lon":1,"lat":2,"height_m":"NaN"}`), "f:2: truth: height_m is NaN: leave it out"},
		{m(`"measurement":{}`), "f:2: measurement has no kind"},
		{m(`"measurement":{"travel":{"distance_m":1,"sigma_m":1}}`), "f:2: travel: since: missing"},
		{fix(`"lat":2,"sigma_m":1`), "f:2: fix: lon is missing"},
		{fix(`"lon":1,"lat":2,"sigma_m":"five"`), "f:2: column 80: invalid value for double field sigmaM"},
		{m(`"number":-1,"measurement":{"standstill":{}}`), "f:2: column 41: invalid value for uint64 field number"},
		{m(`"sensor":"` + strings.Repeat("x", 300) + `","measurement":{"standstill":{}}`), "f:2: sensor is 300 bytes long: at most 256"},
		{head + `{"time":"2030-05-01T12:00:01Z","tru`, "f:2: the line ends within a record (the file's last line does not end: is the file cut off?)"},
		{head + `{"time":` + strings.Repeat(" ", MaxLine), "f:2: the line is over 1048576 bytes"},
		{head + strings.Repeat(" ", 3*MaxLine), "f:2: the line is over 1048576 bytes"},
		{head + "\x00\xff", "f:2: column 1:"},
		{strings.Replace(head, "van", "", 1), "f:1: header: vehicle is missing"},
		{strings.Replace(head, `"map":"town"`, `"start":{"point":{"lon":1,"lat":2}}`, 1), "f:1: header: start: point: sigma_m is 0: it must be positive"},
		{strings.Replace(head, `"map":"town"`, `"start":{"area":{}}`, 1), "f:1: header: start: area: no ring"},
		{strings.Replace(head, `"map":"town"`, `"posterior_interval_s":-1`, 1), "f:1: header: posterior_interval_s is -1: it must be from 0 to 3600 seconds"},
		{strings.Replace(head, `"map":"town"`, `"traffic":true,"posterior_interval_s":1`, 1), "f:1: header: traffic has no posteriors"},
	} {
		r := NewReader(strings.NewReader(c.in), "f")
		var err error
		for err == nil {
			_, err = r.Read()
		}
		var e *Error
		if !errors.As(err, &e) || !strings.HasPrefix(strings.ReplaceAll(err.Error(), "\u00a0", " "), c.want) {
			t.Errorf("%.200q:\n got %v\nwant %v", c.in, err, c.want)
		}
		if strings.Contains(err.Error(), "\n") {
			t.Errorf("more than one line: %q", err)
		}
		if _, again := r.Read(); !errors.Is(again, err) {
			t.Errorf("the error does not stay: %v", again)
		}
	}
}

// TestWriterRefuses proves that the writer never makes a file that the reader
// does not take.
func TestWriterRefuses(t *testing.T) {
	ev := &sensor.Event{Time: 5, Sensor: "s", Measurement: sensor.Standstill{}}
	w := NewWriter(io.Discard)
	if err := w.Write(&Record{Time: 5, Event: ev}); err == nil {
		t.Error("a file without a header")
	}
	if err := w.Write(&Record{Header: &Header{Vehicle: "v"}}); err != nil {
		t.Fatal(err)
	}
	for _, rec := range []*Record{
		{Header: &Header{Vehicle: "v"}},
		{Time: 5},
		{Time: 6, Event: ev},
		{Time: 5, Event: ev, Truth: &Truth{}},
	} {
		if err := w.Write(rec); err == nil {
			t.Errorf("wrote %+v", rec)
		}
	}
	if err := w.WriteEvent(*ev); err != nil {
		t.Error(err)
	}
}

// TestReadAll proves that a drive keeps every line in the file's order.
func TestReadAll(t *testing.T) {
	data, err := os.ReadFile("testdata/kinds.drive.jsonl")
	if err != nil {
		t.Fatal(err)
	}
	d, err := ReadAll(bytes.NewReader(data), "test")
	if err != nil || d.Header.Vehicle != "invented van" || d.Time != 1903867200e9 || len(d.Events) != 18 || len(d.Truths) != 1 {
		t.Errorf("got %+v, %v", d, err)
	}
	if _, err := ReadAll(strings.NewReader(head+"{"), "test"); err == nil {
		t.Error("a broken line was taken")
	}
}

// FuzzReader proves that no input panics or hangs, and that whatever is read
// is written so that it reads the same.
func FuzzReader(f *testing.F) {
	data, err := os.ReadFile("testdata/kinds.drive.jsonl")
	if err != nil {
		f.Fatal(err)
	}
	lines := bytes.SplitAfter(data, []byte("\n"))
	for _, l := range lines[1:] {
		f.Add(append([]byte(head), l...))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		r := NewReader(bytes.NewReader(data), "f")
		var out bytes.Buffer
		var recs []*Record
		w := NewWriter(&out)
		for {
			rec, err := r.Read()
			if err != nil {
				break
			}
			if err := w.Write(rec); err != nil {
				t.Fatalf("read but not written: %v", err)
			}
			recs = append(recs, rec)
		}
		if len(recs) == 0 {
			return
		}
		// Bytes, because NaN is not equal to itself.
		if again := written(t, records(t, out.Bytes())); !bytes.Equal(again, out.Bytes()) {
			t.Fatalf("%s became %s", out.Bytes(), again)
		}
	})
}
