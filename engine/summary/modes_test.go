package summary

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// street returns both directions of a straight road.
func street(from, to geo.Point, name string) roads {
	return roads{{from, to, name, 1}, {to, from, name, 0}}
}

// TestTwoDirectionsAreOneMode proves that a belief split over the two
// directions of a road is one place, located, with both edges listed.
func TestTwoDirectionsAreOneMode(t *testing.T) {
	r := street(geo.Point{E: 300, N: 100}, geo.Point{E: 900, N: 450}, "Quay Lane")
	length := r[0].to.Sub(r[0].from).Norm()
	_, p := summarize(t, Options{}, roadInput(r, 1, []part{{0, 0.6, 200, 3}, {1, 0.4, length - 200, 3}}))
	if p.ModeCount != 1 || p.Status != Located || math.Abs(p.Modes[0].Mass-1) > 1e-12 {
		t.Fatalf("%d modes, %v, the first holds %v; want one that is located", p.ModeCount, p.Status, p.Modes[0].Mass)
	}
	if len(p.Edges) != 2 || p.Edges[0].Chart != 0 || p.Edges[0].Twin != 1 || p.Edges[0].Name != "Quay Lane" ||
		math.Abs(p.Edges[0].Probability-0.6) > 1e-9 || math.Abs(p.Edges[1].Probability-0.4) > 1e-9 {
		t.Errorf("edges %+v", p.Edges)
	}
	if m := p.Modes[0]; m.ChartCount != 2 || m.Charts[0] != p.Edges[0] || m.Charts[1] != p.Edges[1] {
		t.Errorf("the mode's edges: %+v", m.Charts[:m.ChartCount])
	}
	// Opposite headings at 0.6 and 0.4: R = 0.2·e^(-1e-4/2).
	if want := math.Sqrt(-2 * math.Log(0.2*math.Exp(-0.5e-4))); math.Abs(p.Heading.SigmaRad-math.Min(want, noHeading)) > 1e-6 {
		t.Errorf("heading sigma %v, want %v", p.Heading.SigmaRad, want)
	}
}

// TestModesApart puts two equal peaks of 2 m at growing distances: one mode
// while they are closer than half an alert limit, two from a whole one on, in
// every direction and at every place of the grid.
func TestModesApart(t *testing.T) {
	for i := range 40 {
		at := geo.Point{E: 1.37 * float64(i), N: 2.11 * float64(i)}
		d := geo.Direction(0.157 * float64(i))
		for _, c := range []struct {
			apartM float64
			modes  int
			status Status
		}{{6, 1, Located}, {12, 1, Located}, {26, 2, Ambiguous}, {100, 2, Ambiguous}} {
			_, p := summarize(t, Options{}, planeInput([]gauss{
				{0.5, at.E, at.N, Cov{4, 0, 4}}, {0.5, at.E + c.apartM*d.E, at.N + c.apartM*d.N, Cov{4, 0, 4}},
			}))
			if p.ModeCount != c.modes || p.Status != c.status {
				t.Errorf("place %d, %v m apart: %d modes, %v; want %d, %v", i, c.apartM, p.ModeCount, p.Status, c.modes, c.status)
			}
			if c.apartM == 100 {
				// Which of the equals is first does not matter.
				m := p.Modes[0]
				if math.Abs(m.Mass-0.5) > 1e-9 || math.Abs(m.Cov.EE-4) > 1e-3 || math.Abs(m.Cov.NN-4) > 1e-3 {
					t.Errorf("place %d: mode %+v", i, m)
				}
			}
		}
	}
}

