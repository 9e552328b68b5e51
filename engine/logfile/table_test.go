package logfile

import (
	"bytes"
	"encoding/csv"
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
)

const timeColumn = "time: {column: t, format: unix_s}\n"

// Every kind, in the names and units of drive files.
func TestKindsFromColumns(t *testing.T) {
	const second = 1903867200 // 2030-05-01 12:00:00
	for _, c := range []struct {
		columns string
		cells   []string // of a row, after the time; a row a second
		want    []string
	}{
		{
			"{kind: travel, fields: {distance_m: {column: a}, sigma_m: {value: 0.1}}}",
			[]string{"3", "4"},
			[]string{"12:00:01 travel travel 1s 4 ±0.1"},
		},
		{
			"{name: odo, kind: travel, fields: {distance_m: {column: a, unit: km, counter: true}}}",
			[]string{"100.000", "100.005", "100.003"},
			[]string{"12:00:01 odo travel 1s 5 ±0", "12:00:02 odo travel 1s -2 ±0"},
		},
		{
			"{name: ticks, kind: travel, fields: {distance_m: {column: a, scale: 0.31, wrap: 65536, counter: true}, sigma_m: {column: b, unit: cm}}}",
			[]string{"65530,5", "4,7"},
			[]string{"12:00:01 ticks travel 1s 3.1 ±0.07"},
		},
		{
			"{name: gyro, kind: turn, fields: {angle_deg: {column: a, unit: rad/s, rate: interval}, sigma_deg: {value: 0.001, unit: rad}}}",
			[]string{"9", "0.1"},
			[]string{"12:00:01 gyro turn 1s 5.72958 ±0.0572958"},
		},
		{
			"{name: gyro, kind: turn, fields: {angle_deg: {column: a, unit: deg/min, rate: instant, sign: -1}}}",
			[]string{"60", "120"},
			[]string{"12:00:01 gyro turn 1s -1.5 ±0"},
		},
		{
			"{name: yaw, kind: turn, fields: {angle_deg: {column: a, counter: true, wrap: 360}}}",
			[]string{"350", "10", "355"},
			[]string{"12:00:01 yaw turn 1s 20 ±0", "12:00:02 yaw turn 1s -15 ±0"},
		},
		{
			"{kind: turn, interval: {column: b, unit: ms}, fields: {angle_deg: {column: a}}}",
			[]string{"2,500"},
			[]string{"12:00:00 turn turn 0.5s 2 ±0"},
		},
		{
			"{kind: turn, since_column: b, fields: {angle_deg: {column: a}}}",
			[]string{fmt.Sprintf("2,%d.75", second-2)},
			[]string{"12:00:00 turn turn 1.25s 2 ±0"},
		},
		{
			"{kind: turn, interval: {value: 0.25}, fields: {angle_deg: {column: a, rate: interval}}}",
			[]string{"2"},
			[]string{"12:00:00 turn turn 0.25s 0.5 ±0"},
		},
		{
			"{kind: displacement, fields: {east_m: {column: a}, north_m: {column: b}, sigma_m: {value: 2}}}",
			[]string{"1,1", "3,4"},
			[]string{"12:00:01 displacement displacement 1s 3 4 4 0 4"},
		},
		{
			"{kind: displacement, fields: {east_m: {column: a, counter: true}, north_m: {column: b, rate: interval, unit: km/h}, east_m2: {value: 2}, east_north_m2: {value: 1}, north_m2: {value: 3}}}",
			[]string{"10,36", "3,36"},
			[]string{"12:00:01 displacement displacement 1s -7 10 2 1 3"},
		},
		{
			"{kind: displacement, fields: {east_m: {column: a}, north_m: {column: b}}}",
			[]string{"1,1", "3,4"},
			[]string{"12:00:01 displacement displacement 1s 3 4 0 0 0"},
		},
		{
			"{kind: body_displacement, fields: {forward_m: {column: a}, right_m: {column: b}, turn_deg: {column: a, unit: rad}, sigma_forward_m: {value: 0.1}, sigma_right_m: {value: 0.2}, sigma_turn_deg: {value: 0.3}}}",
			[]string{"1,2", "1,2"},
			[]string{"12:00:01 body_displacement body_displacement 1s 1 2 57.2958 ±0.1 0.2 0.3"},
		},
		{"{kind: speed, fields: {mps: {column: a, unit: kn}, sigma_mps: {value: 1, unit: km/h}}}", []string{"10"}, []string{"12:00:00 speed speed 5.14444 ±0.277778"}},
		{"{kind: speed, fields: {mps: {column: a}, course_deg: {column: b}}}", []string{"10,45", "11,"}, []string{"12:00:00 speed speed 10 to 45 ±0", "12:00:01 speed speed 11 ±0"}},
		{"{kind: heading, fields: {deg: {column: a, sign: -1, offset: 90}, sigma_deg: {value: 2}}}", []string{"30"}, []string{"12:00:00 heading heading 60 ±2"}},
		{"{kind: clearance, fields: {clearance_m: {column: a, unit: ft}, altitude_m: {column: b, unit: ft}, sigma_m: {value: 3}}}", []string{"100,1000"}, []string{"12:00:00 clearance clearance 30.48 304.8 ±3"}},
		{"{kind: sounding, fields: {depth_below_transducer_m: {column: a, unit: fm}, transducer_depth_m: {value: 0.8}, sigma_m: {value: 0.3}}}", []string{"10"}, []string{"12:00:00 sounding sounding 18.288+0.8 ±0.3"}},
		{"{kind: barometer, fields: {pressure_hpa: {column: a, unit: Pa}, sigma_m: {value: 3}}}", []string{"101325"}, []string{"12:00:00 barometer barometer true 0 1013.25 ±3"}},
		{"{kind: barometer, fields: {altitude_m: {column: a}, sigma_m: {value: 3}}}", []string{"55.5"}, []string{"12:00:00 barometer barometer false 55.5 0 ±3"}},
		{"{kind: range, fields: {range_m: {column: a, unit: nmi}, beacon: {text: mast}, sigma_m: {value: 10}}}", []string{"0.5"}, []string{"12:00:00 range range mast 926 ±10"}},
		{"{kind: range, fields: {range_m: {column: a}, beacon: {column: b}}}", []string{"5,mast", "6,pier"}, []string{"12:00:00 range range mast 5 ±0", "12:00:01 range range pier 6 ±0"}},
		{"{kind: bearing, fields: {bearing_deg: {column: a}, lon: {value: 10}, lat: {value: 50}, sigma_deg: {value: 2}}}", []string{"120"}, []string{"12:00:00 bearing bearing 10,50 120 ±2"}},
		{"{kind: acoustic_bearing, fields: {bearing_deg: {column: a}, post: {column: b}}}", []string{"120,north"}, []string{"12:00:00 acoustic_bearing acoustic_bearing north 120 ±0"}},
		{"{kind: fix, fields: {lon: {column: b}, lat: {column: a}, sigma_m: {value: 5}}}", []string{"48.5,11.25"}, []string{"12:00:00 fix fix 11.2500000 48.5000000 ±5"}},
		{"{kind: sighting, fields: {road: {column: a}, mistaken: {value: 0.1}, who: {text: driver}}}", []string{`"High Street, east"`}, []string{"12:00:00 sighting sighting High Street, east 0.1 driver"}},
		{"{kind: standstill, when: {column: a, equals: stop}}", []string{"stop", "go"}, []string{"12:00:00 standstill standstill"}},
		{"{kind: heading, when: {column: b, equals: hdg}, fields: {deg: {column: a}}}", []string{"1,hdg", "2,roll", "3,hdg"}, []string{"12:00:00 heading heading 1 ±0", "12:00:02 heading heading 3 ±0"}},
	} {
		t.Run(c.columns, func(t *testing.T) {
			text := "t,a,b\n"
			for i, cells := range c.cells {
				if !strings.Contains(strings.ReplaceAll(cells, ", ", ""), ",") {
					cells += ","
				}
				text += fmt.Sprintf("%d,%s\n", second+i, cells)
			}
			g := readCSV(t, text, timeColumn+"sensors:\n- "+c.columns+"\n")
			g.want(t, c.want...)
			if len(g.tally.Refused) > 0 {
				t.Errorf("refused %+v", g.tally.Refused)
			}
		})
	}
}

