package filtertest

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// At says where and over what Likelihood reads a likelihood.
type At struct {
	// Chart and AlongM on lines, East and North on a plane.
	Chart       []int32
	AlongM      []float64
	East, North []float64
	// Quantities of the belief, positions first; nil for a plane without.
	Quantities []filter.Quantity
	// Mean holds the nuisances at each position (the quantities after the
	// positions); nil takes the priors' means.
	Mean []float64
	// WidthM is the resolution on lines, 1 if zero.
	WidthM float64
	// Value, if set, makes the same likelihood for another measured value.
	// Its density must then integrate to 1 over [Low, High], an interval
	// that leaves out less than 1e-6 of it, in Points points (10000 if zero).
	Value     func(z float64) any
	Low, High float64
	Points    int
	// Angle says that residuals are angles.
	Angle bool
}

// Likelihood runs the conformance tests that every Likelihood and
// LinearLikelihood passes: it reads what it names, adds to what is there,
// never gives NaN or +Inf, gives the same bits again, changes no input; its
// rows are the derivatives of its residual; its constant is included.
func Likelihood(t *testing.T, l any, space filter.Space, at At) {
	t.Helper()
	switch l := l.(type) {
	case filter.LinearLikelihood:
		t.Run("linear", func(t *testing.T) { at.linear(t, l, space) })
	case filter.Likelihood:
		t.Run("plain", func(t *testing.T) { at.plain(t, l, space) })
	default:
		t.Fatalf("%T is not a likelihood", l)
	}
	if at.Value != nil {
		t.Run("integral", func(t *testing.T) { at.integral(t, space) })
	}
}

func (at *At) len() int { return max(len(at.AlongM), len(at.East)) }

func (at *At) dim() int {
	if len(at.AlongM) > 0 {
		return 1
	}
	return 2
}

// sample reads the columns at the positions moved by d along position axis q.
func (at *At) sample(space filter.Space, wants filter.Wants, q int, d float64) *filter.Columns {
	var c filter.Columns
	n := at.len()
	c.Resize(wants, at.dim(), n)
	if at.dim() == 1 {
		along := append([]float64(nil), at.AlongM...)
		for i := range along {
			along[i] += d
		}
		width := at.WidthM
		if width == 0 {
			width = 1
		}
		space.(filter.LineSpace).Sample(&c, at.Chart, along, width)
		return &c
	}
	copy(c.East, at.East)
	copy(c.North, at.North)
	for i := range n {
		if q == 0 {
			c.East[i] += d
		} else {
			c.North[i] += d
		}
	}
	space.(filter.PlaneSpace).Sample(&c)
	return &c
}

func (at *At) plain(t *testing.T, l filter.Likelihood, space filter.Space) {
	c := at.sample(space, l.Wants()|filter.WantPosition, 0, 0)
	names, values := columns(c)
	var before [][]float64
	for _, s := range values {
		before = append(before, append([]float64(nil), s...))
	}
	n := at.len()
	zero, shifted, again := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range shifted {
		shifted[i] = float64(i) - 3
	}
	l.LogLikelihood(zero, c)
	l.LogLikelihood(shifted, c)
	l.LogLikelihood(again, c)
	for i, v := range zero {
		if math.IsNaN(v) || math.IsInf(v, 1) {
			t.Errorf("position %d: log likelihood %v", i, v)
		}
		if math.Float64bits(v) != math.Float64bits(again[i]) {
			t.Errorf("position %d: %v, then %v", i, v, again[i])
		}
		// Adding may group the terms differently.
		if want := v + float64(i) - 3; shifted[i] != want && !(math.Abs(shifted[i]-want) <= 1e-12*(10+float64(i)+math.Abs(v))) {
			t.Errorf("position %d: %v on top of %v gives %v: it must add to what is there", i, v, float64(i)-3, shifted[i])
		}
	}
	same(t, names, values, before)
	l.LogLikelihood(nil, at.none(space, l.Wants()))
}

// none are no positions at all.
func (at *At) none(space filter.Space, wants filter.Wants) *filter.Columns {
	var c filter.Columns
	c.Resize(wants|filter.WantPosition, at.dim(), 0)
	return &c
}

