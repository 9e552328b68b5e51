package filter_test

import (
	"math"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
)

// cliffs is ground whose height is a function of the easting alone: steep in the
// west, where slopes reach 0.5, and nearly flat in the east.
type cliffs struct{}

func (cliffs) Frame() geo.Frame { return geo.NewFrame(geo.LonLat{}) }

func (cliffs) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -1e4, N: -1e4}, Max: geo.Point{E: 1e4, N: 1e4}}
}

func (cliffs) at(e float64) (height, slope float64) {
	a, l := 12.0, 400.0
	if e < 0 {
		a, l = 20.0, 60.0
	}
	x := e / l
	// Of no period, so that few places are alike.
	return a * (math.Sin(x) + 0.4*math.Sin(math.Sqrt2*x)), a / l * (math.Cos(x) + 0.4*math.Sqrt2*math.Cos(math.Sqrt2*x))
}

func (c cliffs) Sample(dst geo.Heights, east, _ []float64) {
	for i, e := range east {
		h, s := c.at(e)
		dst.HeightM[i] = h
		if dst.SlopeE != nil {
			dst.SlopeE[i], dst.SlopeN[i] = s, 0
		}
		if dst.VarianceM2 != nil {
			dst.VarianceM2[i] = 0
		}
	}
}

// ground measures the height under the vehicle.
type ground struct{ zM, sigmaM float64 }

func (ground) Wants() filter.Wants   { return filter.WantPosition | filter.WantHeight }
func (ground) Rows() int             { return 1 }
func (g ground) Noise() filter.Noise { return filter.Gaussian(g.sigmaM) }

func (g ground) Linearize(t *filter.Terms, at *filter.Columns, _ []filter.Quantity, _ []float64) {
	for i, h := range at.Height {
		t.Residual[i] = g.zM - h
		t.Row[2*i], t.Row[2*i+1] = at.SlopeE[i], at.SlopeN[i]
	}
}

// TestFarModes starts with 600 m of uncertainty over steep and flat ground at
// once, of which most of the belief sees the flat part alone, and moves over the
// steep one. The evidence of every height and the part of the belief in the west
// are those of the exact recursion over the easting, summed at points 0.5 m
// apart (the prior, the walk and the ground are the same along the northing):
// the sum over all pairs, up to seven sigma.
func TestFarModes(t *testing.T) {
	const (
		start, walk, sigma, step = 600.0, 15.0, 3.0, 15.0
		fine                     = 0.5
		budget                   = 1_000_000
	)
	p := plane.Over(cliffs{}, "cliffs", 90)
	b, err := filter.Seed(p, filter.AtPoint{SigmaM: start}, nil, budget)
	if err != nil {
		t.Fatal(err)
	}
	var w filter.Workspace
	n := int(6.5 * start / fine)
	exact := make([]float64, 2*n+1)
	for i := range exact {
		x := float64(i-n) * fine / start
		exact[i] = math.Exp(-0.5 * x * x)
	}
	origin, truth := 0.0, -740.0
	for k := range 6 {
		if k > 0 {
			move := filter.NewStep(2)
			move.Add[0], move.Q[0], move.Q[2] = step, walk, walk
			filter.Predict(b, p, move, &w)
			exact = walked(exact, math.Sqrt(walk)/fine)
			origin += step
			truth += step + 2*math.Sin(float64(k))
		}
		z, _ := cliffs{}.at(truth)
		z += 2 * math.Cos(5*float64(k))
		e, err := filter.UpdateWithin(b, p, ground{z, sigma}, budget, &w)
		if err != nil {
			t.Fatal(err)
		}
		filter.Adapt(b, budget, &w)

		var before, sum, west float64
		for i, m := range exact {
			at := origin + float64(i-len(exact)/2)*fine
			h, _ := cliffs{}.at(at)
			r := (z - h) / sigma
			exact[i] = m * math.Exp(-0.5*r*r) / (sigma * math.Sqrt(2*math.Pi))
			before, sum = before+m, sum+exact[i]
			west += exact[i] * inWest(at)
		}
		for i := range exact {
			exact[i] /= sum
		}
		var c filter.Cloud
		b.Read(&c, p, &w)
		got := 0.0
		for i, m := range c.Mass {
			got += m * inWest(c.East[i])
		}
		want, wantE := west/sum, math.Log(sum/before)
		t.Logf("%d: spacing %.1f m, %d cells; evidence %.4f, exact %.4f; in the west %.4f, exact %.4f", k, b.Lattice.SpacingM, b.Cells(), e, wantE, got, want)
		if math.Abs(e-wantE) > 0.001 || math.Abs(got-want) > 0.0005 {
			t.Errorf("step %d: evidence %.4f, want %.4f; in the west %.4f, want %.4f", k, e, wantE, got, want)
		}
	}
}

// inWest is 1 far in the west and 0 far in the east, without a jump that cells
// could fall to either side of.
func inWest(e float64) float64 { return 0.5 * (1 - math.Tanh(e/50)) }

// walked is masses after a normal walk, sigma in points.
func walked(masses []float64, sigma float64) []float64 {
	out, reach := make([]float64, len(masses)), int(7*sigma)
	for d := -reach; d <= reach; d++ {
		x := float64(d) / sigma
		weight := math.Exp(-0.5*x*x) / (sigma * math.Sqrt(2*math.Pi))
		for i, m := range masses {
			if j := i + d; j >= 0 && j < len(out) {
				out[j] += weight * m
			}
		}
	}
	return out
}
