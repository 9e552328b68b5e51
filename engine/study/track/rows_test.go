package track

import (
	"bytes"
	"math"
	"slices"
	"strings"
	"testing"

	"leadline/engine/geo"
)

// TestRows reads a table back.
func TestRows(t *testing.T) {
	tr := walk()
	i := 0
	for row, err := range Rows(bytes.NewReader(written(t, tr, table)), "f") {
		if err != nil {
			t.Fatal(err)
		}
		p := tr.Posteriors[i]
		off, _, err := geo.WGS84.Distance(row.At, Scored(p))
		if err != nil || off > 2e-3 || row.TimeNS != p.TimeNS || row.Status != p.Status.String() || row.Radius95M != p.Radius95M {
			t.Errorf("row %d: %+v, %.4f m off", i, row, off)
		}
		if known := i < 4; known == math.IsNaN(row.ErrorM) || p.Protection.Bounded == math.IsNaN(row.ProtectionM) {
			t.Errorf("row %d: %+v", i, row)
		}
		if want := map[int][]string{2: {"bias ears north, east"}, 3: {"lost", "bias ears north, east"}}[i]; !slices.Equal(row.Alarms, want) {
			t.Errorf("row %d: alarms %q, want %q", i, row.Alarms, want)
		}
		i++
	}
	if i != len(tr.Posteriors) {
		t.Errorf("%d rows", i)
	}
	for text, want := range map[string]string{
		"":                     "f:1: EOF",
		"a,b\n":                "f:1: there is no column time",
		"\"":                   "f:1: ",
		head + "\nx,,,,,,,,\n": "f:2: time: ",
		head + "\n1970-01-01T00:00:00Z,located,x,,,,,,\n": "f:2: lon_deg: ",
		head + "\n1970-01-01T00:00:00Z\n":                 "f:2: ",
	} {
		var last error
		for _, err := range Rows(strings.NewReader(text), "f") {
			last = err
		}
		if last == nil || !strings.HasPrefix(last.Error(), want) || strings.Contains(last.Error(), "\n") {
			t.Errorf("%q: %v, want %s", text, last, want)
		}
	}
}

var head = strings.Join(wanted[:], ",")

// FuzzRows: no table panics, and an error is the last.
func FuzzRows(f *testing.F) {
	f.Add([]byte(head + "\n1970-01-01T00:00:00Z,located,1,2,,,,3,4\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		failed := false
		for _, err := range Rows(bytes.NewReader(text), "f") {
			if failed {
				t.Fatal("a row after an error")
			}
			failed = err != nil
		}
	})
}
