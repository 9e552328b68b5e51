package logfile

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"time"

	"leadline/engine/sensor"
)

// times lists when events were.
func (g *got) times() string {
	var all []string
	for _, ev := range g.events {
		all = append(all, time.Unix(0, int64(ev.Time)).UTC().Format("02T15:04:05.999"))
	}
	return strings.Join(all, " ")
}

func TestTimesOfSentences(t *testing.T) {
	const (
		hdt = "HEHDT,272.0,T"
		dpt = "SDDPT,14,0"
	)
	gga := func(clock string) string {
		return "GPGGA," + clock + ",4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"
	}
	rmc := func(clock, status, date string) string {
		return "GPRMC," + clock + "," + status + ",4807.038,N,01131.000,E,,," + date + ",,"
	}
	zda := func(clock, day string) string { return "GPZDA," + clock + "," + day + ",05,2030,00,00" }
	for _, c := range []struct {
		name, options string
		lines         []string
		want          string
		passed        map[string]int
	}{
		{"the time before", "", []string{zda("120000", "01"), hdt, zda("120001", "01"), hdt}, "01T12:00:00 01T12:00:01", nil},
		{"spread evenly", "", []string{zda("120000", "01"), hdt, hdt, dpt, hdt, hdt, zda("120002", "01"), hdt}, "01T12:00:00 01T12:00:00 01T12:00:00.5 01T12:00:01 01T12:00:01.5 01T12:00:02", nil},
		{"the last one is as long as the one before", "", []string{zda("120000", "01"), zda("120004", "01"), hdt, hdt}, "01T12:00:04 01T12:00:06", nil},
		{"a clock that jumps ahead", "", []string{zda("120000", "01"), hdt, hdt, zda("120002", "01"), hdt, hdt, zda("120000", "09"), hdt, hdt}, "01T12:00:00 01T12:00:01 01T12:00:02 01T12:00:03 09T12:00:00 09T12:00:01", nil},
		{"a second if it is alone", "", []string{zda("120000", "01"), hdt, hdt}, "01T12:00:00 01T12:00:00.5", nil},
		{"before the first time", "", []string{hdt, zda("120000", "01"), hdt}, "01T12:00:00", map[string]int{"before the first time": 1}},
		{"before the first date", "", []string{gga("115959"), hdt, rmc("120000", "A", "010530"), hdt}, "01T12:00:00 01T12:00:00", map[string]int{"before the first date": 1, "before the first time": 1, "RMC: another sentence gives fix": 0}},
		{"midnight", "", []string{zda("235959.50", "01"), gga("235959.75"), gga("000000.25"), gga("000001")}, "01T23:59:59.75 02T00:00:00.25 02T00:00:01", nil},
		{"midnight and back", "", []string{zda("235959.90", "01"), gga("000000.10"), gga("235959.95"), zda("000001", "02"), hdt}, "01T23:59:59.95 02T00:00:00.1 02T00:00:01", nil},
		{"a leap second", "", []string{zda("235960", "01"), hdt}, "02T00:00:00", nil},
		{"a stated date", "time: {date: 2030-05-07}", []string{gga("120000"), hdt, gga("120001")}, "07T12:00:00 07T12:00:00 07T12:00:01", nil},
		{"it goes before a receiver's", "time: {date: 2030-05-07}", []string{rmc("120000", "A", "010110"), hdt}, "07T12:00:00 07T12:00:00", nil},
		{"a receiver that does not know the time", "", []string{rmc("000003", "V", "060180"), hdt, rmc("120000", "A", "010530"), hdt, rmc("120001", "V", "010530"), hdt}, "01T12:00:00 01T12:00:00 01T12:00:01", map[string]int{"RMC before the receiver knows the time": 1, "before the first time": 1, "RMC without a value": 2}},
		{"two receivers, a little apart", "heading: {from: [HEHDT]}", []string{zda("120000", "01"), "GNZDA,115959.5,01,05,2030,00,00", hdt, zda("120001", "01"), "GNZDA,120000.5,01,05,2030,00,00", hdt}, "01T12:00:00 01T12:00:01", nil},
		{"a time in front", "time: {from: prefix, format: rfc3339}", []string{"2030-05-01T12:00:00.25Z, " + sum(hdt), "[2030-05-01T12:00:01Z] " + sum(dpt), "2030-05-01T12:00:02+01:00;" + sum(dpt)}, "01T12:00:00.25 01T12:00:01 01T11:00:02", nil},
		{"seconds in front", "time: {from: prefix, format: unix_s}", []string{"1903953600.125 " + sum(hdt)}, "02T12:00:00.125", nil},
		{"a tag block", "time: {from: tag}", []string{sum(hdt), tag("s:he,c:1903953600") + sum(hdt), sum(dpt), tag("c:1903953601250,g:1-1-9") + sum(dpt)}, "02T12:00:00 02T12:00:00 02T12:00:01.25", map[string]int{"before the first time": 1}},
	} {
		t.Run(c.name, func(t *testing.T) {
			var text strings.Builder
			for _, l := range c.lines {
				if !strings.Contains(l, "$") {
					l = sum(l)
				}
				text.WriteString(l + "\n")
			}
			g := readNMEA(t, text.String(), c.options)
			if is := g.times(); is != c.want {
				t.Errorf("is     %s\nshould %s", is, c.want)
			}
			if len(g.tally.Refused) > 0 {
				t.Errorf("refused %+v", g.tally.Refused)
			}
			for what, n := range c.passed {
				if g.tally.PassedOver[what] != n {
					t.Errorf("passed over %v, want %v", g.tally.PassedOver, c.passed)
				}
			}
		})
	}
}

