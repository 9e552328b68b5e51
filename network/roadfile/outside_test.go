//go:build unix

package roadfile

import (
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"leadline/fixtures/outside"
	"leadline/network"
)

// roadKM returns the length of a map's roads, each once.
func roadKM(m *network.Map) float64 {
	km := 0.0
	for c := range int32(m.Charts()) {
		if t := m.Twin(c); t < 0 || c < t {
			km += m.LengthM(c) / 1000
		}
	}
	return km
}

// TestOutsideMaps reads real extracts and compares what they hold with figures
// counted independently of this package: lengths over a sphere of 6371.0088 km
// of the ways of the classes in Drivable, and their tunnels. A sphere's
// lengths differ from the ellipsoid's by up to 0.4 % with latitude and
// direction.
func TestOutsideMaps(t *testing.T) {
	for _, c := range []struct {
		file     string
		features int // 0: not counted
		km       float64
		tunnels  int
		within   time.Duration
		long     bool
	}{
		{"large-network.json", 20227, 1284, 80, 10 * time.Second, false},
		{"andorra-latest.osm.bz2", 0, 495, 23, 0, false},
		{"delaware-latest.osm.pbf", 0, 16365, 0, 0, true},
	} {
		t.Run(c.file, func(t *testing.T) {
			if c.long && testing.Short() {
				t.Skip("builds a map of a whole state")
			}
			path := outside.Path(t, c.file)
			began := cpuTime(t)
			m, notes, err := Read(path, Options{})
			took := cpuTime(t) - began
			if err != nil {
				t.Fatal(err)
			}
			t.Logf("%v; %d edges, %.1f km; %v", took, m.Charts(), roadKM(m), notes)
			if c.features > 0 && notes.Features != c.features {
				t.Errorf("%d features, want %d", notes.Features, c.features)
			}
			if km := roadKM(m); math.Abs(km/c.km-1) > 0.004 {
				t.Errorf("%.1f km, want %.0f", km, c.km)
			}
			if c.tunnels > 0 && notes.Tunnels != c.tunnels {
				t.Errorf("%d tunnels, want %d", notes.Tunnels, c.tunnels)
			}
			if c.within > 0 && took > c.within {
				t.Errorf("took %v, want at most %v", took, c.within)
			}
			if !strings.Contains(m.Data().Licence, "ODbL") {
				t.Errorf("licence %q", m.Data().Licence)
			}
			// A road network hangs together: these are extracts of towns and
			// countries, whose roads lead out of almost every place.
			_, strong := m.Core()
			if share := strong / 1000 / edgeKM(m); share < 0.9 {
				t.Errorf("only %.3f of the edges are strongly connected", share)
			}
		})
	}
}

// cpuTime is what the process has used so far: unlike the time of day it does
// not depend on what else the machine does, and on an idle machine it is an
// upper bound of the time taken, as the garbage collector runs beside.
func cpuTime(tb testing.TB) time.Duration {
	tb.Helper()
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		tb.Fatal(err)
	}
	return time.Duration(u.Utime.Nano() + u.Stime.Nano())
}

func edgeKM(m *network.Map) float64 {
	km := 0.0
	for c := range int32(m.Charts()) {
		km += m.LengthM(c) / 1000
	}
	return km
}

// TestArrowJavaScript lets the Arrow project's JavaScript library read a
// compiled map: another implementation of the container.
func TestArrowJavaScript(t *testing.T) {
	node := outside.Tool(t, "node", "nodejs")
	dir, err := outside.Dir()
	if err != nil {
		t.Fatal(err)
	}
	modules := filepath.Join(dir, "node_modules")
	if _, err := os.Stat(filepath.Join(modules, "apache-arrow")); err != nil {
		t.Skipf("outside library apache-arrow is not here: npm install --prefix %s apache-arrow", dir)
	}
	m, _ := readTown(t, Options{})
	path := filepath.Join(t.TempDir(), "town"+Suffix)
	if err := Write(path, m); err != nil {
		t.Fatal(err)
	}
	const script = `
const { tableFromIPC } = require('apache-arrow');
const t = tableFromIPC(require('fs').readFileSync(process.argv[1]));
let km = 0, tunnels = 0, weight = 0, points = 0;
for (const row of t) {
  const along = row.along_m.toArray();
  km += along[along.length - 1] / 1000;
  points += row.geometry.length;
  if (row.name === 'Barrow Tunnel') tunnels++;
  for (const w of row.next_weight.toArray()) weight += w;
}
console.log(JSON.stringify([t.numRows, +km.toFixed(6), points, tunnels, Math.round(weight), t.schema.metadata.get('leadline:fingerprint')]));`
	cmd := exec.Command(node, "-e", script, path)
	cmd.Env = append(os.Environ(), "NODE_PATH="+modules)
	out, err := cmd.CombinedOutput()
	if err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	weight := 0.0
	for _, w := range m.Data().LinkWeight {
		weight += w
	}
	want := jsonText(t, []any{m.Charts(), math.Round(edgeKM(m)*1e6) / 1e6, len(m.Data().East), 2, math.Round(weight), m.Fingerprint()})
	if got := strings.TrimSpace(string(out)); got != want {
		t.Errorf("it reads %s, want %s", got, want)
	}
}
