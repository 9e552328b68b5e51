package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// world is a made-up place: a frame at 50° N 10° E, hills of smooth formula,
// and a road that is an arc of radius 200 m. Transcendentals of package math
// are fine here: tests compare, they do not position.
type world struct{ frame geo.Frame }

func newWorld() world { return world{geo.NewFrame(geo.FromDegrees(10, 50))} }

const (
	roadRadiusM = 200.0
	worldVarM2  = 0.7
)

func (w world) height(e, n float64) (h, sE, sN float64) {
	h = 100 + 20*math.Sin(e/80) + 15*math.Cos(n/60) + e*n/5000
	return h, 20.0/80*math.Cos(e/80) + n/5000, -15.0/60*math.Sin(n/60) + e/5000
}

// Fingerprint implements filter.Space.
func (w world) Fingerprint() string { return "test world" }

// Frame implements filter.Space.
func (w world) Frame() geo.Frame { return w.frame }

// Bounds implements filter.PlaneSpace.
func (w world) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -1e5, N: -1e5}, Max: geo.Point{E: 1e5, N: 1e5}}
}

// DetailM implements filter.PlaneSpace.
func (w world) DetailM() float64 { return 10 }

// Sample implements filter.PlaneSpace.
func (w world) Sample(c *filter.Columns) {
	if c.Wants&filter.WantHeight == 0 {
		return
	}
	for i := range c.East {
		c.Height[i], c.SlopeE[i], c.SlopeN[i] = w.height(c.East[i], c.North[i])
		c.HeightVar[i] = worldVarM2
	}
}

// road fills the columns along the arc: heading a + s/R.
func (w world) road(wants filter.Wants, alongM []float64) *filter.Columns {
	var c filter.Columns
	c.Resize(wants, 1, len(alongM))
	for i, s := range alongM {
		a := s / roadRadiusM
		sin, cos := math.Sincos(a)
		c.East[i], c.North[i] = 300+roadRadiusM*(1-cos), roadRadiusM*sin
		c.TangentE[i], c.TangentN[i] = sin, cos
		if c.Heading != nil {
			c.Heading[i], c.Curvature[i], c.HeadingVar[i] = a, 1/roadRadiusM, 0.03
		}
		if c.Height != nil {
			h, sE, sN := w.height(c.East[i], c.North[i])
			grade := sE*sin + sN*cos
			c.Height[i], c.SlopeE[i], c.SlopeN[i], c.HeightVar[i] = h, grade*sin, grade*cos, worldVarM2
		}
	}
	return &c
}

// spot fills the columns at points of the plane.
func (w world) spot(wants filter.Wants, points ...geo.Point) *filter.Columns {
	var c filter.Columns
	c.Resize(wants, 2, len(points))
	for i, p := range points {
		c.East[i], c.North[i] = p.E, p.N
	}
	w.Sample(&c)
	return &c
}

func terms(n, m, k int) *filter.Terms {
	t := new(filter.Terms)
	t.Reset(n, m, k)
	return t
}

// density is the slow, obvious reading of a linear likelihood at one position:
// what filter.Likelihood documents, for one or two rows.
func density(l filter.LinearLikelihood, at *filter.Columns, qs []filter.Quantity, mean []float64) float64 {
	m, k := l.Rows(), max(len(qs), at.Dim)
	t := terms(1, m, k)
	l.Linearize(t, at, qs, mean)
	if f := t.Flat[0]; f == f {
		return math.Exp(f)
	}
	n := l.Noise()
	sum := n.FlatWeight * n.FlatDensity
	for i, p := range n.Parts {
		extra := t.ExtraOf(0, i)
		a, b, c := p.Cov[0]+extra, p.Cov[1], p.Cov[2]+extra
		if m == 1 {
			sum += p.Weight * math.Exp(-t.Residual[0]*t.Residual[0]/2/a) / math.Sqrt(2*math.Pi*a)
			continue
		}
		det := a*c - b*b
		x, y := t.Residual[0], t.Residual[1]
		sum += p.Weight * math.Exp(-(c*x*x-2*b*x*y+a*y*y)/2/det) / (2 * math.Pi * math.Sqrt(det))
	}
	return sum
}

// context is a context with everything known, on roads or on the plane.
func (w world) context(dim int, qs []filter.Quantity, at geo.Point) Context {
	lon, lat, axis := geo.Deg(w.frame.Inverse(geo.Point{E: 320, N: 30}).Lon), geo.Deg(w.frame.Inverse(geo.Point{E: 320, N: 30}).Lat), 90.0
	s := (&Suite{
		Sensors: []Sensor{
			{Name: "arm", Kind: KindRange, Mounting: Mounting{ForwardM: 3, RightM: -1}},
			{Name: "armfix", Kind: KindFix, Mounting: Mounting{ForwardM: 3, RightM: -1}},
			{Name: "armbearing", Kind: KindBearing, Mounting: Mounting{ForwardM: 3, RightM: -1}},
			{Name: "armclear", Kind: KindClearance, Mounting: Mounting{ForwardM: 3, RightM: -1, DownM: 0.5}},
		},
		Posts: []Post{{ID: "post", LonDeg: &lon, LatDeg: &lat}, {ID: "line", LonDeg: &lon, LatDeg: &lat, AxisDeg: &axis}},
	}).For(dim)
	c := Context{
		Suite: s, Frame: w.frame, Dim: dim, Quantities: qs, CellM: 1,
		Pose:           Pose{At: at, HeadingVar: NoHeading},
		SincePreviousS: math.Inf(1), TravelledM: math.Inf(1),
	}
	if dim == 2 {
		c.Plane = w
	}
	return c
}

func planeQuantities() []filter.Quantity {
	return []filter.Quantity{{Name: filter.East}, {Name: filter.North}, {Name: filter.Heading, Angular: true}, {Name: filter.OdometerScale}}
}