// TestNoChecksums: a log whose sentences have no checksum, or wrong ones, says so,
// and not that none says the time; one among others says nothing of that.
func TestNoChecksums(t *testing.T) {
	read := func(text string) error {
		_, err := ReadNMEA(strings.NewReader(text), "x.nmea", &Sentences{}, func(Record) error { return nil })
		return err
	}
	bare := "$GPZDA,120000,01,05,2030,,\n\n$SDDPT,14.39,0.00\n"
	if err := read(bare); err == nil || !strings.Contains(err.Error(), "x.nmea: 2 of 2 sentences have no checksum, first x.nmea:1:") {
		t.Errorf("%v", err)
	}
	if err := read(bare + sum("SDDPT,14.39,0.00") + "\n"); err == nil || !strings.Contains(err.Error(), "2 of 3 sentences") {
		t.Errorf("%v", err)
	}
	wrong := "$GPZDA,120000,01,05,2030,,*00\n$SDDPT,14.39,0.00*01\n"
	if err := read(wrong + sum("SDDPT,14.39,0.00") + "\n"); err == nil || !strings.Contains(err.Error(), "x.nmea: 2 of 3 sentences have another checksum than their text, first x.nmea:1:") {
		t.Errorf("%v", err)
	}
	if err := read("$SDDPT,14.39,0.00*01\n" + sum("SDDPT,14.39,0.00") + "\n"); err == nil || !strings.Contains(err.Error(), "no sentence says the time") {
		t.Errorf("%v", err)
	}
	if err := read("$SDDPT,14.39,0.00\n" + sum("GPZDA,120000,01,05,2030,,") + "\n" + sum("SDDPT,14.39,0.00") + "\n"); err != nil {
		t.Errorf("%v", err)
	}
}

