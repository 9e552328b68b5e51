package filter_test

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// hashBelief writes every bit that a belief consists of.
func hashBelief(b *filter.Belief) string {
	h := sha256.New()
	parts := []any{
		int64(b.Level), b.Lattice, b.Key, b.Mass, b.Mean, b.Cov,
		b.Tiles.At, b.Tiles.Mass, b.Tiles.Surplus, b.Pruned, b.LeftMap,
	}
	if v := &b.Slices; len(v.At) > 0 {
		parts = append(parts, v.SpacingM, v.SpacingMPS, v.BaseMPS, v.Low, v.OriginM[0], v.OriginM[1], v.At, v.Scale, v.Pending)
		for _, r := range v.Rows {
			parts = append(parts, r.Col, r.Len, v.Mass[r.Start:r.Start+int(r.Len)])
		}
	}
	for _, v := range parts {
		if err := binary.Write(h, binary.LittleEndian, v); err != nil {
			panic(err)
		}
	}
	return hex.EncodeToString(h.Sum(nil))
}

// scripted runs a fixed script over a line and over planes with and without
// quantities and velocity axes; it returns the hashes of the beliefs. It uses only likelihoods
// without transcendental functions of their own.
func scripted() (lines []string) {
	for _, c := range []struct {
		name  string
		space filter.Space
		prior filter.Prior
		qs    []filter.Quantity
	}{
		{"fork", fork(), filter.Anywhere{}, []filter.Quantity{{Name: filter.Along}, {Name: filter.OdometerScale, PriorVar: 1e-2}}},
		{"lattice", plane.Open(geo.FromDegrees(7, 47), 500, 5), filter.AtPoint{SigmaM: 12}, nil},
		{"simple", plane.Open(geo.FromDegrees(7, 47), 500, 5), filter.AtPoint{SigmaM: 40}, nil},
		{"plane", plane.Open(geo.FromDegrees(7, 47), 500, 5), filter.AtPoint{SigmaM: 6}, []filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: filter.Heading, Angular: true, PriorVar: 10}}},
		{"velocities", plane.Open(geo.FromDegrees(7, 47), 500, 5), filter.AtPoint{SigmaM: 12}, velocityAxes(geo.Point{E: 2, N: -1}, 1.5)},
	} {
		b, err := filter.Seed(c.space, c.prior, c.qs, 1<<14)
		if err != nil {
			panic(err)
		}
		var w filter.Workspace
		sum := 0.0
		for i := range 6 {
			x := float64(i)
			step := filter.NewStep(max(b.K(), b.Dim))
			step.Add[0], step.Q[0] = 0.37+x/8, 0.21
			if len(b.Slices.At) > 0 {
				step = coasting(1, 0.2)
			} else if b.K() > 1 {
				step.SetF(0, b.K()-1, 0.3)
			}
			if b.Dim == 2 {
				step.Add[1], step.Q[1], step.Q[2] = -1.13, 0.05, 0.4
			}
			filter.Predict(b, c.space, step, &w)
			l := filtertest.Along{Z: 2.5 + x/3, Mixture: filter.Noise{
				Parts:      []filter.NoisePart{{Weight: 0.9, Cov: [3]float64{30}}, {Weight: 0.06, Cov: [3]float64{400}}},
				FlatWeight: 0.04, FlatDensity: 0.002,
			}}
			if c.name == "simple" { // by products with densities
				l.Mixture.Parts = l.Mixture.Parts[:1]
				l.Mixture.Parts[0].Weight = 0.96
			}
			e, err := filter.Update(b, c.space, l, &w)
			if err != nil {
				panic(err)
			}
			sum += e
			filter.Adapt(b, 1<<14, &w)
		}
		lines = append(lines, fmt.Sprintf("%s %s %x", c.name, hashBelief(b), sum))
	}
	return lines
}

const childVariable = "LEADLINE_FILTER_GOLDEN_CHILD"

// TestGoldenBits proves that a scripted run gives the same bits again, in the
// process and in another one whose CPU extensions are switched off, and the
// bits that are committed for this architecture. LEADLINE_REWRITE=1 rewrites
// those: a change of bits is a change of the filter, and needs a reason in the
// commit that makes it.
func TestGoldenBits(t *testing.T) {
	got := strings.Join(scripted(), "\n") + "\n"
	if os.Getenv(childVariable) != "" {
		fmt.Printf("<<%s>>", got)
		return
	}
	if again := strings.Join(scripted(), "\n") + "\n"; again != got {
		t.Errorf("the same script gave\n%sand then\n%s", got, again)
	}
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	child := exec.Command(self, "-test.run=^TestGoldenBits$")
	child.Env = append(os.Environ(), childVariable+"=1", "GODEBUG=cpu.all=off")
	out, err := child.CombinedOutput()
	if err != nil {
		t.Fatalf("without CPU extensions: %v\n%s", err, out)
	}
	_, rest, _ := strings.Cut(string(out), "<<")
	if plain, _, ok := strings.Cut(rest, ">>"); !ok || plain != got {
		t.Errorf("with GODEBUG=cpu.all=off\n%swith the CPU's extensions\n%s", out, got)
	}

	file := filepath.Join("testdata", "golden-"+runtime.GOARCH+".txt")
	if os.Getenv("LEADLINE_REWRITE") != "" {
		if err := os.WriteFile(file, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(file)
	if os.IsNotExist(err) {
		t.Logf("no golden bits for %s; LEADLINE_REWRITE=1 writes %s", runtime.GOARCH, file)
		return
	}
	if err != nil {
		t.Fatal(err)
	}
	if string(want) != got {
		t.Errorf("golden bits in %s\n%snow\n%s", file, want, got)
	}
}
