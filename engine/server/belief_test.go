package server

import (
	"math"
	"math/rand/v2"
	"testing"

	"google.golang.org/protobuf/proto"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// told is a cell as a reader of the message sees it.
type told struct {
	lon, lat, mass float64
}

// decode reads a belief as its .proto file says, and nothing else.
func decode(t *testing.T, m *leadlinev1.Belief) (cells []told) {
	t.Helper()
	mass := func(b byte) float64 { return m.GetPeakMass() * math.Exp((float64(b)-255)/16) }
	if g := m.GetGrid(); g != nil {
		if len(g.GetMass()) != int(g.GetColumns()*g.GetRows()) {
			t.Fatalf("%d masses in %d columns and %d rows", len(g.GetMass()), g.GetColumns(), g.GetRows())
		}
		for i, b := range g.GetMass() {
			if b == 0 {
				continue
			}
			u, v := shareOf(i%int(g.GetColumns()), g.GetColumns()), shareOf(i/int(g.GetColumns()), g.GetRows())
			at := func(of func(*leadlinev1.Position) float64) float64 {
				return (1-v)*((1-u)*of(g.GetFirst())+u*of(g.GetFirstLast())) + v*((1-u)*of(g.GetLastFirst())+u*of(g.GetLast()))
			}
			cells = append(cells, told{at((*leadlinev1.Position).GetLon), at((*leadlinev1.Position).GetLat), mass(b)})
		}
	}
	for _, s := range m.GetStretches() {
		if len(s.GetMass()) != len(s.GetMiddles()) {
			t.Fatalf("%d masses and %d middles", len(s.GetMass()), len(s.GetMiddles()))
		}
		for i, b := range s.GetMass() {
			if b == 0 {
				t.Error("a stretch tells a cell of no mass")
			}
			cells = append(cells, told{s.GetMiddles()[i].GetLon(), s.GetMiddles()[i].GetLat(), mass(b)})
		}
	}
	return cells
}

// share is how far along a row of n the i-th is.
func shareOf(i int, n uint32) float64 {
	if n == 1 {
		return 0
	}
	return float64(i) / float64(n-1)
}

// quantum is by how much a told mass may be off: half a step.
var quantum = math.Exp(1.0/32) + 1e-9

// wantMasses compares told cells with the masses by cell, given what names a
// cell by its place, and what is left out with the rest.
func wantMasses[K comparable](t *testing.T, what string, m *leadlinev1.Belief, cells []told, want map[K]float64, entries int, name func(geo.LonLat) K) {
	t.Helper()
	sum, peak := 0.0, 0.0
	for _, v := range want {
		peak = max(peak, v)
	}
	if m.GetPeakMass() != peak {
		t.Errorf("%s: peak %v, want %v", what, m.GetPeakMass(), peak)
	}
	left := 0.0
	for _, v := range want {
		left += v
	}
	seen := map[K]bool{}
	for _, c := range cells {
		k := name(geo.FromDegrees(c.lon, c.lat))
		if r := c.mass / want[k]; seen[k] || !(r < quantum && r > 1/quantum) {
			t.Fatalf("%s: the cell at %v, %v has %v, want %v (seen: %v)", what, c.lon, c.lat, c.mass, want[k], seen[k])
		}
		seen[k] = true
		left -= want[k]
		sum += c.mass
	}
	// Entries of less than 1e-9 of the heaviest are left out where they are.
	if math.Abs(left-m.GetRest()) > 1e-9*peak*float64(entries) || math.Abs(sum+m.GetRest()-1) > quantum-1 {
		t.Errorf("%s: rest %v, want %v; with what is told that makes %v", what, m.GetRest(), left, sum+m.GetRest())
	}
}

// TestBeliefOnAPlane proves that a reader gets a session's masses back, each
// within a quantum and at its place, with quantities and without.
func TestBeliefOnAPlane(t *testing.T) {
	if testing.Short() {
		t.Skip("one caller at a time: not with -short")
	}
	for what, suite := range map[string]*sensor.Suite{
		"lattice": nil,
		"Gaussians": {Sensors: []sensor.Sensor{
			{Name: "log", Kind: sensor.KindDisplacement},
			{Name: "gnss", Kind: sensor.KindFix},
			{Name: "compass", Kind: sensor.KindHeading, Nuisances: []sensor.Nuisance{{Name: sensor.NuisanceHeading, Sigma: 10}}},
		}},
	} {
		space := sea().Space
		s, err := session.New(session.Config{Space: space, Suite: suite, MaxCells: 20000, Start: session.Start{Kind: session.AtPoint, Point: middle, SigmaM: 100}})
		if err != nil {
			t.Fatal(err)
		}
		for _, ev := range voyage(3, 10) {
			if _, err := s.Add(ev); err != nil {
				t.Fatal(err)
			}
		}
		s.Flush()
		var c filter.Cloud
		s.ReadBelief(&c)
		level, l := s.Cells()
		m := usual.of(&c, space, level, l)
		if m.GetGrid().GetCellM() != l.SpacingM || m.GetStretches() != nil {
			t.Fatalf("%s: cells of %v m, want %v", what, m.GetGrid().GetCellM(), l.SpacingM)
		}
		name := func(p geo.Point) [2]int {
			return [2]int{int(math.Round((p.E - l.Origin.E) / l.SpacingM)), int(math.Round((p.N - l.Origin.N) / l.SpacingM))}
		}
		want := map[[2]int]float64{}
		for i, v := range c.Mass {
			want[name(geo.Point{E: c.East[i], N: c.North[i]})] += v
		}
		cells := decode(t, m)
		if len(cells) < 4 {
			t.Errorf("%s: only %d cells", what, len(cells))
		}
		wantMasses(t, what, m, cells, want, len(c.Mass), func(p geo.LonLat) [2]int { return name(space.Frame().Forward(p)) })
	}
}

// TestBeliefWide proves that a belief too wide for its cells is told whole, in
// coarser ones, and that their places are bilinear between the corners as well
// as is said.
func TestBeliefWide(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 1))
	for _, lat := range []float64{0, 45, 65} {
		space := plane.Open(geo.FromDegrees(20, lat), 100e3, 20)
		l := filter.Lattice{Origin: geo.Point{E: 3, N: -2}, SpacingM: 20}
		var c filter.Cloud
		for range 3000 {
			// Two places 12 km apart, each some hundred metres wide.
			far := float64(430 * rng.IntN(2))
			col, row := math.Round(far+5*rng.NormFloat64()), math.Round(-far+5*rng.NormFloat64())
			c.East, c.North = append(c.East, l.Origin.E+col*l.SpacingM), append(c.North, l.Origin.N+row*l.SpacingM)
			c.Mass = append(c.Mass, 1.0/3000)
		}
		m := usual.of(&c, space, 0, l)
		g := m.GetGrid()
		if n := g.GetColumns() * g.GetRows(); int(n) > usual.gridCells || int(n) < usual.gridCells/8 || g.GetCellM() != 40 {
			t.Errorf("%d × %d cells of %v m", g.GetColumns(), g.GetRows(), g.GetCellM())
		}
		name := func(p geo.Point) [2]int {
			return [2]int{int(math.Floor(((p.E-l.Origin.E)/20 + 0.5) / 2)), int(math.Floor(((p.N-l.Origin.N)/20 + 0.5) / 2))}
		}
		want := map[[2]int]float64{}
		for i, v := range c.Mass {
			want[name(geo.Point{E: c.East[i], N: c.North[i]})] += v
		}
		wantMasses(t, "two places", m, decode(t, m), want, len(c.Mass), func(p geo.LonLat) [2]int { return name(space.Frame().Forward(p)) })
	}
}

