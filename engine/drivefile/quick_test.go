package drivefile

import (
	"bytes"
	"os"
	"path/filepath"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// quickLines are what quick must take itself, and odd ones, which it may leave.
var quickLines = []struct {
	line  string
	taken bool
}{
	{`{"time":"2026-01-01T00:00:00.02Z","sensor":"gyro","number":1,"measurement":{"turn":{"since":"2026-01-01T00:00:00.010Z","angle_deg":0.0005856168513740756,"sigma_deg":0.0005}}}`, true},
	{`{"time":"2026-01-01T00:00:00.01Z","sensor":"odometer","number":0,"measurement":{"travel":{"since":"2026-01-01T00:00:00Z","sigma_m":0.001}}}`, true},
	{` { "time" : "2024-02-29T23:59:59.999999999Z" , "truth" : { "lon" : -1.5e-3 , "lat" : 0 } } `, true},
	{`{"time":"2026-01-01T00:00:00Z","measurement":{"travel":{"distance_m":-0.0,"distanceM":1}}}`, false},
	{`{"time":"2023-02-29T00:00:00Z","sensor":"a"}`, false},
	{`{"time":"2026-01-01T24:00:00Z"}`, false},
	{`{"time":"2026-01-01T00:00:60Z"}`, false},
	{`{"time":"0000-01-01T00:00:00Z"}`, false},
	{`{"time":"2026-01-01T00:00:00.Z"}`, false},
	{`{"time":"2026-01-01T00:00:00.0000000001Z"}`, false},
	{`{"time":"2026-01-01T02:00:00+02:00","sensor":"gyro"}`, false},
	{`{"sensor":"g\u0079ro"}`, false},
	{`{"sensor":"gyro","sensor":"gyro"}`, false},
	{`{"number":"7"}`, false},
	{`{"number":07}`, false},
	{`{"number":1.0}`, false},
	{`{"number":-1}`, false},
	{`{"number":18446744073709551616}`, false},
	{`{"number":null}`, false},
	{`{"measurement":{"travel":{},"turn":{}}}`, false},
	{`{"measurement":{"travel":{"distance_m":1e999}}}`, false},
	{`{"measurement":{"travel":{"distance_m":NaN}}}`, false},
	{`{"measurement":{"travel":{"distance_m":"NaN"}}}`, false},
	{`{"measurement":{"travel":{"distance_m":1_0}}}`, false},
	{`{"measurement":{"travel":{"distance_m":.5}}}`, false},
	{`{"measurement":{"travel":{"distance_m":1e}}}`, false},
	{`{"measurement":{"travel":{"distance_m":1}}`, false},
	{`{"measurement":{"travel":{"distance_m":1,}}}`, false},
	{`{"sensor":"gyro"}{}`, false},
	{`[]`, false},
}

// TestQuick proves that plain lines are taken, and as what.
func TestQuick(t *testing.T) {
	var q quick
	for _, c := range quickLines {
		if got := likeProtojson(t, &q, []byte(c.line)); got != c.taken {
			t.Errorf("%s: taken %v, want %v", c.line, got, c.taken)
		}
	}
	files, err := filepath.Glob("testdata/*" + Suffix)
	if err != nil || len(files) == 0 {
		t.Skip("no drive file here")
	}
	for _, f := range files {
		data, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		for line := range bytes.Lines(data) {
			likeProtojson(t, &q, line)
		}
	}
}

// likeProtojson has quick read a line, and protojson if quick took it.
func likeProtojson(t *testing.T, q *quick, line []byte) bool {
	t.Helper()
	var a, b leadlinev1.DriveRecord
	if !q.read(line, &a) {
		return false
	}
	if err := protojson.Unmarshal(line, &b); err != nil {
		t.Errorf("%q: quick takes it, protojson says %v", line, err)
	} else if !proto.Equal(&a, &b) {
		t.Errorf("%q:\nquick     %v\nprotojson %v", line, &a, &b)
	}
	return true
}

// FuzzQuick holds quick to protojson.
func FuzzQuick(f *testing.F) {
	for _, c := range quickLines {
		f.Add([]byte(c.line))
	}
	f.Fuzz(func(t *testing.T, line []byte) {
		var q quick
		likeProtojson(t, &q, line)
	})
}

// BenchmarkRead reads two measurements over and over.
func BenchmarkRead(b *testing.B) {
	lines := [][]byte{[]byte(quickLines[0].line), []byte(quickLines[1].line)}
	b.Run("quick", func(b *testing.B) {
		var q quick
		for i := range b.N {
			var m leadlinev1.DriveRecord
			if !q.read(lines[i%2], &m) {
				b.Fatal("not taken")
			}
		}
	})
	b.Run("protojson", func(b *testing.B) {
		for i := range b.N {
			var m leadlinev1.DriveRecord
			if err := protojson.Unmarshal(lines[i%2], &m); err != nil {
				b.Fatal(err)
			}
		}
	})
}
