package sensor_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// profile is a height along the road, several waves long.
func profile(x float64) (h, slope float64) {
	h = 6*math.Sin(x/70) + 4*math.Sin(x/31+1) + 0.01*x
	return h, 6./70*math.Cos(x/70) + 4./31*math.Cos(x/31+1) + 0.01
}

// onRoadAt is a normal prior along the one road.
type onRoadAt struct{ m, sigma float64 }

func (p onRoadAt) Box() geo.Box { return filter.Anywhere{}.Box() }

func (p onRoadAt) Density(dst []float64, at *filter.Columns) {
	for i, n := range at.North {
		d := (n - p.m) / p.sigma
		dst[i] = math.Exp(-0.5 * d * d)
	}
}

// What the two tests below share: a vehicle goes along one road at a measured
// speed, and begins on a straight part that runs north.
const (
	gridSpeed, gridWalk   = 8.0, 0.5 // m/s, m/√s
	gridStart, gridStartS = 250.0, 50.0
	gridCell              = 2.0
)

// drivenBeside runs a belief and a grid with the nuisance as an axis beside each
// other, and compares them every ten seconds.
type drivenBeside struct {
	suite    *sensor.Suite
	qs       []filter.Quantity
	nuisance string
	road     *filtertest.Road
	seconds  int
	y0, dy   float64
	walkVar  float64 // of the nuisance a second, 0 for none
	// truth says what happens in a second that ends at place x: events besides
	// the speed, and likelihoods of one's own; and for the grid ln p of what is
	// measured at a place for a nuisance.
	truth func(second int, x float64, rng *rand.Rand) ([]sensor.Event, []any, func(x, y float64) float64)
}

// table reads a function at the grid's places, a metre apart.
func (d *drivenBeside) table(f func(x float64) float64) []float64 {
	out := make([]float64, int(d.road.LengthM[0])+1)
	for i := range out {
		out[i] = f(float64(i))
	}
	return out
}

// loss is the largest difference, of the exact sigmas, and the divergences.
type loss struct{ mean, sigma, correlation, meanKL, mostKL float64 }

func (d *drivenBeside) run(t *testing.T, seed uint64, x float64) loss {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 0))
	index := filter.Index(d.qs, d.nuisance)
	prior := d.qs[index].PriorVar
	b, err := filter.Seed(d.road, onRoadAt{gridStart, gridStartS}, d.qs, 1<<16)
	if err != nil {
		t.Fatal(err)
	}
	g := newExact(0, d.road.LengthM[0], gridCell/2, d.y0, -d.y0, d.dy)
	for i := range g.p {
		g.p[i] = 1
	}
	g.each(func(x, y float64) float64 {
		return math.Exp(-0.5 * ((x-gridStart)*(x-gridStart)/gridStartS/gridStartS + y*y/prior))
	})
	var w filter.Workspace
	var out loss
	m := &sensor.Motion{Suite: d.suite}
	n := 0.0
	for s := range d.seconds {
		from, to := sensor.Time(s)*1e9, sensor.Time(s+1)*1e9
		x += gridSpeed + gridWalk*rng.NormFloat64()
		events, own, density := d.truth(s, x, rng)
		m.Reset(from, to)
		m.Add(sensor.Event{Time: to, Sensor: "log", Measurement: sensor.Speed{MPS: gridSpeed, SigmaMPS: gridWalk}}, from)
		for _, ev := range events {
			if ev.Time = to; sensor.IsMotion(ev.Measurement.Kind()) {
				m.Add(ev, from)
			}
		}
		step, err := m.Step(d.qs, 1, d.road.Frame(), sensor.Pose{})
		if err != nil {
			t.Fatal(err)
		}
		filter.Predict(b, d.road, step, &w)
		for _, ev := range events {
			ls, err := sensor.Likelihoods(ev, sensor.Context{Suite: d.suite, Frame: d.road.Frame(), Dim: 1, Quantities: d.qs, CellM: gridCell, SincePreviousS: 1, TravelledM: gridSpeed})
			if err != nil {
				t.Fatal(err)
			}
			own = append(own, ls...)
		}
		for _, l := range own {
			if _, err := filter.Update(b, d.road, l, &w); err != nil {
				t.Fatal(err)
			}
		}
		g.move(int(gridSpeed / g.dx))
		g.spread(1, g.dx, gridWalk*gridWalk)
		if d.walkVar > 0 {
			g.spread(g.n, g.dy, d.walkVar)
		}
		g.each(density)
		if s%10 != 9 {
			continue
		}
		a, e := lineMoments(b, 0, index, gridCell), g.moments()
		kl := g.divergence(b, index, gridCell)
		n++
		out.meanKL += (kl - out.meanKL) / n
		out.mostKL = math.Max(out.mostKL, kl)
		sx, sy := math.Sqrt(e.xx), math.Sqrt(e.yy)
		out.mean = max(out.mean, math.Abs(a.x-e.x)/sx, math.Abs(a.y-e.y)/sy)
		out.sigma = max(out.sigma, math.Abs(math.Sqrt(a.xx)/sx-1), math.Abs(math.Sqrt(a.yy)/sy-1))
		out.correlation = max(out.correlation, math.Abs(a.xy-e.xy)/sx/sy)
		t.Logf("%d s: place %.2f ± %.2f (exact %.2f ± %.2f), %s %.4g ± %.4g (%.4g ± %.4g), divergence %.4f nats",
			s+1, a.x, math.Sqrt(a.xx), e.x, sx, d.nuisance, a.y, math.Sqrt(a.yy), e.y, sy, kl)
	}
	return out
}