// TestBeliefOnRoads proves the same on roads: of few cells each is told, at its
// place; of many the heaviest, in coarser cells.
func TestBeliefOnRoads(t *testing.T) {
	road := filtertest.NewRoad(1, []filtertest.Course{
		{HeadingRad: 0.3, Arcs: []filtertest.Arc{{LengthM: 120}, {LengthM: 40, Curvature: 0.02}, {LengthM: 60.5}}},
		{Start: geo.Point{E: 90, N: 190}, HeadingRad: 1.1, Arcs: []filtertest.Arc{{LengthM: 20000}}},
		{Start: geo.Point{E: 90, N: 190}, HeadingRad: 1.6, Arcs: []filtertest.Arc{{LengthM: 60000}}},
	}, [][]filtertest.Link{{{To: 1, Weight: 0.5}, {To: 2, Weight: 0.5}}, nil, nil})
	lines := road.Lines(0)
	type cell struct{ chart, cell int }
	for _, n := range []int{1, 200, 3000, 100000} {
		rng := rand.New(rand.NewPCG(uint64(n), 5))
		var c filter.Cloud
		total := 0.0
		for range n {
			chart := int32(rng.IntN(3))
			if n <= 200 {
				chart = 0
			}
			c.Chart = append(c.Chart, chart)
			c.AlongM = append(c.AlongM, rng.Float64()*lines.LengthM[chart])
			c.Mass = append(c.Mass, math.Exp(3*rng.NormFloat64()))
			total += c.Mass[len(c.Mass)-1]
		}
		for i := range c.Mass {
			c.Mass[i] /= total
		}
		m := usual.of(&c, road, 0, filter.Lattice{})
		cells := decode(t, m)
		width := m.GetStretches()[0].GetCellM()
		if n < 100000 && width > 1 || n == 100000 && (width < 4 || len(cells) > usual.roadCells) {
			t.Errorf("%d entries: %d cells of %v m", n, len(cells), width)
		}
		// Names by the place: which chart, and how far along. The charts lie
		// apart but at their junction.
		level := 0
		for road.Lines(level).WidthM[m.GetStretches()[0].GetEdge()] != width {
			level++
		}
		at := road.Lines(level)
		want := map[cell]float64{}
		for i, v := range c.Mass {
			want[cell{int(c.Chart[i]), int(c.AlongM[i] / at.WidthM[c.Chart[i]])}] += v
		}
		left := 1.0
		sum := 0.0
		i := 0
		for _, s := range m.GetStretches() {
			for j, b := range s.GetMass() {
				k := cell{int(s.GetEdge()), int(math.Round(s.GetFromM()/s.GetCellM())) + j}
				if r := cells[i].mass / want[k]; !(r < quantum && r > 1/quantum) {
					t.Fatalf("%d entries: cell %v has %v (byte %d), want %v", n, k, cells[i].mass, b, want[k])
				}
				var cols filter.Columns
				cols.Resize(filter.WantPosition, 1, 1)
				road.Sample(&cols, []int32{int32(k.chart)}, []float64{(float64(k.cell) + 0.5) * s.GetCellM()}, 0)
				p, err := wire.Position(s.GetMiddles()[j])
				if q := road.Frame().Forward(p); err != nil || math.Hypot(q.E-cols.East[0], q.N-cols.North[0]) > 1e-6 {
					t.Fatalf("cell %v is at %v, want %v, %v", k, q, cols.East[0], cols.North[0])
				}
				left -= want[k]
				sum += cells[i].mass
				i++
			}
		}
		if math.Abs(left-m.GetRest()) > 1e-9 || math.Abs(sum+m.GetRest()-1) > quantum-1 {
			t.Errorf("%d entries: rest %v, want %v; told %v", n, m.GetRest(), left, sum)
		}
	}
}

