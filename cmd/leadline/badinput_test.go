package main

import (
	"context"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"leadline/engine/drivefile"
)

// head is the first line of a drive file.
const head = `{"time":"2030-05-01T12:00:00Z","header":{"vehicle":"van","map":"town","start":{"point":{"lon":-30,"lat":45,"sigma_m":20}}}}` + "\n"

// travel is a usable measurement.
const travel = `{"time":"2030-05-01T12:00:01Z","measurement":{"travel":{"since":"2030-05-01T12:00:00Z","distance_m":5,"sigma_m":0.1}}}` + "\n"

// cut keeps a part of a file.
func cut(t *testing.T, path, to string, share float64) string {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return writeText(t, to, string(b[:int(share*float64(len(b)))]))
}

// TestBadInput proves that each kind of bad input ends with status 2 and one
// line that says what, where and what to do.
func TestBadInput(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	file := func(name, text string) string { return writeText(t, filepath.Join(dir, name), text) }
	town, good0 := compiledTown(t, dir, 20)
	hills := filepath.Join(dir, "hills.heights.tif")
	good(t, "map", "heights", reliefASCII(t, filepath.Join(dir, "relief.asc")), "-o", hills, "--unit", "ft", "--crs", "EPSG:4326")
	drive := func(name, lines string) string { return file(name+drivefile.Suffix, lines) }
	ok := drive("ok", head+travel)
	out := filepath.Join(dir, "new.roads.arrow")
	outH := filepath.Join(dir, "new.heights.tif")
	replace := func(old, with string) string { return strings.Replace(head+travel, old, with, 1) }

	for name, c := range map[string]struct {
		args  []string
		words []string
	}{
		"no such command":      {[]string{"mop"}, []string{"mop", "--help"}},
		"unknown flag":         {[]string{"replay", ok, "--mop", town}, []string{"--mop", "leadline replay --help"}},
		"a flag's value":       {[]string{"map", "roads", ok, "-o", out, "--cell", "wide"}, []string{"--cell is \"wide\": give a number; see `leadline map roads --help`"}},
		"missing argument":     {[]string{"where"}, []string{"give VEHICLE...; see `leadline where --help`"}},
		"missing output":       {[]string{"map", "roads", ok}, []string{"--output is missing; see `leadline map roads --help`"}},
		"cells of zero width":  {[]string{"map", "roads", filepath.Join(dir, "town.json"), "-o", out, "--cell", "0"}, []string{"--cell is 0"}},
		"u-turns":              {[]string{"map", "roads", filepath.Join(dir, "town.json"), "-o", out, "--u-turns", "1"}, []string{"--u-turns is 1"}},
		"a seed":               {[]string{"demo", "--seed", "-1"}, []string{"--seed is \"-1\": give a whole number, 0 or more; see `leadline demo --help`"}},
		"two flags missing":    {[]string{"import", ok}, []string{"--output is missing"}},
		"too many arguments":   {[]string{"map", "check", town, ok}, []string{"give MAP, and no more", "leadline map check --help"}},
		"no such map command":  {[]string{"map", "mop"}, []string{"mop", "leadline map --help"}},
		"arguments of none":    {[]string{"vehicles", "van"}, []string{"\"van\" is too much"}},
		"no vehicles":          {[]string{"serve", "--map", town, "--max-vehicles", "0"}, []string{"--max-vehicles is 0", "1 or more"}},
		"a table to feed":      {[]string{"feed", file("log.csv", "t,x\n1,2\n")}, []string{"log.csv", "leadline import", "--columns"}},
		"sentences to replay":  {[]string{"replay", file("log.nmea", "$GPZDA,*00\n"), "--map", town}, []string{"log.nmea", "leadline import", "-o log.drive.jsonl"}},
		"an unknown source":    {[]string{"feed", "tpc:x:1"}, []string{"\"tpc\"", "serial:DEVICE", "tcp:HOST:PORT"}},
		"a fraction":           {[]string{"where", "van", "--region", "0.95"}, []string{"--region is 0.95", "percentage", "give 95"}},
		"a picture of no PNG":  {[]string{"map", "check", town, "--png", filepath.Join(dir, "x.jpg")}, []string{"--png", "x.jpg", ".png"}},
		"an empty log":         {[]string{"import", file("empty.nmea", ""), "-o", filepath.Join(dir, "e.drive.jsonl"), "--vehicle", "v"}, []string{"empty.nmea is empty"}},
		"no such drive":        {[]string{"replay", filepath.Join(dir, "none.drive.jsonl"), "--map", town}, []string{"none.drive.jsonl", "check the path"}},
		"no such map":          {[]string{"replay", ok, "--map", filepath.Join(dir, "none.roads.arrow")}, []string{"none.roads.arrow", "leadline map roads"}},
		"not a compiled map":   {[]string{"replay", ok, "--map", filepath.Join(dir, "town.json")}, []string{"town.json", ".roads.arrow", "leadline map"}},
		"a map by name only":   {[]string{"map", "check", file("text.roads.arrow", "hello")}, []string{"text.roads.arrow", "leadline map roads"}},
		"heights by name only": {[]string{"map", "check", file("text.heights.tif", "hello, this is a text")}, []string{"text.heights.tif", "leadline map heights"}},
		"truncated road map":   {[]string{"map", "check", cut(t, town, filepath.Join(dir, "cut.roads.arrow"), 0.7)}, []string{"cut.roads.arrow", "damaged", "compile it again"}},
		"truncated height map": {[]string{"map", "check", cut(t, hills, filepath.Join(dir, "cut.heights.tif"), 0.7)}, []string{"cut.heights.tif"}},
		"truncated roads":      {[]string{"map", "roads", cut(t, filepath.Join(dir, "town.json"), filepath.Join(dir, "cut.json"), 0.7), "-o", out}, []string{"cut.json"}},
		"truncated heights":    {[]string{"map", "heights", cut(t, filepath.Join(dir, "relief.asc"), filepath.Join(dir, "cut.asc"), 0.7), "-o", outH, "--crs", "EPSG:4326"}, []string{"cut.asc"}},
		"roads of no format":   {[]string{"map", "roads", file("roads.txt", "hello"), "-o", out}, []string{"roads.txt", "GeoJSON"}},
		"no roads file":        {[]string{"map", "roads", filepath.Join(dir, "none.json"), "-o", out}, []string{"none.json", "check the path"}},
		"output's suffix":      {[]string{"map", "roads", ok, "-o", "town.map"}, []string{"town.map", ".roads.arrow"}},
		"output's folder":      {[]string{"map", "roads", ok, "-o", filepath.Join(dir, "none", "a.roads.arrow")}, []string{"none", "make it first"}},
		"unknown CRS":          {[]string{"map", "heights", ok, "-o", outH, "--crs", "EPSG:1"}, []string{"--crs", "EPSG:1"}},
		"unknown unit":         {[]string{"map", "heights", filepath.Join(dir, "relief.asc"), "-o", outH, "--unit", "fathom"}, []string{"fathom", "m, ft"}},
		"drape of roads":       {[]string{"map", "roads", filepath.Join(dir, "town.json"), "-o", out, "--heights", town}, []string{"--heights", ".heights.tif"}},
		"cells of no width":    {[]string{"map", "roads", filepath.Join(dir, "town.json"), "-o", out, "--cell", "-1"}, []string{"--cell is -1: give metres, 0.05 to 1000"}},
		"joining at NaN":       {[]string{"map", "roads", filepath.Join(dir, "town.json"), "-o", out, "--join", "NaN"}, []string{"--join is NaN: give metres, 0 to 50"}},
		"joining below 0":      {[]string{"map", "roads", filepath.Join(dir, "town.json"), "-o", out, "--join", "-1"}, []string{"--join is -1", "0 joins nothing"}},

		"start off the map":      {[]string{"replay", drive("far", strings.Replace(head, `"lat":45`, `"lat":10`, 1)+travel), "--map", town}, []string{"far.drive.jsonl", "start", "does not touch the map"}},
		"start's sigma":          {[]string{"replay", drive("sigma0", strings.Replace(head, `"sigma_m":20`, `"sigma_m":0`, 1)+travel), "--map", town}, []string{"sigma0.drive.jsonl:1", "sigma_m", "positive"}},
		"start off the globe":    {[]string{"replay", drive("globe", strings.Replace(head, `"lat":45`, `"lat":95`, 1)+travel), "--map", town}, []string{"globe.drive.jsonl:1", "95", "swapped"}},
		"wrong kind, plane":      {[]string{"replay", drive("kind", strings.Replace(head, `"lon":-30,"lat":45`, `"lon":-29.89,"lat":44.89`, 1)+`{"time":"2030-05-01T12:00:01Z","measurement":{"barometer":{"altitude_m":5,"sigma_m":1}}}`), "--map", hills}, []string{"kind.drive.jsonl", "barometer", "wrong space", "send clearance"}},
		"not finite":             {[]string{"replay", drive("nan", replace(`"distance_m":5`, `"distance_m":"NaN"`)), "--map", town}, []string{"nan.drive.jsonl", "distance_m", "NaN"}},
		"sigma of 0":             {[]string{"replay", drive("zero", replace(`"sigma_m":0.1`, `"sigma_m":0`)), "--map", town}, []string{"zero.drive.jsonl", "sigma_m"}},
		"sigma below 0":          {[]string{"replay", drive("below", replace(`"sigma_m":0.1`, `"sigma_m":-1`)), "--map", town}, []string{"below.drive.jsonl", "sigma_m", "-1"}},
		"truncated drive":        {[]string{"replay", drive("cut", head+travel[:60]), "--map", town}, []string{"cut.drive.jsonl:2", "cut off"}},
		"empty drive":            {[]string{"replay", drive("empty", ""), "--map", town}, []string{"empty.drive.jsonl:1", "header"}},
		"drive without events":   {[]string{"replay", drive("idle", head), "--map", town, "--out", filepath.Join(dir, "idle")}, []string{"idle.drive.jsonl", "no measurement"}},
		"unknown key in a drive": {[]string{"replay", drive("key", replace(`"distance_m"`, `"distance_km"`)), "--map", town}, []string{"key.drive.jsonl:2", "distance_km", "Measurement kinds"}},
		"no JSON in a drive":     {[]string{"replay", drive("words", head+"hello\n"), "--map", town}, []string{"words.drive.jsonl:2", "JSON", "a line"}},
		"a clock a year ahead":   {[]string{"replay", drive("ahead", head+travel+strings.ReplaceAll(travel, "2030", "2031")), "--map", town}, []string{"ahead.drive.jsonl", "1 of 2", "clock"}},
		"a drive without a map":  {[]string{"replay", drive("nomap", strings.Replace(head, `"map":"town",`, "", 1)+travel)}, []string{"nomap.drive.jsonl", "--map"}},
		"a map not beside it":    {[]string{"replay", drive("away", strings.Replace(head, `"map":"town"`, `"map":"../town"`, 1)+travel)}, []string{"away.drive.jsonl", "../town", "--map"}},
		"two drives of one name": {[]string{"replay", ok, ok, "--map", town, "--out", dir}, []string{"one name", "rename"}},
		"a pattern of no drive":  {[]string{"replay", ok, "--map", town, "--set", "vehicle.hold_s=1", "--hold-out", "night-*"}, []string{`"night-*"`, "held out", "there are"}},
		"two values at once":     {[]string{"replay", ok, "--map", town, "--set", "vehicle.hold_s=1,2"}, []string{"vehicle.hold_s", "1,2", "one number"}},
		"too few to hold out":    {[]string{"tune", ok, "--map", town, "--suite", "truck", "--figure", "vehicle.hold_s=1:2", "--hold-out", "2"}, []string{"--hold-out 2", "so few drives, 1"}},
		"an output nowhere":      {[]string{"replay", ok, "--map", town, "--out", filepath.Join(town, "out")}, []string{"--out", "give a folder"}},
		"a report nowhere":       {[]string{"report", dir, "--output", filepath.Join(dir, "none", "r.html")}, []string{"--output", "none", "nothing can be written"}},

		"unknown suite":         {[]string{"replay", ok, "--map", town, "--suite", "lorry"}, []string{"lorry", "truck"}},
		"unknown suite key":     {[]string{"replay", ok, "--map", town, "--suite", file("odd.yaml", "vehicle:\n  alert_limit_ft: 3\n")}, []string{"odd.yaml:2", "alert_limit_ft"}},
		"suite of the header":   {[]string{"replay", drive("lorry", strings.Replace(head, `"map":"town"`, `"map":"town","suite":"lorry"`, 1)+travel)}, []string{"lorry.drive.jsonl", `"lorry"`, "--suite"}},
		"no such starter":       {[]string{"suite", "lorry"}, []string{"lorry", "truck"}},
		"serving to all":        {[]string{"serve", "--map", town, "--listen", ":0"}, []string{":0", "--plain-text-beyond-loopback"}},
		"serving nowhere":       {[]string{"serve", "--map", town, "--listen", "here"}, []string{"here", "HOST:PORT"}},
		"serving a missing map": {[]string{"serve", "--map", "town=" + filepath.Join(dir, "none.roads.arrow")}, []string{"none.roads.arrow"}},
		"two maps of one name":  {[]string{"serve", "--map", "a=" + town, "--map", "a=" + hills, "--listen", "127.0.0.1:0"}, []string{`"a"`, "rename"}},

		"no server to feed": {[]string{"feed", ok, "--to", freeAddress(t)}, []string{"ok.drive.jsonl", "no answer", "running"}},
		"no server to ask":  {[]string{"where", "van", "--at", freeAddress(t)}, []string{"no answer", "running"}},
		"address":           {[]string{"where", "van", "--at", "nowhere"}, []string{"--at", "nowhere", "HOST:PORT"}},
		"speed":             {[]string{"feed", ok, "--speed", "-1"}, []string{"--speed", "-1"}},
		"region":            {[]string{"where", "van", "--region", "100"}, []string{"--region", "100"}},
		"no area file":      {[]string{"where", "van", "--area", filepath.Join(dir, "none.json")}, []string{"--area", "none.json", "check the path"}},
		"an area of points": {[]string{"where", "van", "--area", file("point.json", `{"type":"Point","coordinates":[1,2]}`)}, []string{"point.json", "Point", "Polygon"}},
		"a demo's roads":    {[]string{"demo", "--roads", filepath.Join(dir, "none.json"), "--out", dir}, []string{"--roads", "none.json"}},
		"a demo that stays": {[]string{"demo", "--stay", "--json"}, []string{"--stay", "--json", "one of them"}},
		"two demos":         {[]string{"demo", "--andorra", "--roads", ok}, []string{"--andorra", "--roads", "one of them"}},
		"turns of a scene":  {[]string{"demo", "--turns", "3"}, []string{"--turns", "--andorra"}},
	} {
		t.Run(name, func(t *testing.T) { bad(t, c.words, c.args...) })
	}
	for _, path := range []string{out, outH} {
		if _, err := os.Stat(path); err == nil {
			t.Errorf("%s was written from bad input", path)
		}
	}
	if hidden, _ := filepath.Glob(filepath.Join(dir, ".*")); len(hidden) > 0 {
		t.Errorf("left behind: %q", hidden)
	}

	srv := serveMaps(t, "--map", "town="+town, "--map", hills)
	for name, c := range map[string]struct {
		args  []string
		words []string
	}{
		"unknown map":         {[]string{"feed", ok, "--map", "mars"}, []string{"ok.drive.jsonl", `"mars"`, `"hills", "town"`}},
		"unknown suite":       {[]string{"feed", ok, "--suite", "lorry"}, []string{"ok.drive.jsonl", `"lorry"`, `"truck"`}},
		"start off the map":   {[]string{"feed", filepath.Join(dir, "far"+drivefile.Suffix)}, []string{"far.drive.jsonl", "start", "does not touch the map"}},
		"not finite":          {[]string{"feed", filepath.Join(dir, "nan"+drivefile.Suffix)}, []string{"nan.drive.jsonl", "1 of 1", "unusable", "distance_m"}},
		"sigma of 0":          {[]string{"feed", filepath.Join(dir, "zero"+drivefile.Suffix)}, []string{"zero.drive.jsonl", "1 of 1", "unusable", "sigma_m"}},
		"wrong kind":          {[]string{"feed", filepath.Join(dir, "kind"+drivefile.Suffix), "--map", "hills"}, []string{"kind.drive.jsonl", "wrong space", "send clearance"}},
		"vehicle never heard": {[]string{"where", "ghost"}, []string{`"ghost"`, "feed it first"}},
		"risk":                {[]string{"where", "van", "--risk", "2"}, []string{"integrity_risk", "2"}},
	} {
		args := append(c.args, "--to", srv.address)
		if args[0] == "where" {
			args[len(args)-2] = "--at"
		}
		t.Run("served, "+name, func(t *testing.T) { bad(t, c.words, args...) })
	}
	good(t, "feed", good0, "--to", srv.address) // it still serves
	bad(t, []string{srv.address, "in use", "another"}, "serve", "--map", town, "--listen", srv.address)
	// What was refused can be allowed.
	if _, errs, status := leadline(t, "feed", filepath.Join(dir, "kind"+drivefile.Suffix), "--map", "hills", "--to", srv.address, "--replace", "--allow-refused"); status != 0 || errs != "" {
		t.Errorf("--allow-refused: status %d, %s", status, errs)
	}
}