// TestLongRoadIsOneMode proves that an even belief along a bent road is one
// mode, that a trickle of mass between two peaks does not join them, and that
// more than MaxModes are counted and summed.
func TestLongRoadIsOneMode(t *testing.T) {
	r := street(geo.Point{E: 10, N: 20}, geo.Point{E: 810, N: 537}, "")
	_, p := summarize(t, Options{}, roadInput(r, 1, []part{{0, 1, 400, 1e5}}))
	if p.ModeCount != 1 || p.Status != Unsure {
		t.Errorf("an even road: %d modes, %v; want 1, unsure", p.ModeCount, p.Status)
	}
	_, p = summarize(t, Options{}, roadInput(r, 1, []part{{0, 0.02, 400, 1e5}, {0, 0.5, 200, 5}, {0, 0.48, 400, 5}}))
	if p.ModeCount != 2 || p.Status != Ambiguous {
		t.Errorf("two peaks over a trickle: %d modes, %v; want 2, ambiguous", p.ModeCount, p.Status)
	}
	var gs []gauss
	for i := range 30 {
		gs = append(gs, gauss{1.0 / 30, 100 * float64(i), 0, Cov{4, 0, 4}})
	}
	_, p = summarize(t, Options{MaxModes: 5}, planeInput(gs))
	if p.ModeCount != 30 || len(p.Modes) != 5 || math.Abs(p.ModeRest-25.0/30) > 1e-12 || p.Status != Unsure {
		t.Errorf("30 peaks: %d modes, %d listed, rest %v, %v", p.ModeCount, len(p.Modes), p.ModeRest, p.Status)
	}
}

// TestCellWidth proves invariant 2 for everything in a posterior: one belief on
// cells of 0.5, 1 and 2 m gives the same figures. Moments agree to rounding
// (the cells' pieces keep them), radii to twice the search's step and 0.2 % where
// the cells are much narrower than the belief, to 1 % where pieces of a Gaussian
// of 1 m in cells of 2 m are taken for Gaussians; entropy to the 0.15 nat stated.
func TestCellWidth(t *testing.T) {
	r := append(street(geo.Point{E: -300, N: 100}, geo.Point{E: 900, N: 450}, "x"),
		road{geo.Point{E: 900, N: 450}, geo.Point{E: 400, N: 900}, "y", -1})
	for name, parts := range map[string][]part{
		"narrow": {{0, 1, 200, 1}},
		"two":    {{0, 0.7, 200, 4}, {2, 0.3, 300, 8}},
		"wide":   {{0, 0.5, 500, 90}, {1, 0.3, 400, 50}, {2, 0.2, 100, 30}},
	} {
		_, want := summarize(t, Options{}, roadInput(r, 0.5, parts))
		for _, width := range []float64{1, 2} {
			_, p := summarize(t, Options{}, roadInput(r, width, parts))
			near := func(what string, got, want, tol float64) {
				t.Helper()
				if math.Abs(got-want) > tol {
					t.Errorf("%s, cells of %v m: %s %v, want %v", name, width, what, got, want)
				}
			}
			sigma, _ := want.CovFrame.Axes()
			radii := 2*radiusStep + 0.002
			if name == "narrow" {
				radii = 0.01
			}
			near("mean east", p.MeanFrame.E, want.MeanFrame.E, 1e-6*sigma)
			near("mean north", p.MeanFrame.N, want.MeanFrame.N, 1e-6*sigma)
			near("variance", p.CovFrame.EE/want.CovFrame.EE, 1, 1e-6)
			near("R50", p.Radius50M/want.Radius50M, 1, radii)
			near("R95", p.Radius95M/want.Radius95M, 1, radii)
			near("protection", p.Protection.RadiusM/want.Protection.RadiusM, 1, radii)
			near("entropy", p.EntropyNats, want.EntropyNats, 0.15)
			near("modes", float64(p.ModeCount), float64(want.ModeCount), 0)
			near("status", float64(p.Status), float64(want.Status), 0)
			for i := range p.Modes {
				near("mode", p.Modes[i].Mass, want.Modes[i].Mass, 0.01)
			}
		}
	}
}

// TestEntropy holds the entropy to closed forms: a Gaussian's is
// ½ ln((2πe)^d·det), an even one's ln of its length.
func TestEntropy(t *testing.T) {
	r := roads{{geo.Point{}, geo.Point{E: 1000}, "", -1}}
	for _, c := range []struct {
		name      string
		in        *Input
		want, tol float64
	}{
		// The cells' histogram adds at most w²/24σ² to a Gaussian's entropy.
		{"gaussian on a road", roadInput(r, 1, []part{{0, 1, 500, 20}}), 0.5*math.Log(2*math.Pi*math.E) + math.Log(20), 2e-4},
		{"even road", roadInput(r, 1, []part{{0, 1, 500, 1e7}}), math.Log(1000), 1e-6},
		{"narrow in a cell", roadInput(r, 1, []part{{0, 1, 500.5, 0.05}}), 0.5*math.Log(2*math.Pi*math.E) + math.Log(0.05), 1e-6},
		{"lattice", latticeInput(200, 1, 15, geo.Point{}), math.Log(2*math.Pi*math.E) + 2*math.Log(15), 4e-4},
	} {
		if _, p := summarize(t, Options{}, c.in); math.Abs(p.EntropyNats-c.want) > c.tol {
			t.Errorf("%s: %v, want %v", c.name, p.EntropyNats, c.want)
		}
	}
}

