package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/fixtures/drives"
	"leadline/fixtures/sim"
)

// binary builds the command when it is first needed, as `go build` does:
// without the race detector, which makes filtering twenty times slower and has
// tests of its own in the packages that start goroutines.
var binary = sync.OnceValue(func() string {
	path := filepath.Join(buildDir, "leadline")
	if out, err := exec.Command("go", "build", "-buildvcs=false", "-o", path, ".").CombinedOutput(); err != nil {
		panic(fmt.Sprintf("go build: %v\n%s", err, out))
	}
	return path
})

var buildDir string

func TestMain(m *testing.M) {
	// What a test runs takes its settings from variables of this prefix: those
	// that steer the tests themselves, and a developer's own, are not among them.
	for _, kv := range os.Environ() {
		if name, _, _ := strings.Cut(kv, "="); strings.HasPrefix(name, variablePrefix) {
			_ = os.Unsetenv(name)
		}
	}
	var err error
	if buildDir, err = os.MkdirTemp("", "leadline-test-"); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	status := m.Run()
	_ = os.RemoveAll(buildDir)
	os.Exit(status)
}

// patience is how long any command may take before it is taken to hang: the
// slowest, the demo, takes some 40 s on an idle machine.
const patience = 5 * time.Minute

func command(ctx context.Context, args ...string) *exec.Cmd {
	return exec.CommandContext(ctx, binary(), args...)
}

// runsProgram skips a test under -short: what it runs is built without the
// race detector, for which -short is there.
func runsProgram(t *testing.T) {
	t.Helper()
	if testing.Short() {
		t.Skip("runs the program: not with -short")
	}
}

// leadline runs a command to its end.
func leadline(t *testing.T, args ...string) (stdout, stderr string, status int) {
	t.Helper()
	runsProgram(t)
	binary() // building it takes its own time
	ctx, cancel := context.WithTimeout(t.Context(), patience)
	defer cancel()
	var out, errs bytes.Buffer
	cmd := command(ctx, args...)
	cmd.Stdout, cmd.Stderr = &out, &errs
	err := cmd.Run()
	if ctx.Err() != nil {
		t.Fatalf("leadline %s hangs; so far:\n%s%s", strings.Join(args, " "), out.String(), errs.String())
	}
	if cmd.ProcessState == nil {
		t.Fatalf("leadline %s: %v", strings.Join(args, " "), err)
	}
	return out.String(), errs.String(), cmd.ProcessState.ExitCode()
}

// good runs a command that must succeed and say nothing on stderr.
func good(t *testing.T, args ...string) string {
	t.Helper()
	out, errs, status := leadline(t, args...)
	if status != 0 || errs != "" {
		t.Fatalf("leadline %s: status %d, stderr %q\n%s", strings.Join(args, " "), status, errs, out)
	}
	return out
}

// bad runs a command that must end with status 2 and one line on stderr that
// holds each of the words.
func bad(t *testing.T, words []string, args ...string) {
	t.Helper()
	out, errs, status := leadline(t, args...)
	if status != exitBad {
		t.Errorf("leadline %s: status %d, want 2\n%s%s", strings.Join(args, " "), status, out, errs)
		return
	}
	if strings.Count(errs, "\n") != 1 || !strings.HasSuffix(errs, "\n") || !strings.HasPrefix(errs, "leadline: ") || len(errs) > 1000 {
		t.Errorf("leadline %s: stderr is not one line:\n%s", strings.Join(args, " "), errs)
	}
	for _, w := range words {
		if !strings.Contains(errs, w) {
			t.Errorf("leadline %s: %q does not say %q", strings.Join(args, " "), errs, w)
		}
	}
}

// running is a server process.
type running struct {
	cmd     *exec.Cmd
	address string
	log     *lockedBuffer
}

type lockedBuffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (b *lockedBuffer) Write(p []byte) (int, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.b.Write(p)
}

func (b *lockedBuffer) String() string {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.b.String()
}

// serveMaps starts a server on a free port and waits until it listens.
func serveMaps(t *testing.T, args ...string) *running {
	t.Helper()
	runsProgram(t)
	r := &running{log: &lockedBuffer{}}
	r.cmd = command(context.Background(), append([]string{"serve", "--listen", "127.0.0.1:0"}, args...)...)
	r.cmd.Stderr = r.log
	out, err := r.cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := r.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		_ = r.cmd.Process.Kill()
		_ = r.cmd.Wait()
	})
	line := make(chan string, 1)
	go func() {
		text, _ := bufio.NewReader(out).ReadString('\n')
		line <- text
		_, _ = io.Copy(io.Discard, out)
	}()
	select {
	case text := <-line:
		var found bool
		if r.address, found = strings.CutPrefix(text, "listening on "); !found {
			t.Fatalf("serve says %q\n%s", text, r.log)
		}
		r.address, _, _ = strings.Cut(r.address, ",")
	case <-time.After(patience):
		t.Fatal("serve does not say where it listens")
	}
	return r
}