// unpack makes the plain message of a packed one, as the .proto file says.
func unpack(m *leadlinev1.Belief, frame geo.Frame) *leadlinev1.Belief {
	m = proto.CloneOf(m)
	if g := m.GetGrid(); g != nil {
		mass := make([]byte, g.GetColumns()*g.GetRows())
		told, at := g.GetMass(), 0
		for i := 0; i+1 < len(g.GetRuns()); i += 2 {
			at += int(g.GetRuns()[i])
			n := copy(mass[at:at+int(g.GetRuns()[i+1])], told)
			told, at = told[n:], at+n
		}
		g.Mass, g.Runs = mass, nil
	}
	for _, s := range m.GetStretches() {
		var e, n int32
		for i := range s.GetEastCm() {
			e, n = e+s.GetEastCm()[i], n+s.GetNorthCm()[i]
			s.Middles = append(s.Middles, wire.FromPosition(frame.Inverse(geo.Point{E: float64(e) / 100, N: float64(n) / 100})))
		}
		s.EastCm, s.NorthCm = nil, nil
	}
	return m
}

// TestBeliefPacked proves that a packed belief is the plain one, to a centimetre
// on roads; that runs of zeros of any length come through; and how large the
// greatest are.
func TestBeliefPacked(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	space := plane.Open(geo.FromDegrees(20, 50), 100e3, 20)
	for _, n := range []int{1, 2, 5, 60, 2000} {
		var c filter.Cloud
		for range n {
			c.East, c.North = append(c.East, 5*math.Round(12*rng.NormFloat64())), append(c.North, 5*math.Round(12*rng.NormFloat64()))
			c.Mass = append(c.Mass, math.Exp(5*rng.NormFloat64()))
		}
		l := filter.Lattice{SpacingM: 5}
		want := usual.of(&c, space, 0, l)
		packed := picture{gridCells: usual.gridCells, packed: true}.of(&c, space, 0, l)
		if got := unpack(packed, space.Frame()); !proto.Equal(got, want) {
			t.Fatalf("%d entries: packed\n%v\nplain\n%v", n, got, want)
		}
	}
	most := picture{gridCells: maxBeliefCells, roadCells: maxRoadCells, packed: true}
	blob := blob(1000)
	b := most.of(&blob, space, 0, filter.Lattice{SpacingM: 5})
	if g := b.GetGrid(); g.GetColumns() < 990 || g.GetRows() < 990 {
		t.Errorf("of 1000 × 1000 cells there are %d × %d", g.GetColumns(), g.GetRows())
	}
	t.Logf("1000 × 1000 cells of a plane: %d bytes", proto.Size(b))
	road := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 30000, Curvature: 1e-4}}}}, [][]filtertest.Link{nil})
	var r filter.Cloud
	for i := range 30000 {
		r.Chart, r.AlongM, r.Mass = append(r.Chart, 0), append(r.AlongM, float64(i)+0.5), append(r.Mass, rng.Float64()/30000)
	}
	b = most.of(&r, road, 0, filter.Lattice{})
	want := picture{roadCells: maxRoadCells}.of(&r, road, 0, filter.Lattice{})
	told := 0
	for i, s := range unpack(b, road.Frame()).GetStretches() {
		for j, at := range s.GetMiddles() {
			p, err := wire.Position(at)
			q, err2 := wire.Position(want.GetStretches()[i].GetMiddles()[j])
			if x, y := road.Frame().Forward(p), road.Frame().Forward(q); err != nil || err2 != nil || math.Hypot(x.E-y.E, x.N-y.N) > 0.008 {
				t.Fatalf("cell %d is at %v, want %v", j, x, y)
			}
			told++
		}
	}
	if told != 30000 {
		t.Errorf("%d cells of 30000", told)
	}
	t.Logf("30000 cells of roads: %d bytes, %d plain", proto.Size(b), proto.Size(want))
}