// A wide table, with empty cells, and a truth.
func TestSeveralSensors(t *testing.T) {
	g := readCSV(t, strings.Join([]string{
		"# recorded by hand", "", "utc;odo;heading;lat;lon",
		"2030-05-01 12:00:00Z;1000,5;90,0;48,1;11,5",
		"2030-05-01T12:00:00.5Z;1003,5;;-;NA",
		`2030-05-01T13:00:01+01:00;"1007,5" ;91,5;48,1001;11,5`,
	}, "\r\n"), `
delimiter: ";"
decimal_comma: true
comment: "#"
time: {column: utc, format: rfc3339}
sensors:
- {name: odo, kind: travel, fields: {distance_m: {column: odo, counter: true}, sigma_m: {value: 0.1}}}
- {name: compass, kind: heading, fields: {deg: {column: heading}, sigma_deg: {value: 2}}}
truth: {fields: {lat: {column: lat}, lon: {column: lon}, sigma_m: {value: 0.5}}}
`)
	g.want(t,
		"12:00:00 compass heading 90 ±2",
		"12:00:00.5 odo travel 0.5s 3 ±0.1",
		"12:00:01 odo travel 0.5s 4 ±0.1",
		"12:00:01 compass heading 91.5 ±2")
	if len(g.truths) != 2 || g.truths[1].SigmaM != 0.5 || g.truths[1].Time != at("12:00:01") || g.truths[1].HasHeight {
		t.Errorf("%+v", g.truths)
	}
	if n := g.events[3].Number; n != 6 {
		t.Errorf("its number is %d, its line 6", n)
	}
	if ty := g.tally; ty.Lines != 6 || ty.Truths != 2 || ty.Usable() != 4 || ty.PassedOver["first of odo"] != 1 || ty.Unusable() != 0 {
		t.Errorf("%+v", ty)
	}
}