// stop ends a server as an operator does and returns its exit status.
func (r *running) stop(t *testing.T) int {
	t.Helper()
	if err := r.cmd.Process.Signal(syscall.SIGTERM); err != nil {
		t.Fatal(err)
	}
	done := make(chan struct{})
	go func() {
		_ = r.cmd.Wait()
		close(done)
	}()
	select {
	case <-done:
	case <-time.After(patience):
		t.Fatal("serve does not stop")
	}
	return r.cmd.ProcessState.ExitCode()
}

func writeText(t *testing.T, path, text string) string {
	t.Helper()
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func readJSON(t *testing.T, text string, to any) {
	t.Helper()
	if err := json.Unmarshal([]byte(text), to); err != nil {
		t.Fatalf("%v in %s", err, text)
	}
}

// townJSON writes an invented town as GeoJSON.
func townJSON(t *testing.T, path string, columns, rows int) string {
	t.Helper()
	frame := geo.NewFrame(geo.FromDegrees(-30, 45)) // in the open Atlantic
	town, err := sim.Town(3, frame, columns, rows)
	if err != nil {
		t.Fatal(err)
	}
	var features []any
	for i := range int32(town.Roads()) {
		r := town.Road(i)
		if r.Twin >= 0 && r.Twin < i {
			continue
		}
		var line [][2]float64
		for _, p := range r.Line {
			lon, lat := frame.Inverse(p).Degrees()
			line = append(line, [2]float64{lon, lat})
		}
		tags := map[string]any{"highway": r.Class, "name": r.Name}
		if r.Twin < 0 {
			tags["oneway"] = "yes"
		}
		features = append(features, map[string]any{
			"type": "Feature", "properties": tags, "geometry": map[string]any{"type": "LineString", "coordinates": line},
		})
	}
	b, err := json.Marshal(map[string]any{"type": "FeatureCollection", "features": features})
	if err != nil {
		t.Fatal(err)
	}
	return writeText(t, path, string(b))
}

// reliefASCII writes an invented relief as an ESRI ASCII grid, in feet.
func reliefASCII(t *testing.T, path string) string {
	t.Helper()
	r, err := inventRelief(5)
	if err != nil {
		t.Fatal(err)
	}
	const n, from = 400, 200 // a part of it
	g := r.Grid()
	var b strings.Builder
	fmt.Fprintf(&b, "ncols %d\nnrows %d\nxllcenter %.10f\nyllcenter %.10f\ncellsize %.17g\nNODATA_value -9999\n",
		n, n, g.FirstX+from*g.StepX, g.FirstY+(from+n-1)*g.StepY, g.StepX)
	for row := range n {
		for col := range n {
			fmt.Fprintf(&b, "%.3f ", r.Samples()[(from+row)*g.Cols+from+col]/0.3048)
		}
		b.WriteByte('\n')
	}
	return writeText(t, path, b.String())
}

// simulated writes a drive of the simulator.
func simulated(t *testing.T, path string, d *sim.Drive, mapName string) string {
	t.Helper()
	var b bytes.Buffer
	if err := writeRecords(&b, drives.Convert(d, mapName, "")); err != nil {
		t.Fatal(err)
	}
	return writeText(t, path, b.String())
}

// carDrive drives over a compiled map for some seconds.
func carDrive(t *testing.T, mapPath, path string, seconds float64) string {
	t.Helper()
	m, err := openMap(mapPath)
	if err != nil {
		t.Fatal(err)
	}
	defer m.Close()
	world, err := sim.FromMap(m.Roads)
	if err != nil {
		t.Fatal(err)
	}
	if world, err = world.Disturb(7, sim.MapErrorM, sim.MapErrorLengthM); err != nil {
		t.Fatal(err)
	}
	o := sim.StandardCar()
	o.Vehicle, o.DurationS, o.StartSigmaM = "van", seconds, 8
	d, err := world.Drive(7, o)
	if err != nil {
		t.Fatal(err)
	}
	return simulated(t, path, d, mapName(mapPath))
}

// compiledTown compiles the town and drives over it.
func compiledTown(t *testing.T, dir string, seconds float64) (mapPath, drivePath string) {
	t.Helper()
	mapPath = filepath.Join(dir, "town.roads.arrow")
	good(t, "map", "roads", townJSON(t, filepath.Join(dir, "town.json"), 8, 7), "-o", mapPath)
	return mapPath, carDrive(t, mapPath, filepath.Join(dir, "morning"+drivefile.Suffix), seconds)
}
