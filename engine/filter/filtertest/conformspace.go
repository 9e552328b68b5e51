package filtertest

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
)

// Space runs the conformance tests that every LineSpace and PlaneSpace passes:
// identity, topology at every level, and columns that are finite where they
// must be, agree with one another to first order, do not depend on the
// company they are sampled in, and are written to the caller's slices alone.
func Space(t *testing.T, space filter.Space) {
	t.Helper()
	if first := space.Fingerprint(); first == "" || space.Fingerprint() != first {
		t.Error("the fingerprint is empty or changes")
	}
	if space.Frame().IsZero() {
		t.Error("the frame is the zero frame")
	}
	switch s := space.(type) {
	case filter.LineSpace:
		t.Run("topology", func(t *testing.T) { topology(t, s) })
		t.Run("columns", func(t *testing.T) { lineColumns(t, s) })
	case filter.PlaneSpace:
		t.Run("columns", func(t *testing.T) { planeColumns(t, s) })
	default:
		t.Fatalf("%T is neither a LineSpace nor a PlaneSpace", space)
	}
}

func topology(t *testing.T, s filter.LineSpace) {
	if s.Levels() < 1 {
		t.Fatalf("%d levels", s.Levels())
	}
	first := s.Lines(0)
	n := len(first.LengthM)
	widest := 0.0
	for _, w := range first.WidthM {
		widest = math.Max(widest, w)
	}
	for level := range s.Levels() {
		ln := s.Lines(level)
		if ln != s.Lines(level) {
			t.Errorf("level %d: another value each time", level)
		}
		if ln.Level != level || len(ln.LengthM) != n || len(ln.Cells) != n || len(ln.WidthM) != n {
			t.Fatalf("level %d calls itself %d and has %d lengths, %d counts, %d widths for %d charts", level, ln.Level, len(ln.LengthM), len(ln.Cells), len(ln.WidthM), n)
		}
		limit := widest * math.Ldexp(1, level) * (1 + 1e-9) // rounding of a division
		for c := range n {
			if !(ln.LengthM[c] > 0) || math.IsInf(ln.LengthM[c], 0) || ln.LengthM[c] != first.LengthM[c] {
				t.Errorf("level %d, chart %d: length %v, at level 0 %v", level, c, ln.LengthM[c], first.LengthM[c])
			}
			if ln.Cells[c] < 1 || math.Abs(ln.WidthM[c]*float64(ln.Cells[c])/ln.LengthM[c]-1) > 1e-12 || ln.WidthM[c] > limit {
				t.Errorf("level %d, chart %d: %d cells of %v m over %v m, wider than %v or not all of it", level, c, ln.Cells[c], ln.WidthM[c], ln.LengthM[c], limit)
			}
			if level > 0 && ln.Cells[c] > s.Lines(level - 1).Cells[c] {
				t.Errorf("level %d, chart %d: more cells than a level below", level, c)
			}
		}
		links(t, level, "forward", &ln.Forward, n)
		links(t, level, "backward", &ln.Backward, n)
		back := map[[2]int32]bool{}
		for c := range int32(n) {
			to, _ := ln.Backward.Of(c)
			for _, x := range to {
				back[[2]int32{x, c}] = true
			}
		}
		pairs := 0
		for c := range int32(n) {
			to, _ := ln.Forward.Of(c)
			for _, x := range to {
				pairs++
				if !back[[2]int32{c, x}] {
					t.Errorf("level %d: chart %d leads to %d, but reversing from there does not lead back", level, c, x)
				}
			}
		}
		if pairs != len(back) {
			t.Errorf("level %d: %d links forward, %d back", level, pairs, len(back))
		}
	}
}