// A long table: which sensor a row is of stands in a column.
func TestOneSensorARow(t *testing.T) {
	g := readCSV(t, "0 odo 10\n1 yaw 3\n2 odo 15\n\n3\tyaw\t4\n", `
delimiter: space
header: false
time: {column: 1, format: since_s, start: 2030-05-01T12:00:00Z}
sensors:
- {name: odo, kind: travel, when: {column: 2, equals: odo}, fields: {distance_m: {column: 3, counter: true}}}
- {name: gyro, kind: turn, when: {column: 2, equals: yaw}, fields: {angle_deg: {column: 3, rate: interval, unit: deg/s}}}
`)
	g.want(t, "12:00:02 odo travel 2s 5 ±0", "12:00:03 gyro turn 2s 8 ±0")
}

// Times that stand still, go back or leave a gap.
func TestIncrementsAndTime(t *testing.T) {
	for _, c := range []struct {
		name, fields string
		rows         string
		want         []string
		refused      map[string]int
		passed       map[string]int
	}{
		{
			"plain ones at one time are added", "{column: a}", "0 1,1 2,1 3,2 4",
			[]string{"12:00:01 x travel 1s 2 ±0", "12:00:02 x travel 1s 7 ±0"},
			nil,
			map[string]int{"first of x": 1},
		},
		{
			"a counter at one time", "{column: a, counter: true}", "0 1,1 2,1 3,2 4",
			[]string{"12:00:01 x travel 1s 1 ±0", "12:00:02 x travel 1s 2 ±0"},
			nil,
			map[string]int{"first of x": 1},
		},
		{
			"back", "{column: a, counter: true}", "1 1,2 2,0 3,3 4",
			[]string{"12:00:02 x travel 1s 1 ±0", "12:00:03 x travel 1s 2 ±0"},
			map[string]int{"time goes back: x": 1},
			map[string]int{"first of x": 1},
		},
		{
			"a gap in a rate", "{column: a, rate: interval, unit: m/s}", "0 1,1 2,20 3,21 4",
			[]string{"12:00:01 x travel 1s 2 ±0", "12:00:21 x travel 1s 4 ±0"},
			nil,
			map[string]int{"first of x": 1, "after a gap: x": 1},
		},
		{
			"a gap in a counter is none", "{column: a, counter: true}", "0 1,1 2,20 300",
			[]string{"12:00:01 x travel 1s 1 ±0", "12:00:20 x travel 19s 298 ±0"},
			nil,
			map[string]int{"first of x": 1},
		},
		{
			"a counter that begins anew", "{column: a, counter: true}", "0 9000,1 9002,2 1,3 4",
			[]string{"12:00:01 x travel 1s 2 ±0", "12:00:03 x travel 1s 3 ±0"},
			map[string]int{"counter jumps: x": 1},
			map[string]int{"first of x": 1},
		},
		{
			"a counter that is not said to be one", "{column: a}", "0 41200,1 41203,2 41206,3 1400",
			[]string{"12:00:03 x travel 1s 1400 ±0"},
			map[string]int{"more than moves in a step: x": 2},
			map[string]int{"first of x": 1},
		},
		{
			"a stated rate", "{column: a, counter: true, max_rate: 3}", "0 0,1 2,2 6,3 7",
			[]string{"12:00:01 x travel 1s 2 ±0", "12:00:03 x travel 1s 1 ±0"},
			map[string]int{"counter jumps: x": 1},
			map[string]int{"first of x": 1},
		},
		{
			"a missing reading", "{column: a, counter: true}", "0 0,1 -,2 6",
			[]string{"12:00:02 x travel 2s 6 ±0"},
			nil,
			map[string]int{"first of x": 1},
		},
	} {
		t.Run(c.name, func(t *testing.T) {
			g := readCSV(t, strings.ReplaceAll(c.rows, ",", "\n"), `
delimiter: space
header: false
time: {column: 1, format: since_s, start: 2030-05-01T12:00:00Z}
sensors: [{name: x, kind: travel, fields: {distance_m: `+strings.Replace(c.fields, "column: a", "column: 2", 1)+`}}]
`)
			g.want(t, c.want...)
			if c.refused == nil {
				c.refused = map[string]int{}
			}
			g.refused(t, c.refused)
			g.passed(t, c.passed)
		})
	}
}

