package main

import (
	"encoding/json"
	"net"
	"strings"
	"syscall"
	"testing"
)

// TestServeLogs: with --log-format json each line of the log is an object; one
// says what was built, and each event of a session has one.
func TestServeLogs(t *testing.T) {
	t.Parallel()
	town, drive := compiledTown(t, t.TempDir(), 10)
	srv := serveMaps(t, "--map", town, "--log-format", "json")
	var closed struct{ Version string }
	readJSON(t, good(t, "feed", drive, "--to", srv.address, "--json"), &closed)
	if line := good(t, "--version"); line != "leadline "+closed.Version+"\n" {
		t.Errorf("the server answers by version %q, and the program is %s", closed.Version, line)
	}
	if status := srv.stop(t); status != 0 {
		t.Errorf("status %d", status)
	}
	said := map[string]map[string]any{}
	for line := range strings.Lines(srv.log.String()) {
		var entry map[string]any
		if err := json.Unmarshal([]byte(line), &entry); err != nil {
			t.Fatalf("%v in %s", err, line)
		}
		if entry["time"] == nil || entry["level"] == nil {
			t.Errorf("no time or level: %s", line)
		}
		said[entry["msg"].(string)] = entry
	}
	for message, key := range map[string]string{
		"serving": "version", "drive opened": "vehicle", "first located": "vehicle", "drive ended": "vehicle", "stopping": "signal", "stopped": "msg",
	} {
		if !strings.Contains(readPage(t, "docs/server.md"), "`"+message+"`") {
			t.Errorf("docs/server.md does not say what %q is", message)
		}
		if e := said[message]; e == nil || e[key] == nil {
			t.Errorf("the log has no %q with %q:\n%s", message, key, srv.log)
		}
	}
	if at := said["serving"]["address"]; at != srv.address {
		t.Errorf("it serves at %v, says the log", at)
	}
}

// TestLogLevel: what is below the level stays out.
func TestLogLevel(t *testing.T) {
	t.Parallel()
	town, _ := compiledTown(t, t.TempDir(), 1)
	srv := serveMaps(t, "--map", town, "--log-level", "error")
	srv.stop(t)
	if srv.log.String() != "" {
		t.Errorf("the log says %s", srv.log)
	}
}

// TestSecondSignal: a connection that does not answer holds up the stop, and a
// second signal ends the server at once.
func TestSecondSignal(t *testing.T) {
	t.Parallel()
	town, _ := compiledTown(t, t.TempDir(), 1)
	srv := serveMaps(t, "--map", town, "--drain-timeout", "10m")
	conn, err := net.Dial("tcp", srv.address)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	// HTTP/2's preface and empty settings (RFC 9113, 3.4 and 6.5), and then
	// silence.
	if _, err := conn.Write([]byte("PRI * HTTP/2.0\r\n\r\nSM\r\n\r\n\x00\x00\x00\x04\x00\x00\x00\x00\x00")); err != nil {
		t.Fatal(err)
	}
	if _, err := conn.Read(make([]byte, 1)); err != nil { // the server's settings
		t.Fatal(err)
	}
	if err := srv.cmd.Process.Signal(syscall.SIGINT); err != nil {
		t.Fatal(err)
	}
	eventually(t, "the server stops", func() bool { return strings.Contains(srv.log.String(), "msg=stopping") })
	if status := srv.stop(t); status != exitFailure || !strings.Contains(srv.log.String(), "stopped at once") ||
		!strings.Contains(srv.log.String(), "leadline: a second signal") {
		t.Errorf("status %d\n%s", status, srv.log)
	}
}
