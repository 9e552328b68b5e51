package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"leadline/engine/drivefile"
)

const (
	pythonClient = checkout + "/engine/client/python"
	webClient    = checkout + "/engine/client/web"
)

// python is a Python that has what the client needs.
func python(t *testing.T) string {
	t.Helper()
	for _, p := range []string{"/usr/bin/python3", "python3"} {
		if exec.Command(p, "-c", "import grpc, google.protobuf").Run() == nil {
			return p
		}
	}
	t.Skip("no Python with grpcio and protobuf is here: install python3-grpcio and python3-protobuf")
	return ""
}

// node is a Node that the client's packages run on, with them beside it.
func node(t *testing.T) string {
	t.Helper()
	version, err := exec.Command("node", "--version").Output()
	major, _, _ := strings.Cut(strings.TrimPrefix(string(version), "v"), ".")
	if n, _ := strconv.Atoi(major); err != nil || n < 20 {
		t.Skipf("no Node of version 20 or newer is here: %q, %v", version, err)
	}
	webPackages(t)
	return "node"
}

func webPackages(t *testing.T) {
	t.Helper()
	if _, err := os.Stat(filepath.Join(webClient, "node_modules")); err != nil {
		t.Skipf("the client's packages are not here: make fetch-clients (%v)", err)
	}
}

// chromium starts a browser on a page, until the test ends.
func chromium(t *testing.T, url string) {
	t.Helper()
	path, err := exec.LookPath("chromium")
	if err != nil {
		t.Skipf("no browser is here: install chromium (%v)", err)
	}
	cmd := exec.Command(path, "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
		"--disable-background-networking", "--disable-component-update", "--disable-sync", "--remote-debugging-port=0",
		"--user-data-dir="+t.TempDir(), url)
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = syscall.Kill(-cmd.Process.Pid, syscall.SIGKILL) // with its children
		_ = cmd.Wait()
	})
}

// program is one of another language that runs beside the test.
type program struct {
	cmd       *exec.Cmd
	out, errs bytes.Buffer
	cancel    context.CancelFunc
}

func start(t *testing.T, name string, args ...string) *program {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	p := &program{cmd: exec.CommandContext(ctx, name, args...), cancel: cancel}
	p.cmd.Stdout, p.cmd.Stderr = &p.out, &p.errs
	p.cmd.Env = append(os.Environ(), "PYTHONPATH="+pythonClient, "PYTHONDONTWRITEBYTECODE=1")
	if err := p.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		cancel()
		_ = p.cmd.Wait()
	})
	return p
}

// end waits for the program, which must succeed.
func (p *program) end(t *testing.T) string {
	t.Helper()
	if err := p.cmd.Wait(); err != nil {
		t.Fatalf("%s: %v\n%s%s", p.cmd, err, p.out.String(), p.errs.String())
	}
	return p.out.String()
}

// cutting passes connections on to a server. The first one it breaks off once
// so many bytes have gone up.
func cutting(t *testing.T, server string, after int64) (address string, cut *atomic.Bool) {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	cut = &atomic.Bool{}
	var running sync.WaitGroup
	t.Cleanup(func() {
		_ = l.Close()
		running.Wait()
	})
	running.Go(func() {
		for first := true; ; first = false {
			down, err := l.Accept()
			if err != nil {
				return
			}
			up, err := net.Dial("tcp", server)
			if err != nil {
				_ = down.Close()
				continue
			}
			var both sync.WaitGroup
			both.Go(func() {
				var from io.Reader = down
				if first {
					from = io.LimitReader(down, after)
				}
				if n, _ := io.Copy(up, from); first && n == after {
					cut.Store(true)
				}
				_, _ = up.Close(), down.Close()
			})
			both.Go(func() {
				_, _ = io.Copy(down, up)
				_, _ = up.Close(), down.Close()
			})
			running.Go(both.Wait)
		}
	})
	return l.Addr().String(), cut
}

// tale is what a program says of following a vehicle to its drive's end, and
// of asking then.
type tale struct {
	Updates     int
	Last, Where string // hashes
	Nobody      string // what was said of one who is not here
}

func (h tale) check(t *testing.T, hash string) {
	t.Helper()
	if h.Updates < 1 || h.Last != hash || h.Where != hash || !strings.Contains(h.Nobody, `no vehicle "nobody"`) {
		t.Errorf("followed: %+v, want updates, the hash %s twice, and that nobody is not here", h, hash)
	}
}

const followInPython = `
import json, sys, leadline
with leadline.Client(sys.argv[1]) as client:
    updates = 0
    for news in client.follow(sys.argv[2]):
        updates += news.HasField("posterior")
        if news.HasField("farewell"):
            break
    answers = client.where(sys.argv[2], "nobody", region_fractions=[0.95]).answers
    assert len(answers[0].posterior.regions) == 1
    print(json.dumps({"updates": updates, "last": news.farewell.posterior_sha256, "where": answers[0].posterior_sha256, "nobody": answers[1].failure.message}))
`