// Increments that say themselves when they begin must do so before they end.
func TestSinceAndIntervalRefused(t *testing.T) {
	for columns, rows := range map[string]string{
		"since_column: b":       "5,1,5|5,1,6|5,1,x|5,1,4",
		"interval: {column: b}": "5,1,0|5,1,-1|5,1,x|5,1,",
	} {
		g := readCSV(t, "t,a,b\n"+strings.ReplaceAll(rows, "|", "\n")+"\n", timeColumn+"sensors: [{kind: travel, "+columns+", fields: {distance_m: {column: a}}}]\n")
		if len(g.events) > 1 || g.tally.Unusable() != 4-len(g.events) {
			t.Errorf("%s: %d events, refused %+v", columns, len(g.events), g.tally.Refused)
		}
	}
}

// What is wrong with a row is located, and the rest of the log is read.
func TestRefusedRows(t *testing.T) {
	columns := timeColumn + `
sensors:
- {name: compass, kind: heading, fields: {deg: {column: h}, sigma_deg: {column: s}}}
- {name: gnss, kind: fix, fields: {lon: {column: lon}, lat: {column: lat}, sigma_m: {value: 5}}}
- {name: posts, kind: acoustic_bearing, fields: {bearing_deg: {column: b}, post: {column: post}, sigma_deg: {value: 5}}}
`
	const good = "1903867201,5,1,,,,\n"
	for _, c := range []struct {
		row, reason, place string
	}{
		{"yesterday,5,1,,,,", "time", "2:1: yesterday"},
		{"-5,5,1,,,,", "time", "2:1: -5"},
		{"99999999999,5,1,,,,", "time", "2:1: "},
		{"1903867200,5", "too few cells", "2:1: 2 cells where column 7"},
		{`1903867200,"5,1,,,,`, "not a row", "2:1: a quote"},
		{`1903867200,"5"x,1,,,,`, "not a row", "2:1: byte 15"},
		{"1903867200,north,1,,,,", "not a number: deg", "2:12: north"},
		{"1903867200,0x10,1,,,,", "not a number: deg", "2:12: 0x10"},
		{"1903867200,Inf,1,,,,", "not a number: deg", "2:12: Inf"},
		{"1903867200,1e999,1,,,,", "not a number: deg", "2:12: 1e999"},
		{"1903867200,1_0,1,,,,", "not a number: deg", "2:12: 1_0"},
		{"1903867200,1e9,1,,,,", "unusable: compass", "2:12: heading: deg"},
		{"1903867200,5,-1,,,,", "unusable: compass", "2:12: heading: sigma_deg"},
		{"1903867200,,,500,48,,", "unusable: gnss", "2:14: fix: position lon 500"},
		{"1903867200,,,11,,,", "incomplete: gnss", "2:1: lat is missing"},
		{"1903867200,,,,,3,\xff", "not a name: post", "2:18: ·"},
		{strings.Repeat("1", maxRow+1), "a row that is too long", "2:1: over 65536 bytes"},
		{strings.Repeat(",", maxCells+1), "not a row", "2:1: the row has over"},
	} {
		t.Run(c.row[:min(len(c.row), 40)], func(t *testing.T) {
			g := readCSV(t, "t,h,s,lon,lat,b,post\n"+c.row+"\n"+good, columns)
			if len(g.events) != 1 || len(g.tally.Refused) != 1 || g.tally.Refused[0].Reason != c.reason || !strings.HasPrefix(g.tally.Refused[0].First[0], "x.csv:"+c.place) {
				t.Errorf("%d events; refused %+v, want %s at %s", len(g.events), g.tally.Refused, c.reason, c.place)
			}
		})
	}
}

