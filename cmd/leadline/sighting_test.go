package main

import (
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"leadline/engine/client"
	"leadline/engine/wire"
)

// TestSightingAndSeen: a dispatcher's word is entered and refused from the command
// line; one that nothing agrees with raises an alarm, which is followed by its number,
// for the vehicles that were named alone, and marked as seen.
func TestSightingAndSeen(t *testing.T) {
	t.Parallel()
	srv := serveMaps(t, "--map", quillmere(t))
	leaveFirst(t, srv, "van-1")
	at := func(args ...string) []string { return append(args, "--at", srv.address) }

	bad(t, []string{"--road or --area, and not both"}, at("sighting", "van-1")...)
	bad(t, []string{"--mistaken is 10", "such as 0.1"}, at("sighting", "van-1", "--road", "Cooper Row", "--mistaken", "10")...)
	bad(t, []string{"--time", "2030-05-01T12:00:15Z"}, at("sighting", "van-1", "--road", "Cooper Row", "--time", "noon")...)
	bad(t, []string{`no vehicle "van-9"`}, at("sighting", "van-9", "--road", "Cooper Row")...)
	bad(t, []string{"the server refused it, and nothing has changed", "a road that is nowhere"}, at("sighting", "van-1", "--road", "a road that is nowhere")...)
	text := good(t, at("sighting", "van-1", "--road", "Cooper Row", "--mistaken", "0.1", "--who", "dispatch")...)
	if !strings.Contains(text, "\nbefore: van-1 is ") || !strings.Contains(text, "\nthen: van-1 is ") {
		t.Errorf("entered: %s", text)
	}

	far := writeText(t, filepath.Join(t.TempDir(), "far.geojson"),
		`{"type":"Polygon","coordinates":[[[-31,46],[-30.9,46],[-30.9,46.1],[-31,46.1],[-31,46]]]}`)
	good(t, at("sighting", "van-1", "--area", far, "--json")...)
	text = good(t, at("follow", "--alarms", "--count", "2")...)
	numbered := regexp.MustCompile(`(?m)^van-1 has alarm ([0-9]+), raised .*sighting.*impossible everywhere`).FindStringSubmatch(text)
	if numbered == nil {
		t.Fatalf("followed: %s", text)
	}
	bad(t, []string{"--who is missing"}, at("seen", numbered[1])...)
	bad(t, []string{"is no number of an alarm"}, at("seen", "first", "--who", "Ada")...)
	bad(t, []string{"no alarm of number 999"}, at("seen", "999", "--who", "Ada")...)
	if text = good(t, at("seen", numbered[1], "--who", "Ada", "--note", "a slip of mine")...); !strings.Contains(text, "by Ada: a slip of mine") {
		t.Errorf("seen: %s", text)
	}
	if text = good(t, at("follow", "van-1", "--alarms", "--count", "2")...); !strings.Contains(text, "by Ada: a slip of mine") {
		t.Errorf("followed: %s", text)
	}
	leaveFirst(t, srv, "van-2")
	if text = good(t, at("follow", "van-2", "--alarms", "--count", "1")...); !strings.HasPrefix(text, "van-2 is ") {
		t.Errorf("followed: %s", text)
	}
}

// quillmere is the compiled map of the README's town.
func quillmere(t *testing.T) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "quillmere.roads.arrow")
	good(t, "map", "roads", checkout+"/fixtures/roads/quillmere.geojson", "-o", path)
	return path
}

// leaveFirst feeds the README's drive for a vehicle of this name, and leaves it open.
func leaveFirst(t *testing.T, srv *running, vehicle string) {
	t.Helper()
	d, err := readDrive(checkout + "/docs/first.drive.jsonl")
	if err != nil {
		t.Fatal(err)
	}
	header := wire.FromHeader(d.Header)
	header.Vehicle = vehicle
	f, err := client.Open(t.Context(), atServer(t, srv), client.Drive{Header: header})
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range d.Events {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Leave(); err != nil {
		t.Fatal(err)
	}
}
