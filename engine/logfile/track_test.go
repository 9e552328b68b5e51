package logfile

import (
	"errors"
	"io"
	"math"
	"os"
	"strings"
	"testing"
	"testing/iotest"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/fixtures/outside"
)

const aGPX = `<?xml version="1.0" encoding="UTF-8"?>
<gpx version="1.1" creator="nobody" xmlns="http://www.topografix.com/GPX/1/1">
<metadata><name>a name</name></metadata>
<wpt lat="1" lon="2"><time>2030-05-01T12:00:00Z</time></wpt>
<trk><name>x</name><trkseg>
<trkpt lat="45.5" lon="-30.25"><ele>12.5</ele><time>2030-05-01T12:00:00.5Z</time><hdop>1.5</hdop></trkpt>
<trkpt lat="45.6" lon="-30.25"><time> 2030-05-01T14:00:01+02:00 </time><extensions><time>1999-01-01T00:00:00Z</time></extensions></trkpt>
<trkpt lat="45.7" lon="-30.25"/>
<trkpt lat="95" lon="-30.25"><time>2030-05-01T12:00:02Z</time></trkpt>
<trkpt lat="45" lon="-30.25"><time>2030-05-01T12:00:02</time></trkpt>
<trkpt lat="45"><time>2030-05-01T12:00:02Z</time></trkpt>
</trkseg></trk></gpx>`

const anIGC = "AXYZ001\r\nHFDTEDATE:290228,01\r\nHFPLTPILOT:SOMEBODY\r\nI013638FXA\r\n" +
	"B2359594547124N00624906EA0115901272050\r\n" + // the leap day's last second
	"B0000014547122S00624905WA-011801271050\r\n" +
	"B0000024547122N00624905EV0000000000050\r\n" +
	"B0000034560000N00624905EA0115801271050\r\n" +
	"B0000034547122\r\n" +
	"B0000044547122N00624905XA0115801271050\r\n" +
	"B2500004547122N00624905EA0115801271050\r\n" +
	"LXYZ something\r\nGABC\r\n"

func (g *got) gpx(t *testing.T, text string, truth bool) {
	t.Helper()
	var err error
	if g.tally, err = ReadGPX(strings.NewReader(text), "x", truth, g.emit); err != nil {
		t.Fatal(err)
	}
	g.sane(t, err)
}

// TestGPX: points become fixes or truths; what cannot is counted where it is.
func TestGPX(t *testing.T) {
	g := &got{}
	g.gpx(t, aGPX, false)
	if len(g.events) != 2 || g.tally.Unusable() != 4 || g.tally.PassedOver["wpt"] != 1 {
		t.Fatalf("%+v, %+v", g.events, g.tally)
	}
	first, second := g.events[0].Measurement.(sensor.Fix), g.events[1].Measurement.(sensor.Fix)
	if g.events[0].Time != at("12:00:00.5") || g.events[1].Time != at("12:00:01") || first.SigmaM != 6 || second.SigmaM != 8 ||
		first.Position != geo.FromDegrees(-30.25, 45.5) {
		t.Errorf("%+v", g.events)
	}
	if !strings.HasPrefix(g.tally.FirstRefusal(), "x:8:") {
		t.Errorf("%s", g.tally.FirstRefusal())
	}
	g = &got{}
	g.gpx(t, aGPX, true)
	if len(g.truths) != 2 || !g.truths[0].HasHeight || g.truths[0].HeightM != 12.5 || g.truths[1].HasHeight || g.truths[0].SigmaM != 6 {
		t.Errorf("%+v", g.truths)
	}
	// Cut off anywhere: what was whole stays, and one refusal says where it ends.
	cut := strings.Index(aGPX, "<trkpt lat=\"45.6")
	g = &got{}
	g.gpx(t, aGPX[:cut+30], false)
	if len(g.events) != 1 || g.tally.Unusable() != 1 || !strings.Contains(g.tally.FirstRefusal(), "no XML from here on") {
		t.Errorf("%+v", g.tally)
	}
	for text, want := range map[string]string{
		"<kml></kml>": "x:1: its outermost element is \"kml\"",
	} {
		if _, err := ReadGPX(strings.NewReader(text), "x", false, g.emit); err == nil || !strings.HasPrefix(err.Error(), want) {
			t.Errorf("%s: %v", text, err)
		}
	}
	stop := errors.New("stop")
	if _, err := ReadGPX(strings.NewReader(aGPX), "x", false, func(Record) error { return stop }); !errors.Is(err, stop) {
		t.Error(err)
	}
	if _, err := ReadGPX(io.MultiReader(strings.NewReader(aGPX[:cut]), iotest.ErrReader(stop)), "x", false, g.emit); !errors.Is(err, stop) {
		t.Errorf("of a disk that fails: %v", err)
	}
}