func tag(body string) string { return fmt.Sprintf(`\%s*%02X\`, body, checksum([]byte(body))) }

// Without any time a log cannot be used, and it says what to do.
func TestNoTimeAtAll(t *testing.T) {
	for text, options := range map[string]string{
		log("HEHDT,1,T"): "",
		log("GPGGA,120000,4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"): "",
		log("GPRMC,120000,V,,,,,,,010530,,"):                                 "",
		"":                                                                   "",
	} {
		o, _ := ParseSentences("s", []byte(options))
		_, err := ReadNMEA(strings.NewReader(text), "x.nmea", o, func(Record) error { return nil })
		if err == nil || !strings.Contains(err.Error(), "x.nmea: no sentence says the time") || !strings.Contains(err.Error(), "prefix") {
			t.Errorf("%q: %v", text, err)
		}
	}
	_, err := ReadNMEA(strings.NewReader(""), "x.nmea", &Sentences{Time: SentenceTime{From: FromArrival}}, nil)
	if err == nil || !strings.Contains(err.Error(), "arrived") {
		t.Error(err)
	}
}

func TestPrefixRefused(t *testing.T) {
	g := readNMEA(t, "soon "+log("HEHDT,1,T")+log("HEHDT,1,T"), "time: {from: prefix, format: unix_s}")
	g.refused(t, map[string]int{"the time before the sentence": 2})
	g = readNMEA(t, `\c:1903953600*00\`+log("HEHDT,1,T")+tag("c:x")+log("HEHDT,1,T"), "time: {from: tag}")
	g.refused(t, map[string]int{"tag block": 2})
}

// Live sentences get the time at which they arrive, at once.
func TestArrival(t *testing.T) {
	g := &got{}
	n := NewNMEA("live", &Sentences{Time: SentenceTime{From: FromArrival}}, g.emit)
	for i, body := range []string{"SDDPT,5,0", "TIROT,60,A", "TIROT,60,A", "VWVHW,45.0,T,40.4,M,6.2,N,11.5,K"} {
		if err := n.Line([]byte(sum(body)), true, at("12:00:00")+sensor.Time(i)*1e9); err != nil {
			t.Fatal(err)
		}
	}
	g.want(t,
		"12:00:00 sounder sounding 5+0 ±0.257249",
		"12:00:02 turn_rate turn 1s 1 ±0.0291667",
		"12:00:03 compass heading 45 ±1",
		"12:00:03 water_speed speed 3.18956 ±0.3")
	if err := n.End(); err != nil || len(g.events) != 4 {
		t.Error(err, len(g.events))
	}
	if n.Tally().Lines != 4 || n.Tally().Measurements[0].Sensor != "compass" {
		t.Errorf("%+v", n.Tally())
	}
}

// However a log is interleaved, nothing is lost or doubled: what is read is
// what was taken, passed over or refused, and times do not run backward for one
// sensor.
func TestNothingIsLost(t *testing.T) {
	for seed := range uint64(50) {
		rng := rand.New(rand.NewPCG(seed, 1))
		second, lines, hdt := 0, []string{sum(zda)}, 0
		for range 300 {
			switch rng.IntN(6) {
			case 0:
				second += 1 + rng.IntN(3)
				lines = append(lines, sum(fmt.Sprintf("GPZDA,12%02d%02d.00,01,05,2030,00,00", second/60, second%60)))
			case 1, 2, 3:
				lines = append(lines, sum(fmt.Sprintf("HEHDT,%.1f,T", 360*rng.Float64())))
				hdt++
			case 4:
				lines = append(lines, "$HEHDT,1.0,T*00")
			case 5:
				lines = append(lines, sum("GPGSV,1"))
			}
		}
		g := readNMEA(t, strings.Join(lines, "\n"), "")
		wrong, other := g.tally.Unusable(), g.tally.PassedOver["GSV"]
		if len(g.events) != hdt || g.tally.Lines != len(lines) {
			t.Fatalf("seed %d: %d of %d headings, %d refused, %d others", seed, len(g.events), hdt, wrong, other)
		}
		if !slices.IsSortedFunc(g.events, func(a, b sensor.Event) int { return int(a.Time - b.Time) }) {
			t.Fatalf("seed %d: out of order", seed)
		}
		numbers := map[uint64]bool{}
		for _, ev := range g.events {
			if numbers[ev.Number] {
				t.Fatalf("seed %d: number %d twice", seed, ev.Number)
			}
			numbers[ev.Number] = true
		}
	}
}

// What waits for the time is bounded.
func TestTooLongWithoutATime(t *testing.T) {
	e := epochs{begun: true}
	for range maxPending {
		if !e.add(reading{}) {
			t.Fatal("full too early")
		}
	}
	if e.add(reading{}) {
		t.Error("there is no bound")
	}
}
