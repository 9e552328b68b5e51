package main

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/study/replay"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// atServer connects to a running server.
func atServer(t *testing.T, r *running) *grpc.ClientConn {
	t.Helper()
	conn, err := client.Dial(r.address)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close() })
	return conn
}

// TestMapsEndToEnd takes real compiled maps through a server: sent, driven on,
// replaced under a drive that goes on over the old one's mapped memory, found
// again by the next server; and each way to send what is no map is refused.
func TestMapsEndToEnd(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	mapPath, drivePath := compiledTown(t, dir, 20)
	other := filepath.Join(dir, "other.roads.arrow")
	good(t, "map", "roads", townJSON(t, filepath.Join(dir, "other.json"), 5, 4), "-o", other, "--licence", "CC0")
	relief := filepath.Join(dir, "relief.heights.tif")
	good(t, "map", "heights", reliefASCII(t, filepath.Join(dir, "relief.asc")), "-o", relief, "--unit", "ft", "--crs", "EPSG:4326", "--sigma", "1", "--datum", "EGM96")
	var s struct {
		Hash string `json:"posterior_sha256"`
	}
	readJSON(t, good(t, "replay", drivePath, "--map", mapPath, "--json"), &s)

	uploads := filepath.Join(dir, "uploads")
	if err := os.Mkdir(uploads, 0o755); err != nil {
		t.Fatal(err)
	}
	srv := serveMaps(t, "--uploads", uploads)
	if text := good(t, "map", "send", mapPath, "--at", srv.address); !strings.Contains(text, "town: ") || !strings.Contains(text, "transverse Mercator") {
		t.Errorf("map send says %s", text)
	}
	good(t, "map", "send", relief, "--name", "hills", "--at", srv.address)
	bad(t, []string{`there is a map "town" here`}, "map", "send", other, "--name", "town", "--at", srv.address)
	bad(t, []string{"is one of roads"}, "map", "send", relief, "--name", "town", "--replace", "--at", srv.address)
	bad(t, []string{"give up to 100 letters"}, "map", "send", other, "--name", "../town", "--at", srv.address)

	// Half of a drive; then the map is replaced; then the other half.
	d, err := readDrive(drivePath)
	if err != nil {
		t.Fatal(err)
	}
	conn := atServer(t, srv)
	feed, err := client.Open(ctx, conn, client.Drive{Header: wire.FromHeader(d.Header), Name: "morning"})
	if err != nil {
		t.Fatal(err)
	}
	events := replay.Ordered(d.Events)
	for i, ev := range events {
		if i == len(events)/2 {
			if err := feed.Flush(); err != nil {
				t.Fatal(err)
			}
			var sent struct{ Name, Fingerprint string }
			readJSON(t, good(t, "map", "send", other, "--name", "town", "--replace", "--at", srv.address, "--json"), &sent)
			if sent.Name != "town" || sent.Fingerprint == "" {
				t.Errorf("map send --json says %+v", sent)
			}
			if text := good(t, "map", "list", "--at", srv.address); !strings.Contains(text, "1 on an older one") {
				t.Errorf("map list says %s", text)
			}
			if text := good(t, "vehicles", "--at", srv.address); !strings.Contains(text, "there is a newer one") {
				t.Errorf("vehicles says %s", text)
			}
		}
		if err := feed.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	closed, err := feed.Close()
	if err != nil || closed.GetPosteriorSha256() != s.Hash || closed.GetPosterior().GetNewerMapFingerprint() == "" {
		t.Errorf("the drive over the replaced map: %v, %v; want hash %s and that there is a newer one", closed, err, s.Hash)
	}
	var m struct {
		Edges         int
		Licence       string
		OlderSessions int                `json:"older_sessions"`
		SouthWest     map[string]float64 `json:"south_west"`
		NorthEast     map[string]float64 `json:"north_east"`
	}
	readJSON(t, good(t, "map", "list", "town", "--at", srv.address, "--json"), &m)
	if m.Edges < 20 || m.Edges > 100 || m.Licence != "CC0" || m.OlderSessions != 1 {
		t.Errorf("the new town is %+v", m)
	}
	// Every road lies within what is told, and it is not much larger: the town
	// is 0.8 km wide.
	o, err := openMap(other)
	if err != nil {
		t.Fatal(err)
	}
	defer o.Close()
	for _, line := range o.lines() {
		for _, p := range line {
			lon, lat := o.Space.Frame().Inverse(p).Degrees()
			if !(lon >= m.SouthWest["lon"] && lon <= m.NorthEast["lon"] && lat >= m.SouthWest["lat"] && lat <= m.NorthEast["lat"]) {
				t.Fatalf("%v, %v is not within %v to %v", lon, lat, m.SouthWest, m.NorthEast)
			}
		}
	}
	if w := m.NorthEast["lon"] - m.SouthWest["lon"]; w > 0.02 {
		t.Errorf("a town %v degrees wide", w)
	}
	// On the new map the drive starts nowhere, or comes to another hash.
	again, err := client.Open(ctx, conn, client.Drive{Header: wire.FromHeader(d.Header), Name: "evening"})
	if err == nil {
		c, err := again.Close()
		if err != nil || c.GetPosteriorSha256() == s.Hash {
			t.Errorf("on another map: %v, %v", c, err)
		}
	}
	if text := good(t, "map", "list", "hills", "--at", srv.address); !strings.Contains(text, "400 × 400") || !strings.Contains(text, "above EGM96, sigma 1 m") {
		t.Errorf("hills: %s", text)
	}
	damagedMaps(t, ctx, conn, mapPath, relief)
	if status := srv.stop(t); status != 0 {
		t.Errorf("serve ended with status %d\n%s", status, srv.log)
	}
	// The next server has them.
	srv = serveMaps(t, "--uploads", uploads, "--map", "town="+mapPath)
	text := good(t, "map", "list", "--at", srv.address)
	if !strings.Contains(text, "hills: heights, 400 × 400") || !strings.Contains(text, fmt.Sprintf("town: %d directed edges", m.Edges)) {
		t.Errorf("after another start: %s", text)
	}
}

// damagedMaps sends what is no map, past the check of `map send`.
func damagedMaps(t *testing.T, ctx context.Context, conn *grpc.ClientConn, roads, heights string) {
	t.Helper()
	for path, kind := range map[string]leadlinev1.MapKind{roads: leadlinev1.MapKind_MAP_KIND_ROADS, heights: leadlinev1.MapKind_MAP_KIND_HEIGHTS} {
		whole, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		flipped := append([]byte{}, whole...)
		flipped[len(flipped)/2] ^= 0x10
		for what, content := range map[string][]byte{
			"cut": whole[:len(whole)/2], "flipped": flipped, "text": []byte("this is no map"), "other end": whole[len(whole)/2:],
		} {
			_, err := client.SendMap(ctx, conn, &leadlinev1.MapBeginning{Name: "broken", Kind: kind}, strings.NewReader(string(content)), nil)
			if err == nil || !strings.Contains(err.Error(), "InvalidArgument") || strings.Contains(err.Error(), ".part-") || strings.Contains(err.Error(), "\n") {
				t.Errorf("%v, %s: %v", kind, what, err)
			}
		}
		wrong := leadlinev1.MapKind_MAP_KIND_ROADS + leadlinev1.MapKind_MAP_KIND_HEIGHTS - kind
		if _, err := client.SendMap(ctx, conn, &leadlinev1.MapBeginning{Name: "broken", Kind: wrong}, strings.NewReader(string(whole)), nil); err == nil {
			t.Errorf("%v was taken as %v", kind, wrong)
		}
	}
}

// TestFollowCommand follows a drive from the command line, and ends one.
func TestFollowCommand(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	mapPath, drivePath := compiledTown(t, dir, 20)
	srv := serveMaps(t, "--map", mapPath)
	d, err := readDrive(drivePath)
	if err != nil {
		t.Fatal(err)
	}
	if text := good(t, "vehicles", "--at", srv.address); text != "no vehicles\n" {
		t.Errorf("vehicles says %q", text)
	}
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	feed, err := client.Open(ctx, atServer(t, srv), client.Drive{Header: wire.FromHeader(d.Header), Name: "morning"})
	if err != nil {
		t.Fatal(err)
	}
	events := replay.Ordered(d.Events)
	for _, ev := range events {
		if err := feed.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := feed.Flush(); err != nil {
		t.Fatal(err)
	}
	var line struct {
		Vehicle   string
		Skipped   string
		Posterior struct {
			Status string
			Edges  []any
		}
		Belief struct {
			Stretches []any
		}
	}
	readJSON(t, good(t, "follow", "van", "--at", srv.address, "--count", "1", "--json", "--detail", "belief"), &line)
	if line.Vehicle != "van" || line.Posterior.Status == "" || len(line.Posterior.Edges) == 0 || len(line.Belief.Stretches) == 0 {
		t.Errorf("followed %+v", line)
	}
	if text := good(t, "follow", "--at", srv.address, "--count", "1"); !strings.Contains(text, "van is ") || !strings.Contains(text, "95 % within") || strings.Count(text, "\n") != 1 {
		t.Errorf("follow says %q", text)
	}
	area := writeText(t, filepath.Join(dir, "area.geojson"),
		`{"type":"Polygon","coordinates":[[[-30.1,44.9],[-29.9,44.9],[-29.9,45.1],[-30.1,45.1],[-30.1,44.9]]]}`)
	if text := good(t, "follow", "van", "--at", srv.address, "--count", "1", "--area", area, "--inside", "50", "--interval", "1s"); !strings.Contains(text, "100 % inside") {
		t.Errorf("follow --area says %q", text)
	}
	if text := good(t, "vehicles", "--at", srv.address, "--map", "town"); !strings.Contains(text, "morning, fed") {
		t.Errorf("vehicles says %s", text)
	}
	bad(t, []string{`is on drive "morning"`}, "end", "van", "--drive", "evening", "--at", srv.address)
	var s struct {
		Hash string `json:"posterior_sha256"`
	}
	readJSON(t, good(t, "replay", drivePath, "--map", mapPath, "--json"), &s)
	if text := good(t, "end", "van", "--at", srv.address); !strings.Contains(text, s.Hash) {
		t.Errorf("end says %s\nreplay's hash is %s", text, s.Hash)
	}
	if text := good(t, "follow", "--at", srv.address, "--count", "2"); !strings.Contains(text, "van has ended its drive morning; sha256 "+s.Hash) {
		t.Errorf("follow says %q", text)
	}
	var v struct {
		Ended bool
		Drive string
	}
	readJSON(t, good(t, "vehicles", "--at", srv.address, "--json"), &v)
	if !v.Ended || v.Drive != "morning" {
		t.Errorf("vehicles says %+v", v)
	}
	if text := good(t, "suite", "--at", srv.address); !strings.Contains(text, "truck\n") {
		t.Errorf("suite --at says %s", text)
	}
	path := writeText(t, filepath.Join(dir, "truck.yaml"), good(t, "suite", "truck", "--at", srv.address, "--heights"))
	if _, err := openSuite(path); err != nil {
		t.Error(err)
	}
	for _, c := range []struct {
		words []string
		args  []string
	}{
		{[]string{"--detail is"}, []string{"follow", "--detail", "all"}},
		{[]string{"--region goes with"}, []string{"follow", "--region", "95"}},
		{[]string{"--region is 100"}, []string{"follow", "--region", "100", "--detail", "region"}},
		{[]string{"--inside goes with"}, []string{"follow", "--inside", "5"}},
		{[]string{"--inside is 0"}, []string{"follow", "--inside", "0", "--area", area}},
		{[]string{"--count is -1"}, []string{"follow", "--count", "-1"}},
		{[]string{"min_interval_s"}, []string{"follow", "--interval", "2h", "--at", srv.address}},
		{[]string{"there is no vehicle"}, []string{"end", "nobody", "--at", srv.address}},
		{[]string{`no map "moon"`}, []string{"vehicles", "--map", "moon", "--at", srv.address}},
		{[]string{`no map "moon"`}, []string{"map", "list", "moon", "--at", srv.address}},
		{[]string{"takes no maps"}, []string{"map", "send", mapPath, "--name", "new", "--at", srv.address}},
		{[]string{"there is no map file"}, []string{"map", "send", "nowhere.roads.arrow"}},
		{[]string{`no suite "tank"`}, []string{"suite", "tank", "--at", srv.address}},
		{[]string{"--heights goes with --at"}, []string{"suite", "truck", "--heights"}},
		{[]string{"is no address"}, []string{"vehicles", "--at", "here"}},
		{[]string{"is it running there"}, []string{"follow", "--at", "127.0.0.1:1"}},
		{[]string{"no folder"}, []string{"serve", "--uploads", filepath.Join(dir, "nowhere"), "--listen", "127.0.0.1:0"}},
	} {
		bad(t, c.words, c.args...)
	}
}
