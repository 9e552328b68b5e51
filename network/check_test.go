package network_test

import (
	"bytes"
	"encoding/json"
	"image/png"
	"math"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/network"
	"leadline/network/roadfile"
)

// TestCheckTown proves that Check finds what was put into the town.
func TestCheckTown(t *testing.T) {
	m, notes := town(t, roadfile.Options{})
	r := network.Check(m)
	for _, c := range []struct {
		what      string
		got, want int
	}{
		{"ends joined within 0.5 m (the alley)", notes.JoinedEnds, 1},
		{"repeated pieces (Dyer Court, twice the same two)", notes.Repeated, 2},
		{"lines of other classes (Church Path)", notes.OtherClass, 1},
		{"areas (Corn Square)", notes.Areas, 1},
		{"tunnels", notes.Tunnels, 1},
		{"bridges", notes.Bridges, 1},
		{"traps (Ferry Landing)", r.Traps.Count, 1},
		{"near misses (Ropewalk Yard)", r.NearMisses.Count, 1},
		{"weak components (the town, Ropewalk Yard)", r.Weak.Count, 2},
		{"isolated", r.Weak.Isolated, 1},
		{"entered, not left (Ferry Landing)", r.Strong.EnterOnly, 1},
		{"left, not entered (Bypass Slip with the bypass's start)", r.Strong.LeaveOnly, 1},
		{"duplicates", r.Duplicates.Count, 0},
		{"roads in tunnels", r.Structures.Tunnels, 1},
		{"roads on bridges", r.Structures.Bridges, 1},
		{"roundabout roads", r.Structures.Circles, 4},
		// Dyer Court, the alley, Market Street south, Barrow Way, both ends of
		// Ropewalk Yard, Ferry Landing.
		{"dead ends", r.DeadEnds, 7},
	} {
		if c.got != c.want {
			t.Errorf("%s: %d, want %d", c.what, c.got, c.want)
		}
	}
	if gap := r.NearMisses.List[0]; gap.Feature != "yard" || gap.Other != "arm-n" || math.Abs(gap.Metres-3) > 0.05 {
		t.Errorf("the near miss is %+v", gap)
	}
	if r.Heights.KnownShare != 1 || r.Resolution.MeanCellM > 1 || r.Resolution.MeanCellM < 0.9 {
		t.Errorf("heights %+v, resolution %+v", r.Heights, r.Resolution)
	}
	text := r.String()
	for _, want := range []string{"Ferry Landing", "Ropewalk Yard", "invented", m.Fingerprint()} {
		if !strings.Contains(text, want) {
			t.Errorf("the text does not mention %s:\n%s", want, text)
		}
	}
	b, err := json.Marshal(r)
	if err != nil {
		t.Fatal(err)
	}
	var back network.Report
	if err := json.Unmarshal(b, &back); err != nil || back.String() != text {
		t.Errorf("the report does not come back from JSON: %v", err)
	}
}

// TestCheckFindings proves that duplicates, short edges and layers are told
// apart.
func TestCheckFindings(t *testing.T) {
	g := cross()
	again := road(1, 0, at(100, 0), at(0, 0))
	short := road(1, 5, at(100, 0), at(100.05, 0))
	// Two dead ends 2 m from the road to the north: one beside it, one under it.
	beside, under := road(6, 7, at(50, 50), at(2, 50)), road(8, 9, at(50, 80), at(2, 80))
	under.Attr.Tunnel = true
	g.Roads = append(g.Roads, again, short, beside, under)
	r := network.Check(build(t, g, network.Options{}))
	if r.Duplicates.Count != 1 || r.Short.Count != 1 || r.NearMisses.Count != 1 {
		t.Fatalf("%d duplicates, %d short, %d near misses, want one each", r.Duplicates.Count, r.Short.Count, r.NearMisses.Count)
	}
	if math.Abs(r.NearMisses.List[0].Metres-2) > 1e-6 || r.NearMisses.List[0].Feature != "6-7" {
		t.Errorf("the near miss is %+v", r.NearMisses.List[0])
	}
	if r.Heights.KnownShare != 0 || !strings.Contains(r.String(), "none known") {
		t.Errorf("heights: %+v", r.Heights)
	}
}

// TestPicture proves that the picture is a PNG that shows roads and every mark
// of the legend.
func TestPicture(t *testing.T) {
	m, _ := town(t, roadfile.Options{})
	var b bytes.Buffer
	if err := network.Picture(&b, m); err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(&b)
	if err != nil {
		t.Fatal(err)
	}
	seen := map[[3]uint32]int{}
	for y := range img.Bounds().Dy() - 190 { // above the legend
		for x := range img.Bounds().Dx() {
			r, g, b, _ := img.At(x, y).RGBA()
			seen[[3]uint32{r >> 8, g >> 8, b >> 8}]++
		}
	}
	for name, rgb := range map[string][3]uint32{
		"trap": {0xcc, 0x79, 0xa7}, "near miss": {0, 0x9e, 0x73}, "tunnel": {0, 0x72, 0xb2},
		"bridge": {0x56, 0xb4, 0xe9}, "one way": {0xe6, 0x9f, 0}, "cut off": {0xd5, 0x5e, 0},
	} {
		if seen[rgb] < 50 {
			t.Errorf("%s: %d pixels of its colour", name, seen[rgb])
		}
	}
	// A map of one straight road has no height to scale by.
	if err := network.Picture(&b, build(t, network.Graph{Roads: []network.Road{road(0, 1, at(0, 0), at(9, 0))}}, network.Options{})); err != nil {
		t.Error(err)
	}
}

// TestTrueLengths proves that lengths are true ones: of straight lines across a
// map of 100 km, against geodesics.
func TestTrueLengths(t *testing.T) {
	var g network.Graph
	var want []float64
	for i, ends := range [][2]geo.Point{
		{at(-50000, -50000), at(50000, 50000)},
		{at(50000, -50000), at(50000, 50000)},
		{at(-50000, 40000), at(50000, 40000)},
		{at(49000, 0), at(50000, 300)},
	} {
		// A straight line of the frame, in steps of 500 m.
		var points []geo.Point
		v := ends[1].Sub(ends[0])
		n := math.Ceil(v.Norm() / 500)
		for k := 0.0; k <= n; k++ {
			points = append(points, geo.Point{E: ends[0].E + k/n*v.E, N: ends[0].N + k/n*v.N})
		}
		g.Roads = append(g.Roads, oneWay(road(int32(2*i), int32(2*i+1), points...)))
		sum := 0.0
		for k := range points[1:] {
			d, _, err := geo.WGS84.Distance(here.Inverse(points[k]), here.Inverse(points[k+1]))
			if err != nil {
				t.Fatal(err)
			}
			sum += d
		}
		want = append(want, sum)
	}
	m := build(t, g, network.Options{})
	for i, w := range want {
		// A segment of 500 m differs from its geodesic by the middle's scale
		// (2.5e-10); Vincenty's formula is good to some 1e-5 m a segment.
		if got := m.LengthM(int32(i)); math.Abs(got/w-1) > 1e-7 {
			t.Errorf("line %d is %.4f m long, its geodesics %.4f", i, got, w)
		}
	}
}