const followInJavaScript = `
async function followed(client, vehicle) {
  let updates = 0, last = "";
  for await (const { news } of client.follow([vehicle])) {
    if (news.case === "posterior") updates++;
    if (news.case === "farewell") {
      last = news.value.posteriorSha256;
      break;
    }
  }
  const { answers } = await client.where([vehicle, "nobody"], { regionFractions: [0.95] });
  if (answers[0].posterior.regions.length !== 1) throw new Error("no region");
  return JSON.stringify({ updates, last, where: answers[0].posteriorSha256, nobody: answers[1].failure.message });
}
`

// The next two leave a drive, take it up from its first batch on, take it up
// after what the server has, and are refused a measurement.
const continueInPython = `
import sys, grpc, leadline
from leadline import v1
def fix(clock): return [{"time": f"2030-05-01T{clock}Z", "measurement": {"fix": {"lon": -30, "lat": 45, "sigma_m": 5}}}]
header = {"vehicle": "other-python", "map": "town", "start": {"point": {"lon": -30, "lat": 45, "sigma_m": 10}}}
with leadline.Client(sys.argv[1]) as client:
    with client.open(header, drive="d") as drive:
        drive.send(fix("12:00:01"))
        drive.send(fix("12:00:02"))
    with client.open(header, drive="d") as drive:
        assert drive.opened.sequence == 2, drive.opened
        for second in 1, 2, 3:
            drive.send(fix(f"12:00:0{second}"))
    with client.open(header, drive="d", onward=True) as drive:
        assert drive.opened.sequence == 3, drive.opened
        drive.send(fix("12:00:04"))
        drive.send(fix("11:00:00"))
        assert [r.reason for r in drive.refusals] == [v1.REASON_TOO_LATE], drive.refusals
        closed = drive.end()
    assert (closed.accepted, closed.refused) == (4, 1), closed
    try:
        client.open({"vehicle": "other-python", "map": "village"})
    except grpc.RpcError as e:
        print(e.details())
`

const continueInJavaScript = `
const fix = (clock) => [{ time: "2030-05-01T" + clock + "Z", measurement: { fix: { lon: -30, lat: 45, sigma_m: 5 } } }];
const header = { vehicle: "other-node", map: "town", start: { point: { lon: -30, lat: 45, sigma_m: 10 } } };
const want = (what, got, wanted) => { if (String(got) !== String(wanted)) throw new Error(what + " " + got + ", want " + wanted); };
async function continued(client) {
  let drive = await client.open(header, { drive: "d" });
  await drive.send(fix("12:00:01"));
  await drive.send(fix("12:00:02"));
  drive.leave();
  drive = await client.open(header, { drive: "d" });
  want("sequence", drive.opened.sequence, 2);
  for (const second of [1, 2, 3]) await drive.send(fix("12:00:0" + second));
  drive.leave();
  drive = await client.open(header, { drive: "d", onward: true });
  want("sequence", drive.opened.sequence, 3);
  await drive.send(fix("12:00:04"));
  await drive.send(fix("11:00:00"));
  want("refusals", drive.refusals.map((r) => r.reason), [3]);
  const closed = await drive.end();
  want("accepted and refused", [closed.accepted, closed.refused], [4, 1]);
  await client.open({ vehicle: "other-node", map: "village" }).catch((e) => console.log(e.rawMessage));
}
`