// Merging by moments keeps mean and covariance of the whole exactly, so that
// means and sigmas differ by what is not linear within a cell alone, and by what
// cutting does to the next update: at cells of a sigma, 1 % of sigma
// (TestKalmanWithNuisances). Twice that is allowed, where a wrong row, sign or
// drift makes many sigmas.
const gridTolerance = 0.02

func (l loss) hold(t *testing.T, mostKL float64) {
	t.Helper()
	t.Logf("of sigma: means within %.4f, sigmas %.4f, correlation %.4f; divergence %.4f nats on average, at most %.4f", l.mean, l.sigma, l.correlation, l.meanKL, l.mostKL)
	if l.mean > gridTolerance || l.sigma > gridTolerance || l.correlation > gridTolerance {
		t.Errorf("off by more than %g", gridTolerance)
	}
	if l.mostKL > mostKL {
		t.Errorf("merging lost %.4f nats, at most %g is stated", l.mostKL, mostKL)
	}
}

// TestOffsetAgainstAnAxis drives along a profile of heights with an altimeter
// whose offset wanders. Early on places and offsets lie on several branches, as
// the profile repeats itself.
func TestOffsetAgainstAnAxis(t *testing.T) {
	const sigma, offset, drift, seed = 1.0, 8.0, 0.08, 5
	zero := 0.0
	d := &drivenBeside{
		suite: (&sensor.Suite{
			Vehicle: sensor.Vehicle{StretchMPerSqrtM: 1e-6, CornerSigmaM: 1e-6},
			Sensors: []sensor.Sensor{
				{Name: "log", Kind: sensor.KindSpeed, CorrelationS: &zero},
				{Name: "alt", Kind: sensor.KindClearance, OutlierProbability: &zero, Nuisances: []sensor.Nuisance{{Name: sensor.NuisanceAltimeterOffset, Sigma: offset, DriftPerSqrtS: drift}}},
			},
		}).For(1),
		nuisance: filter.AltimeterOffset,
		road:     filtertest.NewRoad(gridCell, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: 900}}}}, [][]filtertest.Link{nil}),
		seconds:  50, y0: -32, dy: 0.2, walkVar: drift * drift,
	}
	d.road.Height = func(_, n float64) (float64, float64, float64) { h, s := profile(n); return h, 0, s }
	d.qs = d.suite.Quantities(1)
	heights := d.table(func(x float64) float64 { h, _ := profile(x); return h })
	for run := range uint64(2) {
		draw := rand.New(rand.NewPCG(seed+run, 1))
		o := offset * draw.NormFloat64()
		d.truth = func(_ int, x float64, rng *rand.Rand) ([]sensor.Event, []any, func(x, y float64) float64) {
			o += drift * rng.NormFloat64()
			h, _ := profile(x)
			z := h + o + sigma*rng.NormFloat64()
			ev := sensor.Event{Sensor: "alt", Measurement: sensor.Clearance{ClearanceM: 100, AltitudeM: 100 + z, SigmaM: sigma}}
			return []sensor.Event{ev}, nil, func(x, y float64) float64 {
				r := z - heights[int(x)] - y
				return math.Exp(-0.5 * r * r / sigma / sigma)
			}
		}
		t.Logf("seed %d: offset %.2f", seed+run, o)
		d.run(t, seed+run, gridStart+gridStartS*draw.NormFloat64()).hold(t, 0.02)
	}
}

