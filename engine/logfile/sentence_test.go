package logfile

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
)

// zda is the time that most tests begin with.
const zda = "GPZDA,120000.00,01,05,2030,00,00"

// Published example sentences with their checksums: SDDPT, VWVHW, HEHDT from
// published lists of NMEA 0183 sentences (read there), GPGGA from memory.
var published = map[string]byte{
	"SDDPT,14.39,0.00":                 0x68,
	"VWVHW,45.0,T,40.4,M,6.2,N,11.5,K": 0x64,
	"HEHDT,272.0,T":                    0x28,
	"GPGGA,123519,4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,": 0x47,
}

func TestPublishedChecksums(t *testing.T) {
	for body, want := range published {
		if is := checksum([]byte(body)); is != want {
			t.Errorf("%s: %02X, want %02X", body, is, want)
		}
		line := fmt.Sprintf("$%s*%02X", body, want)
		if _, pass, bad := frame([]byte(line)); bad != nil || pass != "" {
			t.Errorf("%s: %v %v", line, pass, bad)
		}
		// Every single wrong bit of the body is noticed.
		for i := range len(body) {
			for bit := range 8 {
				b := []byte(line)
				b[1+i] ^= 1 << bit
				if _, pass, bad := frame(b); bad == nil && pass == "" {
					t.Errorf("%q passes for %s", b, line)
				}
			}
		}
	}
}

// Each sentence, what becomes of it, and its default sigma, as the package's
// table says.
func TestSentences(t *testing.T) {
	for _, c := range []struct {
		body, options string
		want          []string
	}{
		// √(0.25 + (0.013·14.39)²)/1.96 = 0.272372
		{"SDDPT,14.39,0.00", "", []string{"12:00:00 sounder sounding 14.39+0 ±0.272372"}},
		{"SDDPT,14.39,0.80,100", "", []string{"12:00:00 sounder sounding 14.39+0.8 ±0.272372"}},
		{"SDDPT,14.39,-1.20", "depth: {transducer_depth_m: 0.7, sigma_m: 0.2}", []string{"12:00:00 sounder sounding 14.39+0.7 ±0.2"}},
		{"SDDPT,30,", "sigmas_from_suite: true", []string{"12:00:00 sounder sounding 30+0 ±0"}},
		{"SDDPT,,", "", nil},
		{"IIDBT,47.2,f,14.4,M,7.9,F", "", []string{"12:00:00 sounder sounding 14.4+0 ±0.272395"}},
		{"IIDBT,100,f,,M,,F", "", []string{"12:00:00 sounder sounding 30.48+0 ±0.325495"}},
		{"IIDBT,,f,,M,10,F", "depth: {sensor: echo}", []string{"12:00:00 echo sounding 18.288+0 ±0.282472"}},
		// 6.2 kn = 3.18956 m/s; the true heading goes before the magnetic one.
		{"VWVHW,45.0,T,40.4,M,6.2,N,11.5,K", "", []string{"12:00:00 compass heading 45 ±1", "12:00:00 water_speed speed 3.18956 ±0.3"}},
		{"VWVHW,,T,40.4,M,,N,11.5,K", "variation_deg: 4.6", []string{"12:00:00 compass heading 45 ±3", "12:00:00 water_speed speed 3.19444 ±0.3"}},
		{"VWVHW,,,,,6.2,N,,", "water_speed: {sigma_mps: 0.5}", []string{"12:00:00 water_speed speed 3.18956 ±0.5"}},
		{"GPVTG,54.7,T,34.4,M,5.5,N,10.2,K,A", "", []string{"12:00:00 ground_speed speed 2.82944 to 54.7 ±0.1"}},
		{"GPVTG,,T,,M,0.0,N,0.0,K,D", "", []string{"12:00:00 ground_speed speed 0 ±0.1"}},
		{"GPVTG,54.7,T,34.4,M,5.5,N,10.2,K,N", "", nil},
		{"GPVTG,54.7,T,34.4,M,5.5,N,10.2,K,A", "satellites: none", nil},
		{"VMVBW,6.0,-0.5,A,5.0,1.0,A", "", []string{"12:00:00 water_speed speed 3.08667 ±0.3", "12:00:00 ground_speed speed 2.57222 ±0.1"}},
		{"VMVBW,-6.0,0.0,A,5.0,1.0,V,,V,,V", "", []string{"12:00:00 water_speed speed -3.08667 ±0.3"}},
		{"HEHDT,272.0,T", "", []string{"12:00:00 compass heading 272 ±1"}},
		{"HCHDG,98.3,0.0,E,12.6,W", "", []string{"12:00:00 compass heading 85.7 ±3"}},
		{"HCHDG,5.0,2.0,W,12.6,W", "heading: {sigma_deg: 2}", []string{"12:00:00 compass heading 350.4 ±2"}},
		{"HCHDG,355.0,,,12.6,E", "", []string{"12:00:00 compass heading 7.6 ±3"}},
		{"HCHDG,98.3,1.0,E,,", "variation_deg: -2", []string{"12:00:00 compass heading 97.3 ±3"}},
		{"HCHDM,238.5,M", "variation_deg: 2.5", []string{"12:00:00 compass heading 241 ±3"}},
		// 48°07.038′ N, 11°31.000′ E; 4 m × 0.9
		{"GPGGA,120000,4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,", "", []string{"12:00:00 fix fix 11.5166667 48.1173000 ±3.6"}},
		{"GNGGA,120000,4807.038,S,01131.000,W,2,08,1.5,545.4,M,46.9,M,,", "", []string{"12:00:00 fix fix -11.5166667 -48.1173000 ±1.5"}},
		{"GNGGA,120000,4807.038,N,01131.000,E,4,08,,,M,46.9,M,,", "", []string{"12:00:00 fix fix 11.5166667 48.1173000 ±0.05"}},
		{"GNGGA,120000,4807.038,N,01131.000,E,5,08,3,,M,46.9,M,,", "", []string{"12:00:00 fix fix 11.5166667 48.1173000 ±0.5"}},
		{"GNGGA,120000,4807.038,N,01131.000,E,6,08,3,,M,46.9,M,,", "", nil}, // dead reckoning
		{"GNGGA,120000,,,,,0,00,,,M,,M,,", "", nil},
		{"GPRMC,120000.50,A,4807.038,N,01131.000,E,022.4,084.4,010530,003.1,W,A", "", []string{
			"12:00:00.5 fix fix 11.5166667 48.1173000 ±8", "12:00:00.5 ground_speed speed 11.5236 to 84.4 ±0.1",
		}},
		{"GPRMC,120000,A,4807.038,N,01131.000,E,,,010530,,", "fix: {sigma_m: 3}", []string{"12:00:00 fix fix 11.5166667 48.1173000 ±3"}},
		{"GPRMC,120000,V,4807.038,N,01131.000,E,1,2,010530,,", "", nil},
		{"GPRMC,120000,A,4807.038,N,01131.000,E,1,2,010530,,,E", "", nil}, // estimated
		{"GPGLL,4807.038,N,01131.000,E,120000.00,A,D", "", []string{"12:00:00 fix fix 11.5166667 48.1173000 ±2"}},
		{"GPGLL,4807.038,N,01131.000,E,120000.00,V", "", nil},
	} {
		g := readNMEA(t, log(zda, c.body), c.options)
		t.Run(c.body, func(t *testing.T) {
			g.want(t, c.want...)
			if len(g.tally.Refused) > 0 {
				t.Errorf("refused: %+v", g.tally.Refused)
			}
		})
	}
}

