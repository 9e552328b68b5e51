package main

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/study/results"
	"leadline/fixtures/drives"
	"leadline/fixtures/sim"
	"leadline/terrain"
	"leadline/terrain/heightfile"
)

// row is a posterior as a track's table has it.
type row struct {
	time, status string
	mean         geo.LonLat
	sigmaM       float64
}

// replayed replays a drive and reads the track.
func replayed(t *testing.T, drivePath, mapPath string, more ...string) (rows []row) {
	t.Helper()
	out := t.TempDir()
	good(t, append([]string{"replay", drivePath, "--map", mapPath, "--out", out}, more...)...)
	f, err := os.Open(filepath.Join(out, results.Given, driveName(drivePath), "track.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	table, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	number := func(line []string, name string) float64 {
		v, err := strconv.ParseFloat(line[slices.Index(table[0], name)], 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	for _, line := range table[1:] {
		rows = append(rows, row{
			line[0], line[1], geo.FromDegrees(number(line, "mean_lon_deg"), number(line, "mean_lat_deg")),
			math.Sqrt(number(line, "cov_ee_m2") + number(line, "cov_nn_m2")),
		})
	}
	return rows
}

// agree compares the mean positions of two replays: they may be a share of
// their own standard deviation apart, and what rounding to 1e-8° in the tables
// makes of it.
func agree(t *testing.T, a, b []row, shareOfSigma float64) {
	t.Helper()
	const rounding = 1.6e-3 // m: a step of 1.11 mm, half of it in each of two tables and both axes
	if len(a) != len(b) || len(a) < 30 {
		t.Fatalf("%d and %d posteriors", len(a), len(b))
	}
	worst := 0.0
	for i, p := range a {
		q := b[i]
		if p.time != q.time || p.status != q.status {
			t.Fatalf("posterior %d: %s at %s, and %s at %s", i, p.status, p.time, q.status, q.time)
		}
		d, _, err := geo.WGS84.Distance(p.mean, q.mean)
		if err != nil {
			t.Fatal(err)
		}
		worst = math.Max(worst, d)
		if d > rounding+shareOfSigma*p.sigmaM {
			t.Fatalf("at %s they are %v m apart, sigma is %v m", p.time, d, p.sigmaM)
		}
	}
	t.Logf("%d posteriors, farthest apart %.2g m", len(a), worst)
}

// logOf writes a car's drive as a logger would: a row for each time, the
// odometer's reading and the gyro's angle as they count up, from 12345.6 km and
// turned the other way round, with commas in numbers.
func logOf(t *testing.T, d *drivefile.Drive) string {
	t.Helper()
	var b strings.Builder
	b.WriteString("Time;Odometer [km];Odo sigma [mm];Yaw [rad];Yaw sigma [deg];Lat;Lon\n")
	comma := func(v float64) string { return strings.Replace(fmt.Sprintf("%.15f", v), ".", ",", 1) }
	type cells struct{ odo, odoSigma, yaw, yawSigma, lat, lon string }
	rows := map[sensor.Time]*cells{}
	var times []sensor.Time
	at := func(ts sensor.Time) *cells {
		if rows[ts] == nil {
			rows[ts] = &cells{}
			times = append(times, ts)
		}
		return rows[ts]
	}
	odo, yaw := 12345.6, 0.0
	for i, ev := range d.Events {
		if since, ok := sensor.Since(ev.Measurement); ok && i == 0 {
			r := at(since)
			r.odo, r.yaw = comma(odo), comma(yaw)
		}
		switch m := ev.Measurement.(type) {
		case sensor.Travel:
			odo += m.DistanceM / 1000
			r := at(ev.Time)
			r.odo, r.odoSigma = comma(odo), comma(m.SigmaM*1000)
		case sensor.Turn:
			yaw -= m.AngleRad
			r := at(ev.Time)
			r.yaw, r.yawSigma = comma(yaw), comma(geo.Deg(m.SigmaRad))
		default:
			t.Fatalf("a %s", m.Kind())
		}
	}
	for _, tr := range d.Truths {
		r := at(tr.Time)
		lon, lat := tr.Position.Degrees()
		r.lat, r.lon = comma(lat), comma(lon)
	}
	slices.Sort(times)
	for _, ts := range times {
		r := rows[ts]
		fmt.Fprintf(&b, "%s;%s;%s;%s;%s;%s;%s\n", time.Unix(0, int64(ts)).UTC().Format("02.01.2006 15:04:05.000000000"), r.odo, r.odoSigma, r.yaw, r.yawSigma, r.lat, r.lon)
	}
	return b.String()
}

const carColumns = `
delimiter: ";"
decimal_comma: true
time: {column: Time, format: layout, layout: "DD.MM.YYYY hh:mm:ss.f"}
sensors:
  - name: odometer
    kind: travel
    fields:
      distance_m: {column: "Odometer [km]", unit: km, counter: true}
      sigma_m: {column: "Odo sigma [mm]", unit: mm}
  - name: gyro
    kind: turn
    fields:
      angle_deg: {column: "Yaw [rad]", unit: rad, counter: true, sign: -1}
      sigma_deg: {column: "Yaw sigma [deg]"}
truth:
  fields: {lat: {column: Lat}, lon: {column: Lon}}
`

// TestImportTable: a car's drive as a table gives the positions of the drive.
func TestImportTable(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	mapPath, drivePath := compiledTown(t, dir, 60)
	d, err := readDrive(drivePath)
	if err != nil {
		t.Fatal(err)
	}
	log := writeText(t, filepath.Join(dir, "car.csv"), logOf(t, d))
	columns := writeText(t, filepath.Join(dir, "car.columns.yaml"), carColumns)
	imported := filepath.Join(dir, "car"+drivefile.Suffix)
	lon, lat := d.Header.Start.Point.Degrees()
	start := fmt.Sprintf("%.12f,%.12f,%g", lon, lat, d.Header.Start.SigmaM)
	out := good(t, "import", log, "-o", imported, "--columns", columns, "--vehicle", "van", "--map", "town", "--start", start, "--json")
	var s struct {
		Lines        int
		Truths       int
		Measurements []struct {
			Sensor, Kind string
			Count        int
		}
		Refused []any
	}
	readJSON(t, out, &s)
	if len(s.Measurements) != 2 || s.Measurements[0].Count+s.Measurements[1].Count != len(d.Events) || s.Truths != len(d.Truths) || len(s.Refused) > 0 {
		t.Errorf("%d events, %d truths: %s", len(d.Events), len(d.Truths), out)
	}
	e, err := readDrive(imported)
	if err != nil {
		t.Fatal(err)
	}
	if e.Header.Vehicle != "van" || e.Header.Map != "town" || e.Header.Start.SigmaM != d.Header.Start.SigmaM || e.Time != d.Time {
		t.Errorf("header %+v at %v", e.Header, e.Time)
	}
	// Readings have fifteen digits after the point: km to 1e-12 m, at 12345.6 km
	// doubles are 1.8e-9 m apart.
	agree(t, replayed(t, drivePath, mapPath), replayed(t, imported, mapPath), 1e-6)
}

// seaFloor compiles an invented sea floor of 40 m with banks of some metres.
func seaFloor(t *testing.T, path string) *terrain.Raster {
	t.Helper()
	const n = 241
	heights := make([]float32, n*n)
	for r := range n {
		for c := range n {
			e, s := float64(c), float64(r)
			heights[r*n+c] = float32(-40 + 6*math.Sin(e/7+s/23) + 5*math.Sin(s/9-e/31+1) + 3*math.Sin((e+s)/4+2))
		}
	}
	crs, err := terrain.FromEPSG(4326)
	if err != nil {
		t.Fatal(err)
	}
	floor, err := terrain.New(terrain.Grid{CRS: crs, Cols: n, Rows: n, FirstX: -30, FirstY: 45, StepX: 2.5e-4, StepY: -2.5e-4}, heights,
		terrain.Meta{VerticalDatum: "invented", SigmaM: 0.2, Source: "INVENTED", Licence: "Apache-2.0"})
	if err != nil {
		t.Fatal(err)
	}
	if err := heightfile.Write(path, floor); err != nil {
		t.Fatal(err)
	}
	return floor
}

// sentence ends a sentence with its checksum, computed apart from the reader.
func sentence(format string, args ...any) string {
	body := fmt.Sprintf(format, args...)
	sum := 0
	for _, c := range []byte(body) {
		sum = (sum | int(c)) - (sum & int(c)) // exclusive or
	}
	return fmt.Sprintf("$%s*%02X\r\n", body, sum)
}

// Digits of the sentences that a survey is written in, more than instruments
// give, so that the comparison is sharp.
const sentenceDigits = 5

// sentencesOf writes a survey's drive as its instruments speak.
func sentencesOf(t *testing.T, d *drivefile.Drive) string {
	t.Helper()
	var b strings.Builder
	last := sensor.Time(-1)
	for _, ev := range d.Events {
		if ev.Time != last {
			now := time.Unix(0, int64(ev.Time)).UTC()
			b.WriteString(sentence("GPZDA,%s,%s,00,00", now.Format("150405.00"), now.Format("02,01,2006")))
			last = ev.Time
		}
		switch m := ev.Measurement.(type) {
		case sensor.Speed:
			b.WriteString(sentence("VWVHW,,,,,%.*f,N,,", sentenceDigits, m.MPS*3600/1852))
		case sensor.HeadingFix:
			b.WriteString(sentence("HEHDT,%.*f,T", sentenceDigits, geo.Deg(m.HeadingRad)))
		case sensor.Sounding:
			b.WriteString(sentence("SDDPT,%.*f,%.2f", sentenceDigits, m.DepthBelowTransducerM, m.TransducerDepthM))
		default:
			t.Fatalf("a %s", m.Kind())
		}
	}
	return b.String()
}

// surveyed simulates a survey over a sea floor.
func surveyed(t *testing.T, dir string, seconds float64) (d *drivefile.Drive, drivePath, mapPath string) {
	t.Helper()
	mapPath = filepath.Join(dir, "floor.heights.tif")
	floor := seaFloor(t, mapPath)
	o := sim.StandardSurvey()
	// A quarter of a minute before midnight.
	o.StartNs = time.Date(2030, 5, 1, 23, 59, 45, 0, time.UTC).UnixNano()
	o.DurationS, o.StartSigmaM, o.MarginM, o.TideM = seconds, 8, 200, 0
	s, err := sim.Survey(3, floor, o)
	if err != nil {
		t.Fatal(err)
	}
	drivePath = simulated(t, filepath.Join(dir, "survey"+drivefile.Suffix), s, "floor")
	return drives.Convert(s, "floor", ""), drivePath, mapPath
}

const surveySuite = `
vehicle: {max_speed_mps: 10}
sensors:
  - {name: log, kind: speed}
  - {name: compass, kind: heading}
  - {name: sounder, kind: sounding}
`

// The heading is that of the craft alone: nothing is turned by it.
const reckonedSuite = `
vehicle: {max_speed_mps: 10}
sensors:
  - {name: dr, kind: displacement}
  - {name: sounder, kind: sounding}
  - {name: compass, kind: heading, nuisances: [{name: heading_deg, sigma: 104, drift_per_sqrt_s: 1}]}
`

const surveySentences = `
depth: {sigma_m: 0.3}
heading: {sigma_deg: 0.5}
water_speed: {sensor: log, sigma_mps: 0.1}
`

// TestImportSentences: a survey written as sentences gives the positions of
// the survey, over midnight, and found again by the same filter.
func TestImportSentences(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	d, drivePath, mapPath := surveyed(t, dir, 30)
	log := writeText(t, filepath.Join(dir, "craft.nmea"), sentencesOf(t, d))
	suite := writeText(t, filepath.Join(dir, "craft.yaml"), surveySuite)
	options := writeText(t, filepath.Join(dir, "craft.sentences.yaml"), surveySentences)
	lon, lat := d.Header.Start.Point.Degrees()
	start := fmt.Sprintf("%.12f,%.12f,%g", lon, lat, d.Header.Start.SigmaM)
	imported := filepath.Join(dir, "craft"+drivefile.Suffix)
	text := good(t, "import", log, "-o", imported, "--vehicle", "craft", "--map", "floor", "--suite", "craft", "--start", start, "--sentences", options)
	if !strings.Contains(text, fmt.Sprintf("%d measurements and 0 truths", len(d.Events))) || !strings.Contains(text, "2030-05-02T00:00:15Z") || strings.Contains(text, "refused") {
		t.Errorf("import says %s", text)
	}
	// Every measurement comes back within half of its last digit.
	e, err := readDrive(imported)
	if err != nil {
		t.Fatal(err)
	}
	half := 0.5 * math.Pow(10, -sentenceDigits) * (1 + 1e-6)
	for i, ev := range d.Events {
		got := e.Events[i]
		far := math.Inf(1)
		switch m := ev.Measurement.(type) {
		case sensor.Speed:
			far = math.Abs(m.MPS-got.Measurement.(sensor.Speed).MPS) * 3600 / 1852
		case sensor.HeadingFix:
			far = math.Abs(geo.Deg(geo.WrapPi(m.HeadingRad - got.Measurement.(sensor.HeadingFix).HeadingRad)))
		case sensor.Sounding:
			g := got.Measurement.(sensor.Sounding)
			far = math.Abs(m.DepthBelowTransducerM-g.DepthBelowTransducerM) + math.Abs(m.TransducerDepthM-g.TransducerDepthM)
		}
		if got.Time != ev.Time || got.Sensor != ev.Sensor || !(far <= half) {
			t.Fatalf("event %d: %+v became %+v", i, ev, got)
		}
	}
	// What is measured moves by δ ≤ 2.6e-5 σ each. In a linear problem the mean
	// then moves by at most √(Σ(δ/σ)²) of its own sigma: 2.5e-4 for 90 of them.
	agree(t, replayed(t, drivePath, mapPath, "--suite", suite), replayed(t, imported, mapPath, "--suite", suite), 2.5e-4)

	// Dead reckoning: the same craft without a heading to estimate. Its water
	// stands still.
	reckoned := filepath.Join(dir, "reckoned"+drivefile.Suffix)
	still := writeText(t, filepath.Join(dir, "still.yaml"), surveySentences+"reckon: {current_sigma_mps: 0.02, current_correlation_s: 10, sensor: dr}\n")
	good(t, "import", log, "-o", reckoned, "--vehicle", "craft", "--start", start, "--sentences", still)
	own := writeText(t, filepath.Join(dir, "reckoned.yaml"), reckonedSuite)
	ps := replayed(t, reckoned, mapPath, "--suite", own)
	end := ps[len(ps)-1]
	truth := d.Truths[len(d.Truths)-1]
	off, _, err := geo.WGS84.Distance(end.mean, truth.Position)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("reckoned: %.1f m from the truth, sigma %.1f m", off, end.sigmaM)
	// The start's sigma was 8 m along each axis.
	if !(off < 4*end.sigmaM) || !(end.sigmaM < 10) {
		t.Errorf("%.1f m from the truth with a sigma of %.1f m", off, end.sigmaM)
	}
}

// TestImportTruth: positions of a receiver become truth, and scores.
func TestImportTruth(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	log := writeText(t, filepath.Join(dir, "x.nmea"), sentence("GPRMC,120000,A,4500.000,N,03000.000,W,6.0,90.0,010530,,,A")+sentence("HEHDT,90,T"))
	out := filepath.Join(dir, "x"+drivefile.Suffix)
	for kind, want := range map[string][2]int{"fix": {3, 0}, "truth": {1, 1}, "none": {1, 0}} {
		good(t, "import", log, "-o", out, "--vehicle", "craft", "--satellites", kind)
		d, err := readDrive(out)
		if err != nil {
			t.Fatal(err)
		}
		if got := [2]int{len(d.Events), len(d.Truths)}; got != want {
			t.Errorf("%s: %v measurements and truths, want %v", kind, got, want)
		}
	}
}

// TestImportBadInput: status 2, one line, and no file.
func TestImportBadInput(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	file := func(name, text string) string { return writeText(t, filepath.Join(dir, name), text) }
	out := filepath.Join(dir, "out"+drivefile.Suffix)
	zda := sentence("GPZDA,120000,01,05,2030,00,00")
	nmea := file("good.nmea", zda+sentence("HEHDT,90,T"))
	csv := file("good.csv", "t,h\n1903867200,90\n")
	columns := file("good.yaml", "time: {column: t, format: unix_s}\nsensors: [{kind: heading, fields: {deg: {column: h}}}]\n")
	for name, c := range map[string]struct {
		args  []string
		words []string
	}{
		"no output":         {[]string{nmea, "--vehicle", "v"}, []string{"output", "leadline import --help"}},
		"output's suffix":   {[]string{nmea, "--vehicle", "v", "-o", filepath.Join(dir, "x.json")}, []string{"x.json", drivefile.Suffix}},
		"output's folder":   {[]string{nmea, "--vehicle", "v", "-o", filepath.Join(dir, "none", "x"+drivefile.Suffix)}, []string{"make it first"}},
		"no vehicle":        {[]string{nmea, "-o", out}, []string{"--vehicle", "name the vehicle"}},
		"long name":         {[]string{nmea, "-o", out, "--vehicle", strings.Repeat("v", 300)}, []string{"vehicle", "300 bytes"}},
		"no log":            {[]string{filepath.Join(dir, "none.nmea"), "-o", out, "--vehicle", "v"}, []string{"none.nmea", "check the path"}},
		"start":             {[]string{nmea, "-o", out, "--vehicle", "v", "--start", "here"}, []string{"--start here", "LON,LAT,SIGMA"}},
		"start's latitude":  {[]string{nmea, "-o", out, "--vehicle", "v", "--start", "10,95,3"}, []string{"--start", "95", "swapped"}},
		"start's sigma":     {[]string{nmea, "-o", out, "--vehicle", "v", "--start", "10,50,0"}, []string{"--start", "standard deviation"}},
		"a folder":          {[]string{dir, "-o", out, "--vehicle", "v"}, []string{"is a folder"}},
		"a table untold":    {[]string{csv, "-o", out, "--vehicle", "v"}, []string{"good.csv", "--columns"}},
		"table and NMEA":    {[]string{csv, "-o", out, "--vehicle", "v", "--columns", columns, "--reckon"}, []string{"--columns", "--reckon", "one of them"}},
		"no column file":    {[]string{csv, "-o", out, "--vehicle", "v", "--columns", filepath.Join(dir, "none.yaml")}, []string{"--columns", "none.yaml", "check the path"}},
		"column file":       {[]string{csv, "-o", out, "--vehicle", "v", "--columns", file("odd.yaml", "time: {column: t, format: unix_s}\ncolour: red\n")}, []string{"odd.yaml:2", "colour"}},
		"columns that miss": {[]string{file("other.csv", "a,b\n1,2\n"), "-o", out, "--vehicle", "v", "--columns", columns}, []string{"other.csv:1", `no column "t"`, "a, b"}},
		"rows that miss":    {[]string{file("text.csv", "t,h\nx,y\n"), "-o", out, "--vehicle", "v", "--columns", columns}, []string{"text.csv", "no measurement", "text.csv:2:1: x"}},
		"a table of one row of two": {
			[]string{file("half.csv", "t,h\n1903867200,90\n1903867201,north\n"), "-o", out, "--vehicle", "v", "--columns", columns},
			[]string{"half.csv", "1 of 2 are refused", "half.csv:3:12: north", "--max-refused"},
		},
		"an empty table":   {[]string{file("empty.csv", ""), "-o", out, "--vehicle", "v", "--columns", columns}, []string{"empty.csv", "no header"}},
		"only a header":    {[]string{file("head.csv", "t,h\n"), "-o", out, "--vehicle", "v", "--columns", columns}, []string{"head.csv", "no measurement in 1 lines"}},
		"no sentence":      {[]string{file("text.nmea", "hello\n"), "-o", out, "--vehicle", "v"}, []string{"text.nmea", "no NMEA sentence"}},
		"no time":          {[]string{file("late.nmea", sentence("HEHDT,90,T")), "-o", out, "--vehicle", "v"}, []string{"late.nmea", "time and the date"}},
		"bad checksums":    {[]string{file("sum.nmea", zda+"$HEHDT,90,T*00\n"), "-o", out, "--vehicle", "v"}, []string{"sum.nmea", "no measurement", "sum.nmea:2:12: $HEHDT", "checksum"}},
		"nothing of use":   {[]string{file("sat.nmea", zda+sentence("GPGSV,1,1")), "-o", out, "--vehicle", "v"}, []string{"sat.nmea", "no measurement in 2 lines", "GSV 1"}},
		"sentences file":   {[]string{nmea, "-o", out, "--vehicle", "v", "--sentences", file("odd2.yaml", "depth: {sigma_deg: 1}\n")}, []string{"odd2.yaml:1", "sigma_m"}},
		"date":             {[]string{nmea, "-o", out, "--vehicle", "v", "--date", "1.5.2030"}, []string{"--date", "2030-05-01"}},
		"variation":        {[]string{nmea, "-o", out, "--vehicle", "v", "--variation", "3E"}, []string{"--variation 3E", "east"}},
		"satellites":       {[]string{nmea, "-o", out, "--vehicle", "v", "--satellites", "some"}, []string{"some", "truth"}},
		"arrival":          {[]string{nmea, "-o", out, "--vehicle", "v", "--sentences", file("live.yaml", "time: {from: arrival}\n")}, []string{"good.nmea", "arrived"}},
		"share of refused": {[]string{nmea, "-o", out, "--vehicle", "v", "--max-refused", "200"}, []string{"--max-refused", "200"}},
	} {
		t.Run(name, func(t *testing.T) { bad(t, c.words, append([]string{"import"}, c.args...)...) })
	}
	if left, _ := filepath.Glob(filepath.Join(dir, "*"+drivefile.Suffix)); len(left) > 0 {
		t.Errorf("written from bad input: %q", left)
	}
	if hidden, _ := filepath.Glob(filepath.Join(dir, ".*")); len(hidden) > 0 {
		t.Errorf("left behind: %q", hidden)
	}
	// What is allowed is written.
	good(t, "import", filepath.Join(dir, "half.csv"), "-o", out, "--vehicle", "v", "--columns", columns, "--max-refused", "50")
	if _, err := os.Stat(out); err != nil {
		t.Error(err)
	}
}

// TestImportTracks: a track's points are fixes, or the truths of another log that
// was recorded meanwhile.
func TestImportTracks(t *testing.T) {
	dir := t.TempDir()
	write := func(name, text string) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	igc := write("f.igc", "AXYZ001\r\nHFDTE010530\r\nHFPLTPILOT:SOMEBODY\r\nB1200004500000N03000000WA0000000100\r\nB1200014500000N03000100WA0000000101\r\n")
	gpx := write("t.gpx", `<gpx><trk><trkseg><trkpt lat="45" lon="-30"><time>2030-05-01T12:00:01Z</time></trkpt></trkseg></trk></gpx>`)
	late := write("late.gpx", `<gpx><trk><trkseg><trkpt lat="45" lon="-30"><time>2031-05-01T12:00:01Z</time></trkpt></trkseg></trk></gpx>`)
	none := write("none.gpx", `<gpx><wpt lat="45" lon="-30"/></gpx>`)
	out := filepath.Join(dir, "x.drive.jsonl")
	good(t, "import", igc, "-o", out, "--vehicle", "g", "--truth", gpx)
	text, err := os.ReadFile(out)
	if err != nil || strings.Contains(string(text), "SOMEBODY") {
		t.Fatalf("%v: %s", err, text)
	}
	d, err := drivefile.ReadAll(strings.NewReader(string(text)), out)
	if err != nil || len(d.Events) != 2 || len(d.Truths) != 1 || d.Events[0].Measurement.Kind() != sensor.KindFix {
		t.Errorf("%v, %s", err, text)
	}
	for want, args := range map[string][]string{
		"they have no time in common":      {igc, "--truth", late},
		"holds no track point":             {igc, "--truth", none},
		"it holds no measurement":          {none},
		"is neither GPX nor IGC":           {igc, "--truth", out},
		"leave it out":                     {gpx, "--reckon"},
		"there is no file":                 {gpx, "--truth", filepath.Join(dir, "nothing")},
		"its outermost element is \"kml\"": {write("k.gpx", "<kml/>")},
	} {
		var o, e strings.Builder
		got := filepath.Join(dir, "bad.drive.jsonl")
		if status := run(append([]string{"import", "-o", got, "--vehicle", "g"}, args...), &o, &e); status != exitBad || !strings.Contains(e.String(), want) {
			t.Errorf("%v: status %d, %s", args, status, e.String())
		}
		if _, err := os.Stat(got); err == nil {
			t.Errorf("%v leaves a file", args)
		}
	}
}