// freeAddress is one where nobody listens.
func freeAddress(t *testing.T) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

// TestServerKilledWhileFeeding kills the server in the middle of a drive.
func TestServerKilledWhileFeeding(t *testing.T) {
	t.Parallel()
	town, drivePath := compiledTown(t, t.TempDir(), 30)
	srv := serveMaps(t, "--map", town)
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	var errs strings.Builder
	feed := command(ctx, "feed", drivePath, "--to", srv.address, "--speed", "1") // 30 s
	feed.Stderr = &errs
	if err := feed.Start(); err != nil {
		t.Fatal(err)
	}
	for deadline := time.Now().Add(patience); !strings.Contains(srv.log.String(), "drive opened"); time.Sleep(10 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("the drive is not opened:\n%s", srv.log)
		}
	}
	time.Sleep(100 * time.Millisecond) // some measurements
	if err := srv.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	_ = feed.Wait()
	if got := errs.String(); feed.ProcessState.ExitCode() != exitBad || strings.Count(got, "\n") != 1 ||
		!strings.Contains(got, "morning.drive.jsonl") || !strings.Contains(got, srv.address) || !strings.Contains(got, "feed it again") {
		t.Errorf("status %d:\n%s", feed.ProcessState.ExitCode(), got)
	}
}

func TestOneLine(t *testing.T) {
	if got := oneLine("a\n  b\r\nc\x1b[31m\td"); got != "a; b; c [31m d" {
		t.Errorf("%q", got)
	}
}