// What is wrong is refused by a name of its own, and located.
func TestRefusedSentences(t *testing.T) {
	for _, c := range []struct {
		line, reason string
		byte         int
	}{
		{"$SDDPT,14.39,0.00*69", "checksum", 18},
		{"$SDDPT,14.39,0.00", "no checksum", 1},
		{"$SDDPT,14.39,0.00*6", "no checksum", 18},
		{"$SDDPT,14.39,0.00*G8", "no checksum", 18},
		{"hello", "no sentence", 1},
		{sum("SDdPT,14.39,0.00"), "address", 2},
		{sum("DPT,14.39,0.00"), "address", 2},
		{sum(""), "address", 2},
		{sum("SDDPT,1\x014.39,0.00"), "not text", 9},
		{sum("SDDPT" + strings.Repeat(",", maxFields+2)), "too many fields", maxFields + 8},
		{"$SDDPT," + strings.Repeat("1", MaxSentenceLine), "a line that is too long", 1},
		{"$GPGGA,1200$SDDPT,14.39,0.00*68", "cut off by the next sentence", 1},
		{sum("SDDPT,14,39,0.00,x"), "", 0}, // more fields than are known are no fault
		{sum("SDDPT,deep,0.00"), "DPT: not a number", 8},
		{sum("SDDPT,1e1,0.00"), "DPT: not a number", 8},
		{sum("SDDPT,0x10,0.00"), "DPT: not a number", 8},
		{sum("SDDPT,Inf,0.00"), "DPT: not a number", 8},
		{sum("SDDPT,-3,0.00"), "DPT: out of range", 8},
		{sum("SDDPT,13000,0.00"), "DPT: out of range", 8},
		{sum("SDDPT,13,0.0.0"), "DPT: not a number", 11},
		{sum("IIDBT,,,14.4,f,,"), "DBT: the unit is not M", 15},
		{sum("HEHDT,272.0,M"), "HDT: the unit is not T", 14},
		{sum("HEHDT,372.0,T"), "HDT: out of range", 8},
		{sum("HCHDM,272.0,M"), "HDM: a magnetic heading without the variation", 1},
		{sum("HCHDG,272.0,1.0,E,,"), "HDG: a magnetic heading without the variation", 1},
		{sum("HCHDG,272.0,1.0,X,,"), "HDG: the direction is neither E nor W", 18},
		{sum("HCHDG,272.0,1.0,E,3,"), "HDG: the direction is neither E nor W", 22},
		{sum("VWVHW,,,40.4,M,,,,"), "VHW: a magnetic heading without the variation", 1},
		{sum("VWVHW,45.0,T,40.4,M,6.2,K,11.5,K"), "VHW: the unit is not N", 26},
		{sum("GPGGA,126000,4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"), "GGA: not a time", 8},
		{sum("GPGGA,120000,4867.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"), "GGA: out of range", 15},
		{sum("GPGGA,120000,9807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"), "GGA: out of range", 15},
		{sum("GPGGA,120000,48.07038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"), "GGA: not degrees and minutes", 15},
		{sum("GPGGA,120000,4807.038,E,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"), "GGA: the direction is neither N nor S", 24},
		{sum("GPGGA,110000,4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"), "GGA: its time goes back", 1},
		{sum("GPRMC,120001,A,4807.038,N,01131.000,E,1,2,310630,,"), "RMC: not a date", 44},
		{sum("GPZDA,120001,31,06,2030,00,00"), "ZDA: not a date", 15},
	} {
		g := readNMEA(t, log(zda)+c.line+"\r\n", "")
		t.Run(c.line[:min(len(c.line), 40)], func(t *testing.T) {
			want := map[string]int{}
			if c.reason != "" {
				want[c.reason] = 1
			}
			g.refused(t, want)
			if len(g.tally.Refused) == 1 {
				if place := fmt.Sprintf("x.nmea:2:%d: ", c.byte); !strings.HasPrefix(g.tally.Refused[0].First[0], place) {
					t.Errorf("located at %q, want %q", g.tally.Refused[0].First[0], place)
				}
			}
		})
	}
}