// TestClients proves that programs of other languages feed a drive to the same
// posteriors as replay has, though their connection breaks meanwhile, and can
// follow, ask, and continue a drive; and that a page can do that, from another origin.
func TestClients(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	mapPath, drivePath := compiledTown(t, dir, 30)
	var replayed struct {
		Hash string `json:"posterior_sha256"`
	}
	readJSON(t, good(t, "replay", drivePath, "--map", mapPath, "--json"), &replayed)
	hash := replayed.Hash
	// driveOf is the same drive of another vehicle.
	driveOf := func(t *testing.T, vehicle string) string {
		text, err := os.ReadFile(drivePath)
		if err != nil {
			t.Fatal(err)
		}
		return writeText(t, filepath.Join(dir, vehicle+drivefile.Suffix), strings.Replace(string(text), `"vehicle":"van"`, `"vehicle":"`+vehicle+`"`, 1))
	}
	page, result := servePage(t)
	srv := serveMaps(t, "--map", mapPath, "--origin", page.URL)
	const bytes = 10_000 // of some 40 kB

	t.Run("Python", func(t *testing.T) {
		t.Parallel()
		python := python(t)
		follower := start(t, python, "-c", followInPython, srv.address, "van-python")
		address, cut := cutting(t, srv.address, bytes)
		text := start(t, python, pythonClient+"/stream_drive.py", driveOf(t, "van-python"), "--to", address, "--batch", "20").end(t)
		if !strings.HasSuffix(text, "sha256 "+hash+"\n") || strings.Count(text, "95% within") < 10 || !cut.Load() {
			t.Errorf("cut: %v; replay has %s:\n%s", cut.Load(), hash, text)
		}
		if said := start(t, python, "-c", continueInPython, srv.address).end(t); !strings.Contains(said, `no map "village"`) {
			t.Errorf("a wrong map: %q", said)
		}
		var h tale
		readJSON(t, follower.end(t), &h)
		h.check(t, hash)
	})
	t.Run("Node", func(t *testing.T) {
		t.Parallel()
		node := node(t)
		script := func(functions, call string) *program {
			return start(t, node, "--input-type=module", "-e", fmt.Sprintf("import { connect } from %q;\n%s\nconst client = connect(%q);\n%s;\nclient.close();",
				absolute(t, webClient+"/node.js"), functions, srv.address, call))
		}
		follower := script(followInJavaScript, `console.log(await followed(client, "van-node"))`)
		address, cut := cutting(t, srv.address, bytes)
		text := start(t, node, webClient+"/stream-drive.js", driveOf(t, "van-node"), address).end(t)
		if !strings.HasSuffix(text, "sha256 "+hash+"\n") || strings.Count(text, "95% within") < 3 || !cut.Load() {
			t.Errorf("cut: %v; replay has %s:\n%s", cut.Load(), hash, text)
		}
		if said := script(continueInJavaScript, "await continued(client)").end(t); !strings.Contains(said, `no map "village"`) {
			t.Errorf("a wrong map: %q", said)
		}
		var h tale
		readJSON(t, follower.end(t), &h)
		h.check(t, hash)
	})
	t.Run("browser", func(t *testing.T) {
		t.Parallel()
		webPackages(t)
		chromium(t, page.URL+"/?server=http://"+srv.address)
		select {
		case <-result.opened:
		case <-time.After(patience):
			t.Fatal("the browser does not open the page")
		}
		good(t, "feed", driveOf(t, "van-page"), "--to", srv.address)
		select {
		case text := <-result.text:
			var h tale
			readJSON(t, text, &h)
			h.check(t, hash)
		case <-time.After(patience):
			t.Fatal("the page does not come to an end")
		}
	})
}

func absolute(t *testing.T, path string) string {
	t.Helper()
	path, err := filepath.Abs(path)
	if err != nil {
		t.Fatal(err)
	}
	return path
}

// pageResult is what a page tells its server.
type pageResult struct {
	opened chan struct{}
	text   chan string
}

// servePage serves a page that uses the client for browsers as its files stand,
// by an import map (HTML standard), without a bundler.
func servePage(t *testing.T) (*httptest.Server, *pageResult) {
	t.Helper()
	const modules = "/node_modules/@"
	imports, err := json.Marshal(map[string]any{"imports": map[string]string{
		"@bufbuild/protobuf":                    modules + "bufbuild/protobuf/dist/esm/index.js",
		"@bufbuild/protobuf/codegenv2":          modules + "bufbuild/protobuf/dist/esm/codegenv2/index.js",
		"@bufbuild/protobuf/reflect":            modules + "bufbuild/protobuf/dist/esm/reflect/index.js",
		"@bufbuild/protobuf/wire":               modules + "bufbuild/protobuf/dist/esm/wire/index.js",
		"@bufbuild/protobuf/wkt":                modules + "bufbuild/protobuf/dist/esm/wkt/index.js",
		"@connectrpc/connect":                   modules + "connectrpc/connect/dist/esm/index.js",
		"@connectrpc/connect/protocol":          modules + "connectrpc/connect/dist/esm/protocol/index.js",
		"@connectrpc/connect/protocol-connect":  modules + "connectrpc/connect/dist/esm/protocol-connect/index.js",
		"@connectrpc/connect/protocol-grpc-web": modules + "connectrpc/connect/dist/esm/protocol-grpc-web/index.js",
		"@connectrpc/connect-web":               modules + "connectrpc/connect-web/dist/esm/index.js",
	}})
	if err != nil {
		t.Fatal(err)
	}
	html := fmt.Sprintf(`<!doctype html><title>a page</title><script type="importmap">%s</script><script type="module">
const tell = (path, body) => fetch(path, { method: "POST", body });
try {
  const { connect } = await import("/browser.js");
  %s
  const client = connect(new URLSearchParams(location.search).get("server"));
  const end = followed(client, "van-page");
  await tell("/opened", "");
  await tell("/result", await end);
} catch (e) {
  await tell("/result", String(e.stack ?? e));
}
</script>`, imports, followInJavaScript)
	r := &pageResult{opened: make(chan struct{}, 1), text: make(chan string, 1)}
	mux := http.NewServeMux()
	mux.Handle("/", http.FileServer(http.Dir(webClient)))
	mux.HandleFunc("GET /{$}", func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Type", "text/html; charset=utf-8")
		_, _ = io.WriteString(w, html)
	})
	mux.HandleFunc("POST /opened", func(http.ResponseWriter, *http.Request) { r.opened <- struct{}{} })
	mux.HandleFunc("POST /result", func(_ http.ResponseWriter, req *http.Request) {
		text, _ := io.ReadAll(req.Body)
		r.text <- string(text)
	})
	srv := httptest.NewServer(mux)
	t.Cleanup(srv.Close)
	return srv, r
}
