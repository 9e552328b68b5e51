package logfile

import (
	"os"
	"path/filepath"
	"strings"
	"testing"
	"unicode/utf8"

	"leadline/engine/sensor"
)

// sane fails on a record that no drive file could hold or no session would
// look at, and on a tally that does not add up.
func (g *got) sane(t *testing.T, err error) {
	t.Helper()
	if err != nil && (strings.Contains(err.Error(), "\n") || err.Error() == "") {
		t.Fatalf("not one line: %q", err)
	}
	byKey := map[[2]string]int{}
	for _, ev := range g.events {
		byKey[[2]string{ev.Sensor, ev.Measurement.Kind()}]++
		if !utf8.ValidString(ev.Sensor) || ev.Sensor == "" || ev.Time < 0 {
			t.Fatalf("%+v", ev)
		}
		if since, ok := sensor.Since(ev.Measurement); ok && since >= ev.Time {
			t.Fatalf("%v since %v", ev, since)
		}
		// What is left to the suite is all that may be missing.
		if err := ev.Measurement.Check(ev.Time); err != nil {
			for _, part := range strings.Split(err.Error(), "; ") {
				d, _ := ev.Measurement.(sensor.Displacement)
				if !strings.Contains(part, "0 or missing") && !(strings.Contains(part, "covariance") && d.CovM2 == [3]float64{}) {
					t.Fatalf("%+v: %v", ev, err)
				}
			}
		}
	}
	for _, c := range g.tally.Measurements {
		if byKey[[2]string{c.Sensor, c.Kind}] != c.Count || c.To.Before(c.From) {
			t.Fatalf("%+v, counted %d", c, byKey[[2]string{c.Sensor, c.Kind}])
		}
	}
	for _, tr := range g.truths {
		if err := tr.Position.Check(); err != nil {
			t.Fatal(err)
		}
	}
	if g.tally.Usable() != len(g.events) || g.tally.Truths != len(g.truths) || len(g.tally.Refused) > maxReasons+1 || len(g.tally.PassedOver) > maxReasons+1 {
		t.Fatalf("%d events, %d truths: %+v", len(g.events), len(g.truths), g.tally)
	}
	for _, r := range g.tally.Refused {
		for _, place := range r.First {
			if strings.ContainsAny(place, "\r\n\x00\x1b") || len(place) > 400 || !strings.HasPrefix(place, "x:") {
				t.Fatalf("%q", place)
			}
		}
	}
}

// FuzzReadNMEA: whatever the log and the sentences file, reading ends with
// records that a drive can hold, or one line that says why not.
func FuzzReadNMEA(f *testing.F) {
	f.Add([]byte(log(zda, "SDDPT,14.39,0.00", "HEHDT,272.0,T", "TIROT,-3.5,A", "VWVHW,45.0,T,40.4,M,6.2,N,11.5,K")), []byte(""))
	f.Add([]byte(log("GPRMC,123519,A,4807.038,N,01131.000,E,022.4,084.4,230394,003.1,W", "HCHDG,98.3,0.0,E,12.6,W", "VMVBW,6.0,-0.5,A,5.0,1.0,A")), []byte("reckon: {}\n"))
	f.Fuzz(func(t *testing.T, text, options []byte) {
		o, err := ParseSentences("x", options)
		if err != nil {
			if strings.Contains(err.Error(), "\n") {
				t.Fatalf("not one line: %q", err)
			}
			return
		}
		g := &got{}
		g.tally, err = ReadNMEA(strings.NewReader(string(text)), "x", o, g.emit)
		g.sane(t, err)
	})
}

// FuzzReadCSV does the same for tables and column files.
func FuzzReadCSV(f *testing.F) {
	f.Add([]byte("t,odo,h\n1903867200,1000,90\n1903867201,1005.5,91\n"),
		[]byte(timeColumn+"sensors:\n- {name: odo, kind: travel, fields: {distance_m: {column: odo, counter: true}, sigma_m: {value: 0.1}}}\n- {kind: heading, fields: {deg: {column: h}}}\n"))
	f.Add([]byte("0 yaw 3\n1 yaw 4\n"),
		[]byte("delimiter: space\nheader: false\ntime: {column: 1, format: since_s, start: 2030-05-01T12:00:00Z}\nsensors:\n- {kind: turn, when: {column: 2, equals: yaw}, fields: {angle_deg: {column: 3, rate: instant, unit: rad/s}}}\n"))
	f.Fuzz(func(t *testing.T, text, columns []byte) {
		c, err := ParseColumns("x", columns)
		if err != nil {
			if strings.Contains(err.Error(), "\n") {
				t.Fatalf("not one line: %q", err)
			}
			return
		}
		g := &got{}
		g.tally, err = ReadCSV(strings.NewReader(string(text)), "x", c, g.emit)
		g.sane(t, err)
	})
}

func TestFuzzCorporaAreThere(t *testing.T) {
	for _, name := range []string{"FuzzReadNMEA", "FuzzReadCSV", "FuzzReadGPX", "FuzzReadIGC", "FuzzReadParquet"} {
		files, err := filepath.Glob("testdata/fuzz/" + name + "/*")
		if err != nil || len(files) < 5 {
			t.Errorf("%s: %d files in the corpus, %v", name, len(files), err)
		}
		for _, f := range files {
			if text, err := os.ReadFile(f); err != nil || !strings.HasPrefix(string(text), "go test fuzz v1") {
				t.Errorf("%s is no corpus file (%v)", f, err)
			}
		}
	}
}