// alongRoad is a heading that follows the road's: 0 = road's heading - heading + v.
type alongRoad struct{ sigma float64 }

func (alongRoad) Wants() filter.Wants   { return filter.WantPosition | filter.WantHeading }
func (alongRoad) Rows() int             { return 1 }
func (a alongRoad) Noise() filter.Noise { return filter.Gaussian(a.sigma) }

func (a alongRoad) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k, h := len(qs), filter.Index(qs, filter.Heading)
	for i := range at.East {
		t.Residual[i] = geo.WrapPi(at.Heading[i] - mean[i*k+h])
		t.Row[i*k], t.Row[i*k+h] = -at.Curvature[i], 1
	}
}

// TestGyroBiasAgainstAnAxis drives along bends with a gyro whose bias is
// constant, so that the heading is what it was at first, plus all turns, less
// bias times time: the grid needs no axis for it.
func TestGyroBiasAgainstAnAxis(t *testing.T) {
	const seed = 9
	bias, sigma := geo.Rad(0.1), geo.Rad(6)
	zero := 0.0
	d := &drivenBeside{
		suite: (&sensor.Suite{
			Vehicle: sensor.Vehicle{StretchMPerSqrtM: 1e-6, CornerSigmaM: 1e-6},
			Sensors: []sensor.Sensor{
				{Name: "log", Kind: sensor.KindSpeed, CorrelationS: &zero},
				{Name: "gyro", Kind: sensor.KindTurn, Nuisances: []sensor.Nuisance{
					{Name: sensor.NuisanceHeading, Sigma: 1, DriftPerSqrtS: 0},
					{Name: sensor.NuisanceGyroBias, Sigma: 0.1, DriftPerSqrtS: 1e-9},
				}},
			},
		}).For(1),
		nuisance: filter.GyroBias,
		road: filtertest.NewRoad(gridCell, []filtertest.Course{{Arcs: []filtertest.Arc{
			{LengthM: 400},
			{LengthM: 60, Curvature: 1. / 80},
			{LengthM: 90},
			{LengthM: 80, Curvature: -1. / 60},
			{LengthM: 50},
			{LengthM: 100, Curvature: 1. / 150},
			{LengthM: 220},
		}}}, [][]filtertest.Link{nil}),
		seconds: 60, y0: -4 * bias, dy: bias / 25,
	}
	d.road.HeadingVar = 1e-8
	d.qs = d.suite.Quantities(1)
	heading := func(x float64) float64 { _, h, _ := d.road.At(0, x); return h }
	headings := d.table(heading)
	for run := range uint64(2) {
		draw := rand.New(rand.NewPCG(seed+run, 1))
		true1, turned := bias*draw.NormFloat64(), 0.0
		x := gridStart + gridStartS*draw.NormFloat64()
		last := x
		d.truth = func(second int, x float64, rng *rand.Rand) ([]sensor.Event, []any, func(x, y float64) float64) {
			turn := heading(x) - heading(last) + true1
			last = x
			turned += turn
			seconds, total := float64(second+1), turned
			from := sensor.Time(second) * 1e9
			return []sensor.Event{{Sensor: "gyro", Measurement: sensor.Turn{Since: from, AngleRad: turn, SigmaRad: 1e-6}}}, []any{alongRoad{sigma}},
				func(x, y float64) float64 {
					r := geo.WrapPi(headings[int(x)] - (total - y*seconds))
					return math.Exp(-0.5 * r * r / sigma / sigma)
				}
		}
		t.Logf("seed %d: bias %.3g rad/s", seed+run, true1)
		d.run(t, seed+run, x).hold(t, 0.02)
	}
}