// TestMoments proves mean and covariance against sums written out, and that a
// true covariance turns with the meridian.
func TestMoments(t *testing.T) {
	gs := []gauss{{0.25, 60000, 10, Cov{9, 2, 4}}, {0.75, 60020, -30, Cov{1, -0.5, 2}}}
	_, p := summarize(t, Options{}, planeInput(gs))
	// Mean (60015, -20); deviations (-15, 30) and (5, -10).
	want := Cov{0.25*(9+225) + 0.75*(1+25), 0.25*(2-450) + 0.75*(-0.5-50), 0.25*(4+900) + 0.75*(2+100)}
	if p.MeanFrame != (geo.Point{E: 60015, N: -20}) || math.Abs(p.CovFrame.EE-want.EE)+math.Abs(p.CovFrame.EN-want.EN)+math.Abs(p.CovFrame.NN-want.NN) > 1e-9 {
		t.Errorf("mean %v, covariance %v; want 60015, -20, %v", p.MeanFrame, p.CovFrame, want)
	}
	if q := testFrame.Forward(p.Mean); q.Sub(p.MeanFrame).Norm() > 1e-6 {
		t.Errorf("the position is %v away from the mean", q.Sub(p.MeanFrame))
	}
	// A true displacement v has the frame image FromTrue(v): its variance
	// along a frame direction w is vᵀ Cov v for w = FromTrue(v)/k², the
	// similarity's transpose. Rotation within a square: 3e-5 rad.
	c, sn, k := testFrame.Rotation(p.MeanFrame)
	back := Cov{
		EE: k * k * (c*c*p.Cov.EE - 2*c*sn*p.Cov.EN + sn*sn*p.Cov.NN),
		EN: k * k * (c*sn*p.Cov.EE + (c*c-sn*sn)*p.Cov.EN - c*sn*p.Cov.NN),
		NN: k * k * (sn*sn*p.Cov.EE + 2*c*sn*p.Cov.EN + c*c*p.Cov.NN),
	}
	if math.Abs(back.EE-want.EE)+math.Abs(back.EN-want.EN)+math.Abs(back.NN-want.NN) > 2*3e-5*(want.EE+want.NN) {
		t.Errorf("turned back: %v, want %v", back, want)
	}
	if math.Abs(sn) < 5e-3 {
		t.Errorf("the frame is not turned here (%v): the check above is empty", sn)
	}
}

// TestRoadFigures proves the lateral spread, the nuisances, the most probable
// cell and the heading on a road.
func TestRoadFigures(t *testing.T) {
	r := street(geo.Point{E: 100, N: 100}, geo.Point{E: 700, N: 900}, "Mill Road") // direction (0.6, 0.8)
	in := roadInput(r, 1, []part{{0, 1, 400.5, 3}})
	in.Speed = Speed{Known: true, MPS: 8, SigmaMPS: 0.2}
	_, p := summarize(t, Options{LateralSigmaM: 2}, in)
	want := Cov{9*0.36 + 4*0.64, (9 - 4) * 0.48, 9*0.64 + 4*0.36}
	// Mass below 1e-13 a cell is left out: 1e-9 of the variance.
	if math.Abs(p.CovFrame.EE-want.EE)+math.Abs(p.CovFrame.EN-want.EN)+math.Abs(p.CovFrame.NN-want.NN) > 1e-7 {
		t.Errorf("covariance %v, want %v", p.CovFrame, want)
	}
	if len(p.Nuisances) != 1 || p.Nuisances[0].Name != filter.OdometerScale ||
		math.Abs(p.Nuisances[0].Mean-0.01) > 1e-12 || math.Abs(p.Nuisances[0].Sigma-0.002) > 1e-12 {
		t.Errorf("nuisances %+v, want the odometer's scale 0.01 ± 0.002", p.Nuisances)
	}
	cell := p.MostProbable
	if cell.Index != [2]int32{0, 400} || math.Abs(cell.AlongM-400.5) > 1e-9 || cell.Name != "Mill Road" ||
		cell.Place.Sub(geo.Point{E: 340.3, N: 420.4}).Norm() > 1e-9 {
		t.Errorf("most probable cell %+v", cell)
	}
	g, _ := testFrame.Convergence(p.MeanFrame)
	if h := math.Atan2(0.6, 0.8) + g; !p.Heading.Known || math.Abs(p.Heading.TrueRad-h) > 3e-5 || math.Abs(p.Heading.SigmaRad-0.01) > 1e-9 {
		t.Errorf("heading %+v, want %v ± 0.01", p.Heading, h)
	}
	if p.Speed != in.Speed {
		t.Errorf("speed %+v", p.Speed)
	}
}