// TestIGC: points with the day of the header, past midnight of a leap day.
func TestIGC(t *testing.T) {
	g := &got{}
	var err error
	if g.tally, err = ReadIGC(strings.NewReader(anIGC), "x", true, g.emit); err != nil {
		t.Fatal(err)
	}
	g.sane(t, err)
	if len(g.truths) != 2 || g.tally.Unusable() != 4 || g.tally.PassedOver["B records without a fix in three dimensions"] != 1 {
		t.Fatalf("%+v, %+v", g.truths, g.tally)
	}
	lon, lat := g.truths[0].Position.Degrees()
	if math.Abs(lon-(6+24.906/60)) > 1e-9 || math.Abs(lat-(45+47.124/60)) > 1e-9 || g.truths[0].HeightM != 1272 || stamp(g.truths[0].Time) != "2028-02-29T23:59:59Z" {
		t.Errorf("%v %v %+v", lon, lat, g.truths[0])
	}
	if lon, lat := g.truths[1].Position.Degrees(); lon > 0 || lat > 0 || stamp(g.truths[1].Time) != "2028-03-01T00:00:01Z" {
		t.Errorf("%+v", g.truths[1])
	}
	for what := range g.tally.PassedOver {
		if strings.Contains(what, "SOMEBODY") {
			t.Errorf("a name is kept: %q", what)
		}
	}
	if _, err := ReadIGC(strings.NewReader("AXYZ001\nB2359594547124N00624906EA0115901272\n"), "x", true, g.emit); err == nil || !strings.Contains(err.Error(), "no date") {
		t.Error(err)
	}
}

// TestRecordedFlight: a flight that somebody recorded: 2527 points, each a second
// or more after the one before, none of them a jump.
func TestRecordedFlight(t *testing.T) {
	f, err := os.Open(outside.Path(t, "d3p.igc"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	g := &got{}
	if g.tally, err = ReadIGC(f, "x", true, g.emit); err != nil || len(g.truths) != 2527 || g.tally.Unusable() != 0 {
		t.Fatalf("%d truths, %+v, %v", len(g.truths), g.tally, err)
	}
	for i, p := range g.truths[1:] {
		d, _, err := geo.WGS84.Distance(g.truths[i].Position, p.Position)
		if s := p.Time.Seconds(g.truths[i].Time); err != nil || s < 1 || d/s > 60 {
			t.Fatalf("%.1f m in %.0f s at point %d, %v", d, s, i+2, err)
		}
	}
}

// FuzzReadGPX and FuzzReadIGC: whatever the text, reading ends with records that a
// drive can hold, or one line that says why not.
func FuzzReadGPX(f *testing.F) {
	f.Add([]byte(aGPX), true)
	f.Fuzz(func(t *testing.T, text []byte, truth bool) {
		g := &got{}
		var err error
		g.tally, err = ReadGPX(strings.NewReader(string(text)), "x", truth, g.emit)
		g.sane(t, err)
	})
}

func FuzzReadIGC(f *testing.F) {
	f.Add([]byte(anIGC), false)
	f.Fuzz(func(t *testing.T, text []byte, truth bool) {
		g := &got{}
		var err error
		g.tally, err = ReadIGC(strings.NewReader(string(text)), "x", truth, g.emit)
		g.sane(t, err)
	})
}