func same(t *testing.T, names []string, now, before [][]float64) {
	t.Helper()
	for j, s := range now {
		for i, v := range s {
			if math.Float64bits(v) != math.Float64bits(before[j][i]) {
				t.Fatalf("%s[%d] was changed from %v to %v", names[j], i, before[j][i], v)
			}
		}
	}
}

// k is the number of quantities of the rows.
func (at *At) k() int { return max(len(at.Quantities), at.dim()) }

// means returns the means as Linearize gets them, quantity q moved by d.
func (at *At) means(q int, d float64) []float64 {
	k, dim := len(at.Quantities), at.dim()
	if k == 0 {
		return nil
	}
	mean := make([]float64, at.len()*k)
	for i := range at.len() {
		for j := dim; j < k; j++ {
			mean[i*k+j] = at.Quantities[j].PriorMean
			if at.Mean != nil {
				mean[i*k+j] = at.Mean[i*(k-dim)+j-dim]
			}
			if j == q {
				mean[i*k+j] += d
			}
		}
	}
	return mean
}

// terms linearizes with quantity q moved by d.
func (at *At) terms(l filter.LinearLikelihood, space filter.Space, q int, d float64) *filter.Terms {
	moved := d
	if q >= at.dim() {
		moved = 0
	}
	c := at.sample(space, l.Wants()|filter.WantPosition, q, moved)
	n, m, k := at.len(), l.Rows(), at.k()
	t := new(filter.Terms)
	t.Reset(n, m, k)
	l.Linearize(t, c, at.Quantities, at.means(q, d))
	return t
}

func (at *At) linear(t *testing.T, l filter.LinearLikelihood, space filter.Space) {
	m, k := l.Rows(), at.k()
	if m < 1 || m > 2 {
		t.Fatalf("%d rows", m)
	}
	noiseIsSane(t, l.Noise(), m)
	a, b := at.terms(l, space, 0, 0), at.terms(l, space, 0, 0)
	for _, s := range [][2][]float64{{a.Residual, b.Residual}, {a.Row, b.Row}, {a.Extra, b.Extra}, {a.Wide, b.Wide}, {a.Flat, b.Flat}} {
		for i, v := range s[0] {
			if math.Float64bits(v) != math.Float64bits(s[1][i]) {
				t.Fatalf("term %d is %v, then %v", i, v, s[1][i])
			}
		}
	}
	for i := range at.len() {
		if flat := a.Flat[i]; !math.IsNaN(flat) {
			if math.IsInf(flat, 1) {
				t.Errorf("position %d: flat +Inf", i)
			}
			continue
		}
		if !geo.Finite(a.Residual[i*m:(i+1)*m]...) || !geo.Finite(a.Row[i*m*k:(i+1)*m*k]...) || !geo.Finite(a.Extra[i]) || a.Extra[i] < 0 {
			t.Errorf("position %d: residual %v, row %v, extra %v", i, a.Residual[i*m:(i+1)*m], a.Row[i*m*k:(i+1)*m*k], a.Extra[i])
		}
	}
	for q := range k {
		at.row(t, l, space, a, q)
	}
}

// row compares the derivatives by quantity q with differences of the residual.
func (at *At) row(t *testing.T, l filter.LinearLikelihood, space filter.Space, a *filter.Terms, q int) {
	m, k := l.Rows(), at.k()
	d := 1e-3 // metres, or as small a part of a nuisance
	if q >= at.dim() {
		d = 1e-4
	}
	up, down := at.terms(l, space, q, d), at.terms(l, space, q, -d)
	for i := range at.len() {
		if v := a.Flat[i] + up.Flat[i] + down.Flat[i]; v == v || !math.IsNaN(up.Flat[i]) || !math.IsNaN(down.Flat[i]) || !math.IsNaN(a.Flat[i]) {
			continue
		}
		for r := range m {
			x := i*m + r
			du, dd := up.Residual[x]-a.Residual[x], a.Residual[x]-down.Residual[x]
			if at.Angle {
				du, dd = geo.WrapPi(du), geo.WrapPi(dd)
			}
			got := a.Row[x*k+q]
			// A residual is z - g; where the two one-sided slopes differ (a
			// kink, a curve) the derivative lies between them. Rounding: a
			// few ulp of the residual and of what made it, over d.
			lo, hi := -math.Max(du, dd)/d, -math.Min(du, dd)/d
			slack := 1e-5*(1+math.Abs(got)) + 1e-12*(1+math.Abs(a.Residual[x]))/d
			if got < lo-slack || got > hi+slack {
				t.Errorf("position %d, component %d: derivative by quantity %d is %v, differences give %v to %v", i, r, q, got, lo, hi)
			}
		}
	}
}

