package logfile

import (
	"strings"
	"testing"
	"testing/iotest"
	"time"

	"leadline/engine/sensor"
)

func TestColumnFileErrors(t *testing.T) {
	const head = "time: {column: t, format: unix_s}\nsensors:\n"
	field := func(f string) string { return head + "- kind: travel\n  fields:\n    distance_m: " + f + "\n" }
	for _, c := range []struct {
		text string
		want []string
	}{
		{"", []string{"time: give column", "time.format: it is missing", "sensors: there are none"}},
		{"tim: 1\n", []string{"c.yaml:1:", "tim", "docs/drives.md"}},
		{head + "- {kind: odometer}\n", []string{"c.yaml:3:", "no kind of measurement", "travel"}},
		{head + "- {kind: truth}\n", []string{"c.yaml:3:", "no kind"}},
		{head + "- {kind: travel}\n", []string{"c.yaml:3:", "distance_m is missing"}},
		{head + "- {kind: travel, fields: {distance_km: {column: d}}}\n", []string{"c.yaml:3:", "no field", "distance_km", "distance_m, sigma_m"}},
		{head + "- {kind: heading, fields: {deg: {column: d}}}\n- {kind: heading, fields: {deg: {column: e}}}\n", []string{"c.yaml:4:", "heading", "twice"}},
		{field("{column: d, value: 3}"), []string{"c.yaml:5:", "give a column or a constant"}},
		{field("{unit: m}"), []string{"c.yaml:5:", "give a column or a constant"}},
		{field("{value: 3}"), []string{"c.yaml:5:", "an increment comes from a column"}},
		{field("{text: d}"), []string{"c.yaml:5:", "numbers have a value"}},
		{field("{column: d, unit: furlong}"), []string{"c.yaml:5:", "furlong", "no unit", "nmi", "km/h"}},
		{field("{column: d, unit: deg}"), []string{"c.yaml:5:", "unit of angle", "length"}},
		{field("{column: d, unit: m/s}"), []string{"c.yaml:5:", "unit of speed", "length"}},
		{field("{column: d, unit: km, rate: interval}"), []string{"c.yaml:5:", "unit of length", "speed"}},
		{field("{column: d, rate: often}"), []string{"c.yaml:5:", "often", "interval or instant"}},
		{field("{column: d, rate: instant, counter: true}"), []string{"c.yaml:5:", "counter and a rate"}},
		{field("{column: d, wrap: 10}"), []string{"c.yaml:5:", "for counters"}},
		{field("{column: d, counter: true, wrap: -10}"), []string{"c.yaml:5:", "wrap", "-10"}},
		{field("{column: d, counter: true, offset: 1}"), []string{"c.yaml:5:", "offset"}},
		{field("{column: d, sign: 2}"), []string{"c.yaml:5:", "sign", "2 must be 1 or -1"}},
		{field("{column: d, scale: .inf}"), []string{"c.yaml:5:", "scale"}},
		{field("{column: d, offset: .nan}"), []string{"c.yaml:5:", "offset"}},
		{head + "- {kind: heading, max_gap_s: 3, fields: {deg: {column: d, counter: true}}}\n", []string{"concern increments", "counter and rate are for increments"}},
		{head + "- {kind: travel, max_gap_s: -3, fields: {distance_m: {column: d}}}\n", []string{"max_gap_s", "-3"}},
		{head + "- {kind: travel, since_column: a, interval: {column: b}, fields: {distance_m: {column: d}}}\n", []string{"not both"}},
		{head + "- {kind: travel, since_column: a, fields: {distance_m: {column: d, counter: true}}}\n", []string{"begin at the row before"}},
		{head + "- {kind: travel, interval: {column: a, unit: m}, fields: {distance_m: {column: d}}}\n", []string{"unit of length", "time"}},
		{head + "- {kind: standstill}\n", []string{"when"}},
		{head + "- {kind: heading, when: {equals: x}, fields: {deg: {column: d}}}\n", []string{"when", "needs a column"}},
		{head + "- {kind: barometer, fields: {sigma_m: {value: 1}}}\n", []string{"give one of altitude_m, pressure_hpa"}},
		{head + "- {kind: barometer, fields: {altitude_m: {column: a}, pressure_hpa: {column: b}}}\n", []string{"give one of"}},
		{head + "- {kind: range, fields: {range_m: {column: a}}}\n", []string{"give one of beacon, lon, lat"}},
		{head + "- {kind: range, fields: {range_m: {column: a}, lon: {value: 1}}}\n", []string{"lon and lat go together"}},
		{head + "- {kind: range, fields: {range_m: {column: a}, beacon: {text: x}, lon: {value: 1}, lat: {value: 1}}}\n", []string{"give one of"}},
		{head + "- {kind: range, fields: {range_m: {column: a}, beacon: {value: 1}}}\n", []string{"names a text"}},
		{head + "- {kind: range, fields: {range_m: {column: a}, beacon: {column: b, unit: m}}}\n", []string{"a name has no unit"}},
		{head + "- {kind: displacement, fields: {east_m: {column: a}, north_m: {column: b}, sigma_m: {value: 1}, east_m2: {value: 1}, north_m2: {value: 1}}}\n", []string{"give sigma_m, or east_m2 and north_m2"}},
		{head + "- {kind: fix, fields: {lon: {column: a}}}\n", []string{"lat is missing", "go together"}},
		{"delimiter: ab\n" + field("{column: d}"), []string{"c.yaml:1:", "ab", "one character"}},
		{"delimiter: \"1\"\n" + field("{column: d}"), []string{"c.yaml:1:", "cannot stand between"}},
		{"decimal_comma: true\n" + field("{column: d}"), []string{"c.yaml:1:", "another delimiter"}},
		{"skip_lines: -1\n" + field("{column: d}"), []string{"c.yaml:1:", "skip_lines"}},
		{"time: {column: a, columns: [b], format: unix_s}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "give column, or columns"}},
		{"time: {column: a, format: iso}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "iso", "rfc3339"}},
		{"time: {column: a, format: since_s}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "start", "RFC 3339"}},
		{"time: {column: a, format: unix_s, start: 2030-05-01T12:00:00Z}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "remove it"}},
		{"time: {column: a, format: rfc3339, zone: Z}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "go with the format layout"}},
		{"time: {column: a, format: layout, layout: hh:mm:ss}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "YYYY is missing"}},
		{"time: {column: a, format: layout, layout: YYYY-MM-DD hh:mm:ss hh}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "hh is there twice"}},
		{"time: {column: a, format: layout, layout: \"YYYY-MM-DD hh:mm:ss\", zone: CET}\ntruth: {fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"c.yaml:1:", "CET", "+02:00"}},
		{"time: {column: a, format: unix_s}\ntruth: {kind: fix, fields: {lon: {column: a}, lat: {column: b}}}\n", []string{"truth", "neither name nor kind"}},
	} {
		_, err := ParseColumns("c.yaml", []byte(c.text))
		if err == nil {
			t.Errorf("no error: %s", c.text)
			continue
		}
		for _, w := range c.want {
			if !strings.Contains(err.Error(), w) || strings.Contains(err.Error(), "\n") {
				t.Errorf("%q lacks %q: %s", err, w, c.text)
			}
		}
	}
}

func TestSentencesFileErrors(t *testing.T) {
	for text, want := range map[string]string{
		"depht: {}\n":                                "s.yaml:1: ",
		"depth: {sigma_deg: 1}\n":                    "s.yaml:1: depth: its standard deviation is sigma_m, not sigma_deg",
		"depth: {sigma_m: -1}\n":                     "s.yaml:1: depth.sigma_m: -1",
		"heading: {transducer_depth_m: 1}\n":         "only depth has it",
		"heading: {from: [DPT]}\n":                   `"DPT" gives no heading: give HDT, HDG, HDM, VHW`,
		"heading: {from: [T]}\n":                     `"T" gives no heading`,
		"satellites: some\n":                         `"some" must be fix, truth or none`,
		"variation_deg: 200\n":                       "variation_deg: 200",
		"time: {from: gps}\n":                        `"gps" must be sentence, prefix, tag or arrival`,
		"time: {from: prefix}\n":                     "time.format: it is missing",
		"time: {from: tag, format: unix_s}\n":        "are those of a prefix",
		"time: {from: tag, date: 2030-01-01}\n":      "only times from sentences need a date",
		"time: {date: 1.5.2030}\n":                   "give it like 2030-05-01",
		"reckon: {correlation_s: -1}\n":              "reckon.correlation_s",
		"reckon: {sensor: sounder}\n":                `"sounder" is the name for depth`,
		"depth: {sensor: a}\nheading: {sensor: a}\n": `heading.sensor: "a" is the name for depth`,
	} {
		_, err := ParseSentences("s.yaml", []byte(text))
		if err == nil || !strings.Contains(err.Error(), want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%q: %v, want %s", text, err, want)
		}
	}
	if err := (&Sentences{Satellites: "x", VariationDeg: new(float64)}).Validate(); err == nil || !strings.Contains(err.Error(), "satellites") {
		t.Error(err)
	}
}

func TestTimeFormats(t *testing.T) {
	noon := at("12:00:00")
	for _, c := range []struct {
		format     TimeFormat
		text       string
		wantNS     int64 // after noon
		wantFailed string
	}{
		{TimeFormat{Format: "rfc3339"}, "2030-05-01T12:00:00.000000001Z", 1, ""},
		{TimeFormat{Format: "rfc3339"}, "2030-05-01t14:00:00+02:00", 0, ""},
		{TimeFormat{Format: "rfc3339"}, "2030-05-01 12:00:00z", 0, ""},
		{TimeFormat{Format: "rfc3339"}, "2030-05-01 12:00:00", 0, "no RFC 3339 time"},
		{TimeFormat{Format: "rfc3339"}, "1930-05-01T12:00:00Z", 0, "1970"},
		{TimeFormat{Format: "unix_s"}, "1903867200.123456789", 123456789, ""},
		{TimeFormat{Format: "unix_s"}, "1903867200.1234567899", 123456789, ""},
		{TimeFormat{Format: "unix_s"}, "1.9038672005e9", 500000000, ""},
		{TimeFormat{Format: "unix_s"}, "1903867200.", 0, ""},
		{TimeFormat{Format: "unix_s"}, "", 0, "no number"},
		{TimeFormat{Format: "unix_s"}, "NaN", 0, "no number"},
		{TimeFormat{Format: "unix_s"}, "1e300", 0, "1970"},
		{TimeFormat{Format: "unix_s"}, "-1", 0, "1970"},
		{TimeFormat{Format: "unix_s"}, "99999999999999999999", 0, "1970"},
		{TimeFormat{Format: "unix_ms"}, "1903867200001.5", 1500000, ""},
		{TimeFormat{Format: "unix_us"}, "1903867200000001", 1000, ""},
		{TimeFormat{Format: "unix_ns"}, "1903867200000000001", 1, ""},
		{TimeFormat{Format: "since_s", Start: "2030-05-01T11:59:00Z"}, "60.5", 500000000, ""},
		{TimeFormat{Format: "since_s", Start: "2030-05-01T12:00:01Z"}, "-0.5", 500000000, ""},
		{TimeFormat{Format: "since_ms", Start: "2030-05-01T12:00:00Z"}, ".25", 250000, ""},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss,f"}, "01.05.2030 12:00:00,25", 250000000, ""},
		{TimeFormat{Format: "layout", Layout: "YYYYMMDDThhmmss", Zone: "-01:30"}, "20300501T103000", 0, ""},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss"}, "31.04.2030 12:00:00", 0, "no day 2030-04-31"},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss"}, "01.05.2030 24:00:00", 0, "no time 24:00"},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss"}, "1.5.2030 12:00:00", 0, `byte 1: "1." is no DD`},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss"}, "01/05/2030 12:00:00", 0, `byte 3 is "/"`},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss"}, "01.05.2030 12:00", 0, "it ends where"},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss"}, "01.05.2030 12:00:00Z", 0, `byte 20: the layout ends before "Z"`},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss.f"}, "01.05.2030 12:00:00.", 0, "byte 21: the fraction"},
		{TimeFormat{Format: "layout", Layout: "DD.MM.YYYY hh:mm:ss"}, "01.05.1900 12:00:00", 0, "1970"},
	} {
		parse, wrong := c.format.compile()
		if len(wrong) > 0 {
			t.Errorf("%+v: %v", c.format, wrong)
			continue
		}
		is, err := parse(c.text)
		switch {
		case c.wantFailed != "" && (err == nil || !strings.Contains(err.Error(), c.wantFailed)):
			t.Errorf("%+v, %q: %v, want %s", c.format, c.text, err, c.wantFailed)
		case c.wantFailed == "" && (err != nil || is != noon+sensor.Time(c.wantNS)):
			t.Errorf("%+v, %q: %v after noon, want %v (%v)", c.format, c.text, time.Duration(is-noon), time.Duration(c.wantNS), err)
		}
	}
}

// Units against their definitions, computed apart.
func TestUnits(t *testing.T) {
	for name, want := range map[string]float64{
		"km": 1000, "ft": 0.3048, "fm": 1.8288, "nmi": 1852, "mi": 1609.344, "kn": 0.5144444444444444,
		"km/h": 0.2777777777777778, "ft/min": 0.00508, "rad": 57.29577951308232, "mrad": 0.05729577951308232, "turn": 360,
		"rad/s": 57.29577951308232, "deg/min": 1.0 / 60, "turn/min": 6, "rpm": 6, "Pa": 0.01, "kPa": 10, "bar": 1000, "ms": 1e-3, "h": 3600,
	} {
		u, err := parseUnit(name)
		if is := u.convert(1); err != nil || !near(is, want, 1e-15*want) {
			t.Errorf("%s: %v, want %v (%v)", name, is, want, err)
		}
	}
	for _, name := range []string{"furlong", "m/m", "s/m", "km/furlong", "/s", "kn/s"} {
		if u, err := parseUnit(name); err == nil {
			t.Errorf("%s is %+v", name, u)
		}
	}
}

func TestLines(t *testing.T) {
	long := strings.Repeat("x", 9000)
	for _, c := range []struct{ text, want string }{
		{"", ""},
		{"a\nb\r\n\nc", "a|b||c"},
		{"a\n", "a"},
		{"12345678\n", "12345678"},
		{"123456789\nb", "12345678!|b"},
		{long + "\n" + long, "xxxxxxxx!|xxxxxxxx!"},
		{"12345678\r\n", "12345678"},
		{"12345678\rb\n", "12345678!"},
	} {
		for _, one := range []bool{false, true} {
			l := NewLines(strings.NewReader(c.text), 8)
			if one {
				l = NewLines(iotest.OneByteReader(strings.NewReader(c.text)), 8)
			}
			var all []string
			for {
				line, whole, err := l.Next()
				if err != nil {
					break
				}
				s := string(line)
				if !whole {
					s += "!"
				}
				all = append(all, s)
			}
			if is := strings.Join(all, "|"); is != c.want {
				t.Errorf("%.20q: %q, want %q", c.text, is, c.want)
			}
		}
	}
	l := NewLines(iotest.TimeoutReader(strings.NewReader("ab")), 8)
	if _, _, err := l.Next(); err == nil {
		t.Error("a broken stream gives a line")
	}
}