// A sentence is found behind noise, a cut-off sentence or a prefix.
func TestFindsSentences(t *testing.T) {
	for _, before := range []string{"", "\x00\xff~", "$GPGGA,1235", "2030-05-01T12:00:00Z,", `\s:gps,c:1903953600*1E\`} {
		g := readNMEA(t, log(zda)+before+"$SDDPT,14.39,0.00*68  \r\n", "")
		if len(g.events) != 1 {
			t.Errorf("%q: %d events", before, len(g.events))
		}
	}
	g := readNMEA(t, log(zda, "PXYZ,1,2", "GPGSV,1", "")+"!AIVDM,1*"+fmt.Sprintf("%02X", checksum([]byte("AIVDM,1")))+"\r\n\r\n", "")
	g.passed(t, map[string]int{"proprietary": 1, "GSV": 1, "!AIVDM": 1, "blank line": 1})
	g.refused(t, map[string]int{"address": 1})
}

// Rates become turns by the mean of two, over at most ten seconds.
func TestRateOfTurn(t *testing.T) {
	clock := func(s float64) string { return fmt.Sprintf("GPZDA,1200%05.2f,01,05,2030,00,00", s) }
	g := readNMEA(t, log(
		clock(0), "TIROT,60.0,A", clock(1), "TIROT,120.0,A", clock(3), "TIROT,-60.0,A",
		clock(14), "TIROT,6,A", clock(15), "TIROT,6,V", clock(16), "TIROT,12,A"), "")
	// σ² = ((0.5 + 0.05·rate)/2 °/min)²·dt·max(dt, 1 s) + (Δ·dt)²/12:
	// 0.041667² + 1²/12, 0.033333² + 6²/12, 0.015833² + 0.2²/12
	g.want(t,
		"12:00:01 turn_rate turn 1s 1.5 ±0.291667",
		"12:00:03 turn_rate turn 2s 1 ±1.73237",
		"12:00:16 turn_rate turn 2s 0.3 ±0.0598668")
	g.passed(t, map[string]int{"ROT: the first of a turn": 2, "ROT without a value": 1})
	g = readNMEA(t, log(clock(0), "TIROT,60.0,A", clock(0.5), "TIROT,60.0,A"), "turn_rate: {sigma_dps: 0.2}")
	// 0.2 · √(0.5·1)
	g.want(t, "12:00:00.5 turn_rate turn 0.5s 0.5 ±0.141421")
}

// One sentence gives a quantity; a better one takes over, another one after
// five seconds of silence.
func TestOneSentenceAQuantity(t *testing.T) {
	second := func(s int) string { return fmt.Sprintf("GPZDA,1200%02d.00,01,05,2030,00,00", s) }
	g := readNMEA(t, log(
		second(0), "IIDBT,,f,10,M,,F", "SDDPT,10,0",
		second(1), "IIDBT,,f,11,M,,F", "SDDPT,11,0",
		second(2), "IIDPT,12,0", "SDDPT,12,0",
		second(3), "IIDPT,13,0",
		second(8), "IIDPT,18,0", "SDDPT,18,0"), "depth: {sigma_m: 1}")
	g.want(t,
		"12:00:00 sounder sounding 10+0 ±1", // DBT; the DPT beside it says the same
		"12:00:01 sounder sounding 11+0 ±1", // DPT
		"12:00:02 sounder sounding 12+0 ±1",
		"12:00:08 sounder sounding 18+0 ±1") // six seconds of silence: the other one
	g.passed(t, map[string]int{"DPT: another sentence gives depth": 4, "DBT: another sentence gives depth": 1})

	both := log(zda, "HEHDT,10,T", "HCHDG,20,,,0,E", "GPRMC,120000,A,4807.038,N,01131.000,E,,,010530,,")
	for options, want := range map[string]string{
		"":                              "12:00:00 compass heading 10 ±1",
		"heading: {from: [HDG]}":        "12:00:00 compass heading 20 ±3",
		"heading: {from: [HCHDG, HDT]}": "12:00:00 compass heading 10 ±1",
		"heading: {from: [XXHDT, HDG]}": "12:00:00 compass heading 20 ±3",
		"heading: {use: false}":         "",
	} {
		g := readNMEA(t, both, "satellites: none\n"+options)
		if want == "" {
			g.want(t)
		} else {
			g.want(t, want)
		}
	}
}

// Positions can be what to compare with.
func TestSatellitesAsTruth(t *testing.T) {
	text := log(zda, "GPGGA,120000,4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,", "GPVTG,54.7,T,34.4,M,5.5,N,10.2,K,A", "SDDPT,14,0")
	g := readNMEA(t, text, "satellites: truth\ndepth: {sigma_m: 1}")
	g.want(t, "12:00:00 sounder sounding 14+0 ±1")
	if len(g.truths) != 1 {
		t.Fatalf("%d truths", len(g.truths))
	}
	tr := g.truths[0]
	lon, lat := tr.Position.Degrees()
	if tr.Time != at("12:00:00") || !near(lon, 11+31.0/60, 1e-12) || !near(lat, 48+7.038/60, 1e-12) || tr.SigmaM != 3.6 || !tr.HasHeight || tr.HeightM != 545.4 {
		t.Errorf("%+v", tr)
	}
	if g.tally.Truths != 1 || g.tally.Usable() != 1 {
		t.Errorf("%+v", g.tally)
	}
}

func TestAngleFormats(t *testing.T) {
	for text, want := range map[string]float64{"4807.038": 48 + 7.038/60, "0000.6": 0.01, "9000": 90, "900.00": 9} {
		s := &sentence{address: "GPGLL", fields: []cell{{text: []byte(text)}, {text: []byte("S")}}}
		r := &reader{s: s}
		if v, ok := r.angle(0, 90, "N", "S"); !ok || math.Abs(v+want) > 1e-12 {
			t.Errorf("%s: %v, want %v (%v)", text, v, -want, r.bad)
		}
	}
}

// An emitter's error ends the reading and comes back.
func TestEmitError(t *testing.T) {
	full := errors.New("the disk is full")
	_, err := ReadNMEA(strings.NewReader(log(zda, "SDDPT,1,0")), "x", &Sentences{}, func(Record) error { return full })
	if !errors.Is(err, full) {
		t.Errorf("%v", err)
	}
	c := parseColumns(t, "time: {column: t, format: unix_s}\nsensors: [{kind: heading, fields: {deg: {column: h}}}]\n")
	if _, err = ReadCSV(strings.NewReader("t,h\n1,2\n"), "x", c, func(Record) error { return full }); !errors.Is(err, full) {
		t.Errorf("%v", err)
	}
}

// IHO S-44 ed. 6, order 1a at 30 m (read there): 0.6341 m at 95 %.
func TestDepthSigma(t *testing.T) {
	if s := 1.96 * depthSigmaM(30); !near(s, 0.6341, 5e-5) {
		t.Errorf("%v m at 95 %%", s)
	}
}