func noiseIsSane(t *testing.T, n filter.Noise, m int) {
	t.Helper()
	sum := n.FlatWeight
	for _, p := range n.Parts {
		sum += p.Weight
		if !(p.Weight > 0) || !(p.Cov[0] > 0) || m == 2 && !(p.Cov[0]*p.Cov[2] > p.Cov[1]*p.Cov[1]) {
			t.Errorf("noise part with weight %v and covariance %v", p.Weight, p.Cov)
		}
	}
	if len(n.Parts) == 0 || math.Abs(sum-1) > 1e-12 || n.FlatWeight < 0 || n.FlatWeight > 0 && !(n.FlatDensity > 0) || !(n.Power >= 0 && n.Power <= 1) {
		t.Errorf("the weights of %d parts and an outlier sum to %v; flat density %v, power %v", len(n.Parts), sum, n.FlatDensity, n.Power)
	}
}

// integral integrates the density over the measured value, at a few positions.
func (at *At) integral(t *testing.T, space filter.Space) {
	points := at.Points
	if points == 0 {
		points = 10000
	}
	n := at.len()
	rng := rand.New(rand.NewPCG(conformSeed, 3))
	sums, logs := make([]float64, n), make([]float64, n)
	h := (at.High - at.Low) / float64(points)
	// One point in each step, at random within it around the middle: smooth
	// densities integrate as by the midpoint rule.
	offset := 0.5 + 0.01*(rng.Float64()-0.5)
	for p := range points {
		l := at.Value(at.Low + (float64(p)+offset)*h)
		clear(logs)
		switch l := l.(type) {
		case filter.LinearLikelihood:
			at.density(logs, l, space)
		case filter.Likelihood:
			l.LogLikelihood(logs, at.sample(space, l.Wants()|filter.WantPosition, 0, 0))
		}
		for i, v := range logs {
			sums[i] += h * math.Exp(v)
		}
	}
	for i, s := range sums {
		// What lies outside, and the rule's error at a hundred points a sigma.
		if math.Abs(s-1) > 1e-4 {
			t.Errorf("seed %d, position %d: the density integrates to %v over [%v, %v]", conformSeed, i, s, at.Low, at.High)
		}
	}
}

// density adds the log density of a linear likelihood at positions that are
// known exactly, from the definition of Noise.
func (at *At) density(dst []float64, l filter.LinearLikelihood, space filter.Space) {
	terms, noise, m := at.terms(l, space, 0, 0), l.Noise(), l.Rows()
	for i := range dst {
		if !math.IsNaN(terms.Flat[i]) {
			dst[i] += terms.Flat[i]
			continue
		}
		p := noise.FlatWeight * noise.FlatDensity
		for j, part := range noise.Parts {
			extra := terms.ExtraOf(i, j)
			a, b, c := part.Cov[0]+extra, part.Cov[1], part.Cov[2]+extra
			x := terms.Residual[i*m]
			if m == 1 {
				x -= part.Mean
				p += part.Weight * math.Exp(-x*x/(2*a)) / math.Sqrt(2*math.Pi*a)
				continue
			}
			y, det := terms.Residual[i*m+1], a*c-b*b
			p += part.Weight * math.Exp(-(c*x*x-2*b*x*y+a*y*y)/(2*det)) / (2 * math.Pi * math.Sqrt(det))
		}
		dst[i] += math.Log(p)
	}
}
