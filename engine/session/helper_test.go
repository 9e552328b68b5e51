package session

import (
	"cmp"
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"leadline/engine/filter/filtertest"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// at is a time in seconds after a beginning.
func at(s float64) sensor.Time { return 1_750_000_000e9 + sensor.Time(math.Round(s*1e9)) }

// town is a test road whose charts have names.
type town struct {
	*filtertest.Road
	names []string
}

var _ Names = town{}

func (t town) Name(chart int32) string { return t.names[chart] }
func (t town) Twin(int32) int32        { return -1 }

func (t town) Named(name string) (charts []int32) {
	for c, n := range t.names {
		if n == name {
			charts = append(charts, int32(c))
		}
	}
	return charts
}

func (t town) Polyline(chart int32) (eastM, northM []float64) {
	for s := 0.0; s < t.LengthM[chart]+1; s++ { // At stays at the end
		p, _, _ := t.At(chart, s)
		eastM, northM = append(eastM, p.E), append(northM, p.N)
	}
	return eastM, northM
}

// crossing is a street that forks into two, each of which leads back to its
// beginning, over rising ground.
func crossing() town {
	r := filtertest.NewRoad(1, []filtertest.Course{
		{HeadingRad: 0.3, Arcs: []filtertest.Arc{{LengthM: 120}, {LengthM: 40, Curvature: 0.02}, {LengthM: 60}}},
		{Start: geo.Point{E: 90, N: 190}, HeadingRad: 1.1, Arcs: []filtertest.Arc{{LengthM: 70, Curvature: -0.02}, {LengthM: 50}}},
		{Start: geo.Point{E: 90, N: 190}, HeadingRad: 1.1, Arcs: []filtertest.Arc{{LengthM: 30, Curvature: 0.05}, {LengthM: 80, Curvature: 0.002}}},
	}, [][]filtertest.Link{{{To: 1, Weight: 0.5}, {To: 2, Weight: 0.5}}, {{To: 0, Weight: 1}}, {{To: 0, Weight: 1}}})
	r.Height = func(e, n float64) (h, gE, gN float64) { return 100 + 0.05*e + 0.02*n, 0.05, 0.02 }
	return town{r, []string{"Long Street", "Upper Way", "Lower Way"}}
}

// straight is a road that runs north from the origin.
func straight(lengthM float64) town {
	r := filtertest.NewRoad(1, []filtertest.Course{{Arcs: []filtertest.Arc{{LengthM: lengthM}}}}, [][]filtertest.Link{nil})
	return town{r, []string{"North Road"}}
}

// winding is a road of gentle bends.
func winding(cellM float64) town {
	var arcs []filtertest.Arc
	for i := range 16 {
		arcs = append(arcs, filtertest.Arc{LengthM: 25, Curvature: []float64{0, 0.006, -0.004, -0.006, 0.005}[i%5]})
	}
	return town{filtertest.NewRoad(cellM, []filtertest.Course{{HeadingRad: 0.2, Arcs: arcs}}, [][]filtertest.Link{nil}), []string{"Winding Lane"}}
}

var seaOrigin = geo.FromDegrees(10, 50)

func sea() *plane.Plane { return plane.Open(seaOrigin, 20e3, 100) }

// onRoads is the default suite of a vehicle that never leaves mapped roads and
// is never lost: for figures that the belief on roads has exactly.
func onRoads() *sensor.Suite {
	never := new(float64)
	return &sensor.Suite{Vehicle: sensor.Vehicle{OffMapPerM: never, LostPerS: never, MovedPerS: never}}
}

func open(t testing.TB, c Config) *Session {
	t.Helper()
	s, err := New(c)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func pointStart(space interface{ Frame() geo.Frame }, p geo.Point, sigmaM float64) Start {
	return Start{Kind: AtPoint, Point: space.Frame().Inverse(p), SigmaM: sigmaM}
}

// outcome is what a run leaves: the posteriors, by time, as one who follows
// the releases has them.
type outcome struct {
	s          *Session
	hash       string
	posteriors []*summary.Posterior
	// How many were revised, and withdrawn.
	revised, withdrawn int
}

// follow is the hash that a follower comes to.
func (o *outcome) follow() string {
	h := summary.NewHasher()
	for _, p := range o.posteriors {
		h.Add(p)
	}
	return h.Sum()
}

func (o *outcome) take(t testing.TB, ps []*summary.Posterior) {
	t.Helper()
	for _, p := range ps {
		i, found := o.find(p.TimeNS)
		if found != p.Revises {
			t.Fatalf("the posterior of %d says Revises = %v, but that there was one is %v", p.TimeNS, p.Revises, found)
		}
		if found {
			o.posteriors[i] = p
			o.revised++
		} else {
			o.posteriors = slices.Insert(o.posteriors, i, p)
		}
	}
	if o.s == nil {
		return
	}
	for _, at := range o.s.Withdrawn() {
		i, found := o.find(int64(at))
		if !found {
			t.Fatalf("the posterior of %d is withdrawn and was not there", at)
		}
		o.posteriors = slices.Delete(o.posteriors, i, i+1)
		o.withdrawn++
	}
}

func (o *outcome) find(ns int64) (int, bool) {
	return slices.BinarySearchFunc(o.posteriors, ns, func(q *summary.Posterior, ns int64) int { return cmp.Compare(q.TimeNS, ns) })
}

// feed adds events, none of which may be refused, and flushes.
func feed(t testing.TB, s *Session, events []sensor.Event) outcome {
	t.Helper()
	o := outcome{s: s}
	for _, ev := range events {
		ps, err := s.Add(ev)
		if err != nil {
			t.Fatalf("%s of %q number %d at %d: %v", ev.Measurement.Kind(), ev.Sensor, ev.Number, ev.Time, err)
		}
		o.take(t, ps)
	}
	o.take(t, s.Flush())
	o.hash = s.Hash()
	return o
}

// refusal adds an event that is to be refused.
func refusal(t testing.TB, s *Session, ev sensor.Event) *Refusal {
	t.Helper()
	ps, err := s.Add(ev)
	var r *Refusal
	if !errors.As(err, &r) {
		t.Fatalf("%s at %d gave %v instead of a refusal", ev.Sensor, ev.Time, err)
	}
	if len(ps) > 0 {
		t.Errorf("a refused event released %d posteriors", len(ps))
	}
	return r
}

func inOrder(events []sensor.Event) []sensor.Event {
	sorted := slices.Clone(events)
	slices.SortStableFunc(sorted, sensor.Event.Compare)
	return sorted
}

// shuffled returns the events as they arrive when each is up to delayS late.
func shuffled(events []sensor.Event, delayS float64, rng *rand.Rand) []sensor.Event {
	type arrival struct {
		at sensor.Time
		ev sensor.Event
	}
	var as []arrival
	for _, ev := range events {
		as = append(as, arrival{ev.Time + sensor.Time(rng.Float64()*delayS*1e9), ev})
	}
	slices.SortStableFunc(as, func(a, b arrival) int { return int(a.at - b.at) })
	out := make([]sensor.Event, len(as))
	for i, a := range as {
		out[i] = a.ev
	}
	return out
}

// sameState fails unless two sessions hold the same belief and sums, bit for
// bit.
func sameState(t *testing.T, a, b *Session) {
	t.Helper()
	// No figure of a belief is NaN, and 0 and -0 would behave alike.
	if !reflect.DeepEqual(a.state.belief, b.state.belief) {
		t.Error("the beliefs differ")
	}
	if a.state.time != b.state.time || a.state.logEvidence != b.state.logEvidence || a.state.pose != b.state.pose {
		t.Errorf("time, evidence or pose differ: %d, %v, %v; %d, %v, %v", a.state.time, a.state.logEvidence, a.state.pose, b.state.time, b.state.logEvidence, b.state.pose)
	}
	if a.Hash() != b.Hash() {
		t.Error("the hashes differ")
	}
}

// samePosteriors compares whole posteriors, but for what depends on the order
// of arrival: counts of refusals, and whether an earlier one is revised.
func samePosteriors(t *testing.T, a, b []*summary.Posterior) {
	t.Helper()
	if len(a) != len(b) {
		t.Errorf("%d and %d posteriors", len(a), len(b))
		return
	}
	for i := range a {
		p, q := *a[i], *b[i]
		p.Revises, q.Revises = false, false
		p.Counts.Refused, q.Counts.Refused = 0, 0
		p.Counts.Accepted, q.Counts.Accepted = 0, 0 // those released before a late event came
		if !reflect.DeepEqual(p, q) {
			t.Errorf("posterior %d of %d differs:\n%+v\n%+v", i, len(a), p, q)
			return
		}
	}
}

// car drives along one chart and measures.
type car struct {
	road  town
	chart int32
	along func(s float64) float64 // m, at a time in seconds
	rng   *rand.Rand
	list  []sensor.Event
	count map[string]uint64
}

func newCar(road town, seed uint64, along func(s float64) float64) *car {
	return &car{road: road, along: along, rng: rand.New(rand.NewPCG(seed, 77)), count: map[string]uint64{}}
}

func (c *car) heading(s float64) float64 {
	_, h, _ := c.road.At(c.chart, c.along(s))
	return h
}

func (c *car) put(s float64, name string, m sensor.Measurement) {
	c.count[name]++
	c.list = append(c.list, sensor.Event{Time: at(s), Sensor: name, Number: c.count[name], Measurement: m})
}

// times calls do for each step of a sensor, from its first to the end.
func times(first, step, end float64, do func(from, to float64)) {
	for i := 1; ; i++ {
		to := first + float64(i)*step
		if to > end+1e-9 {
			return
		}
		do(to-step, to)
	}
}

const (
	odoSigma  = 0.05  // m per √m
	gyroSigma = 0.002 // rad per √s
)

func (c *car) odometer(name string, first, step, end float64) {
	times(first, step, end, func(from, to float64) {
		d := c.along(to) - c.along(from)
		sigma := odoSigma*math.Sqrt(math.Abs(d)) + 0.001
		c.put(to, name, sensor.Travel{Since: at(from), DistanceM: d + sigma*c.rng.NormFloat64(), SigmaM: sigma})
	})
}

func (c *car) gyro(name string, first, step, end float64) {
	times(first, step, end, func(from, to float64) {
		sigma := gyroSigma * math.Sqrt(to-from)
		c.put(to, name, sensor.Turn{Since: at(from), AngleRad: c.heading(to) - c.heading(from) + sigma*c.rng.NormFloat64(), SigmaRad: sigma})
	})
}

func (c *car) fixes(name string, first, step, end, sigmaM float64) {
	times(first, step, end, func(_, to float64) {
		p, _, _ := c.road.At(c.chart, c.along(to))
		p = p.Add(geo.Point{E: sigmaM * c.rng.NormFloat64(), N: sigmaM * c.rng.NormFloat64()})
		c.put(to, name, sensor.Fix{Position: c.road.Frame().Inverse(p), SigmaM: sigmaM})
	})
}

func (c *car) speeds(name string, first, step, end float64) {
	times(first, step, end, func(_, to float64) {
		v := (c.along(to+0.05) - c.along(to-0.05)) / 0.1
		c.put(to, name, sensor.Speed{MPS: v + 0.2*c.rng.NormFloat64(), SigmaMPS: 0.2})
	})
}

// charted is the point at a distance along the first chart.
func (t town) charted(alongM float64) geo.Point {
	p, _, _ := t.At(0, alongM)
	return p
}

// alongVar is the variance of a posterior along the first chart at its mean.
func alongVar(t town, p *summary.Posterior) float64 {
	nearest, best := 0.0, math.Inf(1)
	for s := 0.0; s < t.LengthM[0]; s += 0.5 {
		if d := t.charted(s).Sub(p.MeanFrame).Norm(); d < best {
			nearest, best = s, d
		}
	}
	_, h, _ := t.At(0, nearest)
	e, n := math.Sincos(h)
	c := p.CovFrame
	return e*e*c.EE + 2*e*n*c.EN + n*n*c.NN
}