// A log that does not fit its columns is an error of one line.
func TestUnfitTables(t *testing.T) {
	columns := timeColumn + "sensors: [{kind: heading, fields: {deg: {column: h}}}]\n"
	for _, c := range []struct{ text, columns, want string }{
		{"", columns, "x.csv: it has no header"},
		{"\n\n", columns, "x.csv: it has no header"},
		{"a,b\n", columns, `x.csv:1: the header has no column "t": it has a, b`},
		{"t,h,h\n", columns, `x.csv:1: the header has two columns "h"`},
		{"\"t,h\n", columns, "x.csv:1: the header: a quote"},
		{strings.Repeat("x", maxRow+1), columns, "x.csv:1: the header is over"},
		{"1,2\n", "header: false\n" + columns, `column file: "t" is no column: without a header`},
	} {
		_, err := ReadCSV(strings.NewReader(c.text), "x.csv", parseColumns(t, c.columns), func(Record) error { return nil })
		if err == nil || !strings.HasPrefix(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%.20q: %v, want %s", c.text, err, c.want)
		}
	}
	// A byte order mark, and lines before the header.
	g := readCSV(t, "\ufeffpreamble\nt,h\n1903867200,5\n", "skip_lines: 1\n"+columns)
	g.want(t, "12:00:00 heading heading 5 ±0")
	g = readCSV(t, "\ufefft,h\n1903867200,5\n", columns)
	g.want(t, "12:00:00 heading heading 5 ±0")
}

// split agrees with encoding/csv, the slow way with an allocation a row, on
// random rows that are valid for both.
func TestSplitAgainstReference(t *testing.T) {
	for seed := range uint64(2000) {
		rng := rand.New(rand.NewPCG(seed, 2))
		delim := rune(",;|\t"[rng.IntN(4)])
		var want []string
		var b bytes.Buffer
		w := csv.NewWriter(&b)
		w.Comma = delim
		for range 1 + rng.IntN(6) {
			var cell []byte
			for range rng.IntN(5) {
				cell = append(cell, "a\",; \t|0."[rng.IntN(9)])
			}
			want = append(want, string(bytes.Trim(cell, " \t")))
		}
		if err := w.Write(want); err != nil {
			t.Fatal(err)
		}
		w.Flush()
		line := bytes.TrimSuffix(b.Bytes(), []byte("\n"))
		cells, err := split(nil, line, byte(delim))
		var is []string
		for _, c := range cells {
			is = append(is, string(c.text))
		}
		if err != nil || fmt.Sprintf("%q", is) != fmt.Sprintf("%q", want) {
			t.Fatalf("seed %d: %q with %q: %q, want %q (%v)", seed, line, delim, is, want, err)
		}
	}
}

func TestSplitBySpaces(t *testing.T) {
	for line, want := range map[string]string{
		"":           `[]`,
		"  ":         `[]`,
		"a":          `["a"@1]`,
		"  a \t b  ": `["a"@3 "b"@7]`,
		`"a b" c`:    `["a b"@1 "c"@7]`,
		"1\t2":       `["1"@1 "2"@3]`,
	} {
		cells, err := split(nil, []byte(line), ' ')
		var all []string
		for _, c := range cells {
			all = append(all, fmt.Sprintf("%q@%d", c.text, c.byte))
		}
		if is := "[" + strings.Join(all, " ") + "]"; is != want || err != nil {
			t.Errorf("%q: %s, want %s (%v)", line, is, want, err)
		}
	}
	if _, err := split(nil, []byte(`"a"b`), ' '); err == nil {
		t.Error(`"a"b passes`)
	}
}