func links(t *testing.T, level int, which string, l *filter.Links, n int) {
	if len(l.Start) != n+1 || l.Start[0] != 0 || len(l.To) != len(l.Weight) || int(l.Start[n]) != len(l.To) {
		t.Fatalf("level %d: %s links of %d charts: %d starts, %d targets, %d weights", level, which, n, len(l.Start), len(l.To), len(l.Weight))
	}
	for c := range int32(n) {
		if l.Start[c+1] < l.Start[c] {
			t.Fatalf("level %d: %s links of chart %d end before they start", level, which, c)
		}
		to, weight := l.Of(c)
		sum := 0.0
		seen := map[int32]bool{}
		for i, x := range to {
			if x < 0 || int(x) >= n || seen[x] || !(weight[i] > 0) {
				t.Errorf("level %d: chart %d leads %s to %d with weight %v (of %d charts; each once)", level, c, which, x, weight[i], n)
			}
			seen[x] = true
			sum += weight[i]
		}
		// A few roundings of a division.
		if len(to) > 0 && math.Abs(sum-1) > 1e-12 {
			t.Errorf("level %d: the %s weights of chart %d sum to %v", level, which, c, sum)
		}
	}
}

const allWants = filter.WantPosition | filter.WantHeading | filter.WantHeight

// conformSeed seeds the positions that are sampled.
const conformSeed = 1

func lineColumns(t *testing.T, s filter.LineSpace) {
	rng := rand.New(rand.NewPCG(conformSeed, 0))
	ln := s.Lines(0)
	var chart []int32
	var along []float64
	// Pairs of neighbours, 1 cm apart, inside, at the ends and beyond.
	const step = 0.01
	for range 500 {
		c := int32(rng.IntN(len(ln.LengthM)))
		length := ln.LengthM[c]
		at := rng.Float64() * length
		switch rng.IntN(10) {
		case 0:
			at = 0
		case 1:
			at = length
		case 2:
			at = length + 7
		case 3:
			at = -7
		}
		chart, along = append(chart, c, c), append(along, at, at+step)
	}
	var a filter.Columns
	sample := func(dst *filter.Columns, wants filter.Wants, chart []int32, along []float64) {
		dst.Resize(wants, 1, len(chart))
		poison(dst)
		s.Sample(dst, chart, along, ln.WidthM[0])
	}
	sample(&a, allWants, chart, along)
	columnsAreSane(t, &a)
	cosines, inside := 0.0, 0.0
	for i := 0; i < len(chart); i += 2 {
		what := func(format string, args ...any) {
			t.Helper()
			t.Errorf("seed %d, chart %d at %v m: "+format, append([]any{conformSeed, chart[i], along[i]}, args...)...)
		}
		if n := math.Hypot(a.TangentE[i], a.TangentN[i]); math.Abs(n-1) > 1e-9 {
			what("tangent of length %v", n)
		}
		moved := math.Hypot(a.East[i+1]-a.East[i], a.North[i+1]-a.North[i])
		in := along[i] >= 0 && along[i+1] <= ln.LengthM[chart[i]]
		if !in {
			if along[i] < 0 || along[i] > ln.LengthM[chart[i]] {
				if moved != 0 {
					what("beyond the end, but %v m from its neighbour", moved)
				}
			}
			continue
		}
		// 1e-3 allows the frame's scale; a corner only shortens the way.
		if moved > step*(1+1e-3) {
			what("%v m apart after %v m", moved, step)
		}
		inside++
		cosines += math.Cos(a.Heading[i] - math.Atan2(a.TangentE[i], a.TangentN[i]))
		// Between two points a quantity changes by its derivative at one of
		// them or between: |Δ - step·mean| ≤ step·|difference|, plus what
		// storage in float32 may round.
		follows := func(name string, q0, q1, d0, d1, rounding float64) {
			if math.Abs(q1-q0-step*(d0+d1)/2) > step*math.Abs(d1-d0)+rounding {
				what("%s goes from %v to %v with derivatives %v and %v", name, q0, q1, d0, d1)
			}
		}
		follows("heading", a.Heading[i], a.Heading[i+1], a.Curvature[i], a.Curvature[i+1], 1e-5)
		if h := a.Height[i] + a.Height[i+1]; !math.IsNaN(h) {
			g0 := a.SlopeE[i]*a.TangentE[i] + a.SlopeN[i]*a.TangentN[i]
			g1 := a.SlopeE[i+1]*a.TangentE[i+1] + a.SlopeN[i+1]*a.TangentN[i+1]
			follows("height", a.Height[i], a.Height[i+1], g0, g1, 1e-6*(1+math.Abs(h)))
			if across := a.SlopeE[i]*a.TangentN[i] - a.SlopeN[i]*a.TangentE[i]; math.Abs(across) > 1e-9*(1+math.Abs(g0)) {
				what("a slope of %v across the line: it should be the grade times the tangent", across)
			}
		}
	}
	// Smoothing may turn the heading away from the tangent near a corner, but
	// not on the whole: half a radian everywhere would be 0.88.
	if inside > 20 && cosines/inside < 0.9 {
		t.Errorf("the mean cosine between heading and tangent is %v", cosines/inside)
	}
	repeatable(t, &a, len(chart), func(dst *filter.Columns, wants filter.Wants, pick []int) {
		c, al := make([]int32, len(pick)), make([]float64, len(pick))
		for j, i := range pick {
			c[j], al[j] = chart[i], along[i]
		}
		sample(dst, wants, c, al)
		for j := range pick { // what was kept of the caller's would now change
			c[j], al[j] = 0, math.NaN()
		}
	})
}