// blob is a belief that fills n by n cells of 5 m, thinly at its edges.
func blob(n int) (c filter.Cloud) {
	for row := range n {
		for col := range n {
			d := math.Hypot(float64(row-n/2), float64(col-n/2)) / float64(n) * 10
			c.East, c.North = append(c.East, 5*float64(col)), append(c.North, 5*float64(row))
			c.Mass = append(c.Mass, math.Exp(-d*d/2))
		}
	}
	return c
}

// TestMassByte proves the scale of the bytes at its ends.
func TestMassByte(t *testing.T) {
	for _, c := range []struct {
		mass float64
		want byte
	}{{1, 255}, {0.99, 255}, {math.Exp(-1.0 / 16), 254}, {math.Exp(-254.0 / 16), 1}, {math.Exp(-254.4 / 16), 1}, {math.Exp(-254.6 / 16), 0}, {0, 0}, {math.NaN(), 0}} {
		if got := massByte(c.mass, 1); got != c.want {
			t.Errorf("byte of %v is %d, want %d", c.mass, got, c.want)
		}
	}
}

// BenchmarkBelief is what a picture costs the vehicle.
func BenchmarkBelief(b *testing.B) {
	space := plane.Open(middle, 100e3, 20)
	l := filter.Lattice{SpacingM: 5}
	c := blob(400)
	b.Run("plane/cells=160k", func(b *testing.B) {
		for b.Loop() {
			usual.of(&c, space, 0, l)
		}
	})
	million := blob(1000)
	b.Run("plane/cells=1M", func(b *testing.B) {
		for b.Loop() {
			picture{gridCells: maxBeliefCells, packed: true}.of(&million, space, 0, l)
		}
	})
	road := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 60000}}}}, [][]filtertest.Link{nil})
	var r filter.Cloud
	for i := range 60000 {
		r.Chart, r.AlongM, r.Mass = append(r.Chart, 0), append(r.AlongM, float64(i)+0.5), append(r.Mass, 1.0/60000)
	}
	b.Run("roads/cells=60k", func(b *testing.B) {
		for b.Loop() {
			usual.of(&r, road, 0, filter.Lattice{})
		}
	})
}
