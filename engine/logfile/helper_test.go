package logfile

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// got collects what a log gives.
type got struct {
	events []sensor.Event
	truths []Truth
	tally  *Tally
}

func (g *got) emit(r Record) error {
	if r.Truth != nil {
		g.truths = append(g.truths, *r.Truth)
	} else {
		g.events = append(g.events, *r.Event)
	}
	return nil
}

// at is a time of 2030-05-01.
func at(clock string) sensor.Time {
	t, err := time.Parse(time.RFC3339Nano, "2030-05-01T"+clock+"Z")
	if err != nil {
		panic(err)
	}
	return sensor.Time(t.UnixNano())
}

// sum gives a sentence its checksum.
func sum(body string) string { return fmt.Sprintf("$%s*%02X", body, checksum([]byte(body))) }

// log joins sentences to a log.
func log(bodies ...string) string {
	var b strings.Builder
	for _, s := range bodies {
		if !strings.HasPrefix(s, "$") {
			s = sum(s)
		}
		b.WriteString(s + "\r\n")
	}
	return b.String()
}

func readNMEA(t *testing.T, text, options string) *got {
	t.Helper()
	o, err := ParseSentences("s.yaml", []byte(options))
	if err != nil {
		t.Fatal(err)
	}
	g := &got{}
	if g.tally, err = ReadNMEA(strings.NewReader(text), "x.nmea", o, g.emit); err != nil {
		t.Fatal(err)
	}
	return g
}

func readCSV(t *testing.T, text, columns string) *got {
	t.Helper()
	g := &got{}
	var err error
	if g.tally, err = ReadCSV(strings.NewReader(text), "x.csv", parseColumns(t, columns), g.emit); err != nil {
		t.Fatal(err)
	}
	return g
}

func parseColumns(t *testing.T, text string) *Columns {
	t.Helper()
	c, err := ParseColumns("c.yaml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// say words an event in degrees and seconds, for comparison.
func say(ev sensor.Event) string {
	n := func(v float64) string { return fmt.Sprintf("%.6g", v) }
	d := func(v float64) string { return n(geo.Deg(v)) }
	since := func(t sensor.Time) string { return n(ev.Time.Seconds(t)) + "s " }
	head := time.Unix(0, int64(ev.Time)).UTC().Format("15:04:05.999999999") + " " + ev.Sensor + " " + ev.Measurement.Kind() + " "
	switch m := ev.Measurement.(type) {
	case sensor.Travel:
		return head + since(m.Since) + n(m.DistanceM) + " ±" + n(m.SigmaM)
	case sensor.Turn:
		return head + since(m.Since) + d(m.AngleRad) + " ±" + d(m.SigmaRad)
	case sensor.Displacement:
		return head + since(m.Since) + n(m.EastM) + " " + n(m.NorthM) + " " + n(m.CovM2[0]) + " " + n(m.CovM2[1]) + " " + n(m.CovM2[2])
	case sensor.BodyDisplacement:
		return head + since(m.Since) + n(m.ForwardM) + " " + n(m.RightM) + " " + d(m.TurnRad) + " ±" + n(m.SigmaForwardM) + " " + n(m.SigmaRightM) + " " + d(m.SigmaTurnRad)
	case sensor.Speed:
		course := ""
		if m.HasCourse {
			course = " to " + d(m.CourseRad)
		}
		return head + n(m.MPS) + course + " ±" + n(m.SigmaMPS)
	case sensor.HeadingFix:
		return head + d(m.HeadingRad) + " ±" + d(m.SigmaRad)
	case sensor.Clearance:
		return head + n(m.ClearanceM) + " " + n(m.AltitudeM) + " ±" + n(m.SigmaM)
	case sensor.Sounding:
		return head + n(m.DepthBelowTransducerM) + "+" + n(m.TransducerDepthM) + " ±" + n(m.SigmaM)
	case sensor.Barometer:
		return head + fmt.Sprint(m.HasPressure) + " " + n(m.AltitudeM) + " " + n(m.PressureHPa) + " ±" + n(m.SigmaM)
	case sensor.Range:
		return head + beaconText(m.Beacon) + " " + n(m.RangeM) + " ±" + n(m.SigmaM)
	case sensor.Bearing:
		return head + beaconText(m.Beacon) + " " + d(m.BearingRad) + " ±" + d(m.SigmaRad)
	case sensor.AcousticBearing:
		return head + m.Post + " " + d(m.BearingRad) + " ±" + d(m.SigmaRad)
	case sensor.Fix:
		lon, lat := m.Position.Degrees()
		return head + fmt.Sprintf("%.7f %.7f", lon, lat) + " ±" + n(m.SigmaM)
	case sensor.Sighting:
		return head + m.Road + " " + n(m.Mistaken) + " " + m.Who
	}
	return strings.TrimSpace(head)
}

func beaconText(b sensor.Beacon) string {
	if b.ID != "" {
		return b.ID
	}
	lon, lat := b.Position.Degrees()
	return fmt.Sprintf("%g,%g", lon, lat)
}

// want compares events, in order.
func (g *got) want(t *testing.T, lines ...string) {
	t.Helper()
	for i := range max(len(lines), len(g.events)) {
		is, should := "nothing", "nothing"
		if i < len(g.events) {
			is = say(g.events[i])
		}
		if i < len(lines) {
			should = lines[i]
		}
		if is != should {
			t.Errorf("event %d:\n  is     %s\n  should %s", i, is, should)
		}
	}
}

// refused compares the reasons with their counts.
func (g *got) refused(t *testing.T, want map[string]int) {
	t.Helper()
	is := map[string]int{}
	for _, r := range g.tally.Refused {
		is[r.Reason] = r.Count
	}
	if fmt.Sprint(is) != fmt.Sprint(want) {
		t.Errorf("refused %v, want %v", is, want)
	}
}

func (g *got) passed(t *testing.T, want map[string]int) {
	t.Helper()
	if fmt.Sprint(g.tally.PassedOver) != fmt.Sprint(want) {
		t.Errorf("passed over %v, want %v", g.tally.PassedOver, want)
	}
}

func near(a, b, tolerance float64) bool { return math.Abs(a-b) <= tolerance }
