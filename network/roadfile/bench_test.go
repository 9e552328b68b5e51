//go:build unix

package roadfile

import (
	"fmt"
	"math"
	"path/filepath"
	"testing"

	"leadline/fixtures/outside"
)

// maps are the outside maps of the benchmarks, by rising size.
var maps = []string{"andorra-latest.osm.bz2", "large-network.json", "delaware-latest.osm.pbf"}

// BenchmarkRead reads and compiles.
func BenchmarkRead(b *testing.B) {
	for _, name := range maps {
		b.Run(name, func(b *testing.B) {
			path := outside.Path(b, name)
			for b.Loop() {
				m, _, err := Read(path, Options{})
				if err != nil {
					b.Fatal(err)
				}
				b.ReportMetric(edgeKM(m), "edge-km")
			}
		})
	}
}

// BenchmarkOpen opens compiled maps.
func BenchmarkOpen(b *testing.B) {
	for _, name := range maps {
		m, _, err := Read(outside.Path(b, name), Options{})
		if err != nil {
			b.Fatal(err)
		}
		cells := 0
		for _, n := range m.Lines(0).Cells {
			cells += int(n)
		}
		path := filepath.Join(b.TempDir(), "x"+Suffix)
		if err := Write(path, m); err != nil {
			b.Fatal(err)
		}
		b.Run(fmt.Sprintf("cells=%s", count(cells)), func(b *testing.B) {
			for b.Loop() {
				_, closer, err := Open(path)
				if err != nil {
					b.Fatal(err)
				}
				closer.Close()
			}
		})
	}
}

// count writes a number in thousands or millions.
func count(n int) string {
	if n >= 1e6 {
		return fmt.Sprintf("%.1fM", float64(n)/1e6)
	}
	return fmt.Sprintf("%.0fk", math.Round(float64(n)/1e3))
}
