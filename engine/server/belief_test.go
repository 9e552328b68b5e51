package server

import (
	"math"
	"math/rand/v2"
	"testing"

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
		m := beliefMessage(&c, space, level, l)
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
		m := beliefMessage(&c, space, 0, l)
		g := m.GetGrid()
		if n := g.GetColumns() * g.GetRows(); n > maxGridCells || n < maxGridCells/8 || g.GetCellM() != 40 {
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
		m := beliefMessage(&c, road, 0, filter.Lattice{})
		cells := decode(t, m)
		width := m.GetStretches()[0].GetCellM()
		if n < 100000 && width > 1 || n == 100000 && (width < 4 || len(cells) > maxStretchCells) {
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
	var c filter.Cloud
	for row := range 400 {
		for col := range 400 {
			d := math.Hypot(float64(row-200), float64(col-200)) / 40
			c.East, c.North = append(c.East, 5*float64(col)), append(c.North, 5*float64(row))
			c.Mass = append(c.Mass, math.Exp(-d*d/2)/(2*math.Pi*1600))
		}
	}
	b.Run("plane/cells=160k", func(b *testing.B) {
		for b.Loop() {
			beliefMessage(&c, space, 0, l)
		}
	})
	road := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 60000}}}}, [][]filtertest.Link{nil})
	var r filter.Cloud
	for i := range 60000 {
		r.Chart, r.AlongM, r.Mass = append(r.Chart, 0), append(r.AlongM, float64(i)+0.5), append(r.Mass, 1.0/60000)
	}
	b.Run("roads/cells=60k", func(b *testing.B) {
		for b.Loop() {
			beliefMessage(&r, road, 0, filter.Lattice{})
		}
	})
}