func planeColumns(t *testing.T, s filter.PlaneSpace) {
	rng := rand.New(rand.NewPCG(conformSeed, 1))
	b := s.Bounds()
	if !(b.Max.E > b.Min.E && b.Max.N > b.Min.N) || !(s.DetailM() > 0) {
		t.Fatalf("bounds %v, detail %v m", b, s.DetailM())
	}
	finite := func(lo, hi float64) (float64, float64) { return math.Max(lo, -1e5), math.Min(hi, 1e5) }
	e0, e1 := finite(b.Min.E, b.Max.E)
	n0, n1 := finite(b.Min.N, b.Max.N)
	step := 1e-3 * s.DetailM()
	var east, north []float64
	for range 500 {
		// A tenth to each side lies outside.
		e, n := e0+(e1-e0)*(1.2*rng.Float64()-0.1), n0+(n1-n0)*(1.2*rng.Float64()-0.1)
		east, north = append(east, e, e+step, e), append(north, n, n, n+step)
	}
	sample := func(dst *filter.Columns, wants filter.Wants, pick []int) {
		dst.Resize(wants, 2, len(pick))
		poison(dst)
		for j, i := range pick {
			dst.East[j], dst.North[j] = east[i], north[i]
		}
		s.Sample(dst)
		for j, i := range pick {
			if dst.East[j] != east[i] || dst.North[j] != north[i] {
				t.Fatalf("Sample changed the position %v, %v", east[i], north[i])
			}
		}
	}
	all := make([]int, len(east))
	for i := range all {
		all[i] = i
	}
	var a filter.Columns
	sample(&a, allWants, all)
	columnsAreSane(t, &a)
	for i := 0; i < len(east); i += 3 {
		for axis, g := range [][]float64{a.SlopeE, a.SlopeN} {
			j := i + 1 + axis
			h0, h1 := a.Height[i], a.Height[j]
			if math.IsNaN(h0 + h1) {
				continue
			}
			// As along a line: a bilinear height is linear along an axis but
			// for the edges of its own cells.
			if math.Abs(h1-h0-step*(g[i]+g[j])/2) > step*math.Abs(g[j]-g[i])+1e-9*(1+math.Abs(h0)) {
				t.Errorf("seed %d, at %v, %v: height %v, %v m on %v, gradients %v and %v", conformSeed, east[i], north[i], h0, step, h1, g[i], g[j])
			}
		}
	}
	repeatable(t, &a, len(all), sample)
}