// TestEdgeBound proves that edges beyond the bound are counted and summed.
func TestEdgeBound(t *testing.T) {
	var r roads
	var parts []part
	for i := range 20 {
		r = append(r, road{geo.Point{N: 10 * float64(i)}, geo.Point{E: 100, N: 10 * float64(i)}, "", -1})
		parts = append(parts, part{int32(i), float64(1+(i*7)%20) / 210, 50, 3})
	}
	_, p := summarize(t, Options{MaxEdges: 3}, roadInput(r, 1, parts))
	if p.EdgeCount != 20 || len(p.Edges) != 3 {
		t.Fatalf("%d edges, %d listed", p.EdgeCount, len(p.Edges))
	}
	sum := p.EdgeRest
	for i, e := range p.Edges {
		sum += e.Probability
		if math.Abs(e.Probability-float64(20-i)/210) > 1e-9 {
			t.Errorf("edge %d: %+v", i, e)
		}
	}
	if math.Abs(sum-1) > 1e-12 {
		t.Errorf("edges sum to %v", sum)
	}
}

// TestFineLattice proves that a lattice whose cloud gives its cells no variance
// of their own (its masses have the belief's) is summarized like any other: the
// covariance is that of the masses, radii are not cut off between cells, a
// spacing beyond the alert limit does not make every cell a mode.
func TestFineLattice(t *testing.T) {
	for _, sigma := range []float64{5, 100} {
		h := 0.4 * sigma
		in := latticeInput(45, h, sigma, geo.Point{E: 300, N: -800})
		clear(in.Cloud.VarEE)
		clear(in.Cloud.VarNN)
		s, p := summarize(t, Options{}, in)
		if p.ModeCount != 1 {
			t.Errorf("sigma %v: %d modes", sigma, p.ModeCount)
		}
		// A Gaussian sampled at 0.4 sigma has its moments to 2·exp(-2π²/0.4²).
		for _, v := range []float64{p.CovFrame.EE, p.CovFrame.NN, p.Modes[0].Cov.EE, p.Modes[0].Cov.NN} {
			if math.Abs(v/(sigma*sigma)-1) > 1e-3 { // the scale, 2·2e-4 at most
				t.Errorf("sigma %v: variance %v", sigma, v)
			}
		}
		if want := math.Log(2*math.Pi*math.E) + 2*math.Log(sigma); math.Abs(p.EntropyNats-want) > 1e-6 {
			t.Errorf("sigma %v: entropy %v, want %v", sigma, p.EntropyNats, want)
		}
		// The squares add h²/12 = 0.0133 sigma² to the variance: 0.7 % of
		// radius; the search and the excesses add 0.4 %, the cells' ripple the rest.
		for _, r := range []struct{ got, want float64 }{
			{p.Radius50M, 1.17741}, {p.Radius95M, 2.44775}, {p.Radius99M, 3.03485}, {p.Protection.RadiusM, 5.678},
		} {
			if q := r.got / (r.want * sigma); q < 0.997 || q > 1.02 {
				t.Errorf("sigma %v: radius %v, want %v", sigma, r.got, r.want*sigma)
			}
		}
		if reg, err := s.Region(0.95); err != nil || len(reg.Polygons) != 1 || reg.AreaM2 > 1.15*math.Pi*5.991*sigma*sigma {
			t.Errorf("sigma %v: region %+v, %v", sigma, reg, err)
		}
	}
}
