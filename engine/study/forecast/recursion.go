package forecast

import (
	"fmt"
	"math"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// bound runs the posterior Cramér–Rao recursion along a path: the information of
// a vehicle that is where it is planned to be, over all that a belief there
// estimates,
//
//	P ← F P Fᵀ + Q,   P⁻¹ ← P⁻¹ + I·rᵀr,
//
// F and Q those of the filter's own step (sensor.Motion), r the row of each
// measurement and I the Fisher information of its noise (fisher), both at the
// planned place. No unbiased estimate of a vehicle whose mode is known errs less;
// what it leaves out is that there may be other places (ambiguity.go).
//
// Source: Tichavský, Muravchik & Nehorai, IEEE Trans. Signal Processing 46(5),
// 1998; for F the identity it is score.CramerRaoStep.
type bound struct {
	*Plan
	p    []float64 // K×K
	k    int
	now  place
	x    []float64
	t    sensor.Time
	way  float64 // travelled, by the odometer
	bend sensor.Bend
	last map[string]voice
}

type voice struct {
	t    sensor.Time
	wayM float64
}

// mark is what the recursion has at a time.
type mark struct {
	timeS float64
	wayM  float64
	cov   summary.Cov // true metres, in the frame's axes
}

// bound runs the recursion over what is expected to be measured.
func (p *Plan) bound() ([]mark, error) {
	w := p.world(nil)
	for w.more() {
		if err := w.step(); err != nil {
			return nil, err
		}
	}
	if len(w.events) == 0 {
		return nil, errNoEvents
	}
	k := max(len(p.qs), p.dim)
	b := &bound{
		Plan: p, k: k, p: make([]float64, k*k), x: make([]float64, k), now: p.Path.place(p.Path.wayAt(0)),
		t: at(0), last: map[string]voice{},
	}
	for i := range k {
		v := p.Start * p.Start
		if i >= p.dim {
			v, b.x[i] = p.qs[i].PriorVar, p.qs[i].PriorMean
		}
		b.p[i*k+i] = v
	}
	b.face()
	return b.run(w.events)
}

func (b *bound) face() {
	if h := filter.Index(b.qs, filter.Heading); h >= 0 {
		b.x[h] = b.now.heading
	}
}

func (b *bound) run(events []sensor.Event) ([]mark, error) {
	prepared := make([]sensor.Event, len(events))
	for i, ev := range events {
		var err error
		if prepared[i], err = b.Suite.Prepare(raw(b.Suite.Sensor(ev.Sensor, ev.Measurement.Kind()), ev)); err != nil {
			return nil, err
		}
	}
	motions := newMotions(prepared)
	marks := []mark{{0, b.now.wayM, b.cov()}}
	for i := 0; i < len(prepared); {
		if b.stop != nil {
			if err := b.stop(); err != nil {
				return nil, err
			}
		}
		t := prepared[i].Time
		if t > b.t {
			if err := b.move(motions, t); err != nil {
				return nil, err
			}
		}
		for ; i < len(prepared) && prepared[i].Time == t; i++ {
			if err := b.weigh(prepared[i]); err != nil {
				return nil, err
			}
		}
		marks = append(marks, mark{b.t.Seconds(at(0)), b.now.wayM, b.cov()})
	}
	return marks, nil
}

// motions are the events that measure motion, each with its sensor's before.
type motions struct {
	events []sensor.Event
	before []sensor.Time
	first  int
}

func newMotions(events []sensor.Event) *motions {
	m := &motions{}
	last := map[string]sensor.Time{}
	for _, ev := range events {
		if !sensor.IsMotion(ev.Measurement.Kind()) {
			continue
		}
		before, ok := last[ev.Sensor]
		if !ok {
			before = ev.Time
		}
		last[ev.Sensor] = ev.Time
		m.events, m.before = append(m.events, ev), append(m.before, before)
	}
	return m
}

// longestS is the longest that an increment reaches back: rates are above 1e-4 Hz
// in practice, and what is slower is looked for in vain.
const longestS = 1e4

// within adds what is in (from, to].
func (m *motions) within(motion *sensor.Motion, from, to sensor.Time) {
	for m.first < len(m.events) && m.events[m.first].Time <= from {
		m.first++
	}
	for i := m.first; i < len(m.events) && m.events[i].Time.Seconds(to) < longestS; i++ {
		begin := m.before[i]
		if since, ok := sensor.Since(m.events[i].Measurement); ok {
			begin = since
		}
		if begin < to {
			motion.Add(m.events[i], m.before[i])
		}
		if begin >= to && i > m.first+64 { // events are by time: what begins later follows
			break
		}
	}
}

// move takes the recursion on to a time, in parts between which a sensor of
// motion speaks.
func (b *bound) move(ms *motions, to sensor.Time) error {
	m := sensor.Motion{Suite: b.Suite}
	m.Reset(b.t, to)
	m.Bend = b.bend
	ms.within(&m, b.t, to)
	step, err := m.Step(b.qs, b.dim, b.Space.Frame(), sensor.Pose{At: b.now.at, HeadingRad: b.now.heading, HeadingVar: b.headingVar()})
	if err != nil {
		return err
	}
	f := step.F
	if f == nil {
		f = identity(b.k)
	}
	if step.Local != nil {
		rows := make([]float64, b.dim*b.k)
		cov := make([]float64, b.k*(b.k+1)/2)
		for i := range b.k {
			for j := range i + 1 {
				cov[filter.Packed(i, j)] = b.p[i*b.k+j]
			}
		}
		step.Local.Local(make([]float64, b.dim), rows, b.columns(b.now, step.Local.Wants()), b.x, cov)
		copy(f, rows)
	}
	b.predict(f, step.Q)
	b.t = to
	b.bend = m.BendAfter()
	b.way += m.TravelledM()
	before := b.now
	b.now = b.Path.place(b.Path.wayAt(to.Seconds(at(0))))
	b.face()
	if filter.Index(b.qs, filter.Heading) > 0 && b.dim == 1 {
		b.corners(before.leg, b.now.leg)
	}
	if b.dim == 2 {
		return nil
	}
	l, ok := m.CrossTrack(b.Space.Frame(), sensor.Pose{At: b.now.at, HeadingVar: math.Inf(1)})
	if !ok {
		l, ok = sensor.RoadAlignment(b.qs, m.TravelledM())
	}
	if ok {
		b.learn(l)
	}
	return nil
}

func (b *bound) headingVar() float64 {
	if h := filter.Index(b.qs, filter.Heading); h >= 0 {
		return b.p[h*b.k+h]
	}
	return 0
}

// weigh takes a measurement in; motions have been moved by.
func (b *bound) weigh(ev sensor.Event) error {
	kind := ev.Measurement.Kind()
	if sensor.IsMotion(kind) {
		return nil
	}
	w := world{Plan: b.Plan, now: b.now, x: b.x}
	since, travelled := math.Inf(1), math.Inf(1)
	if v, ok := b.last[ev.Sensor]; ok {
		since, travelled = ev.Time.Seconds(v.t), b.way-v.wayM
	}
	c := w.context(since, travelled)
	c.Pose.HeadingVar = b.headingVar()
	ls, err := sensor.Likelihoods(ev, c)
	if err != nil {
		return fmt.Errorf("forecast: %w", err)
	}
	for _, l := range ls {
		b.learn(l)
	}
	b.last[ev.Sensor] = voice{ev.Time, b.way}
	return nil
}

// learn adds the information of a likelihood.
func (b *bound) learn(l any) {
	at, ok := b.linearize(l, b.now, b.x)
	if !ok {
		return
	}
	for r := range at.rows {
		b.add(at.terms.Row[r*b.k:(r+1)*b.k], fisher(&at, r))
	}
}

// add is P ← P - P r rᵀ P / (1/I + rᵀ P r), the inverse of P⁻¹ + I·r rᵀ.
func (b *bound) add(row []float64, information float64) {
	if !(information > 0) {
		return
	}
	k := b.k
	pr := make([]float64, k)
	s := 1 / information
	for i := range k {
		for j, r := range row {
			pr[i] += b.p[i*k+j] * r
		}
		s += pr[i] * row[i]
	}
	for i := range k {
		for j := range k {
			b.p[i*k+j] -= pr[i] * pr[j] / s
		}
	}
}

// predict is P ← F P Fᵀ + Q.
func (b *bound) predict(f, q []float64) {
	k := b.k
	fp := make([]float64, k*k)
	for i := range k {
		for j := range k {
			for l := range k {
				fp[i*k+j] += f[i*k+l] * b.p[l*k+j]
			}
		}
	}
	for i := range k {
		for j := range i + 1 {
			v := 0.0
			for l := range k {
				v += fp[i*k+l] * f[j*k+l]
			}
			if len(q) > filter.Packed(i, j) {
				v += q[filter.Packed(i, j)]
			}
			b.p[i*k+j], b.p[j*k+i] = v, v
		}
	}
}

func identity(k int) []float64 {
	f := make([]float64, k*k)
	for i := range k {
		f[i*k+i] = 1
	}
	return f
}

// cov is the covariance of the place in the frame's axes.
func (b *bound) cov() summary.Cov {
	if b.dim == 2 {
		_, k := b.Space.Frame().Convergence(b.now.at)
		k *= k
		return summary.Cov{EE: b.p[0] / k, EN: b.p[1] / k, NN: b.p[b.k+1] / k}
	}
	s, c := math.Sincos(b.now.heading)
	along, across := b.p[0], b.Suite.Vehicle.LateralSigmaM*b.Suite.Vehicle.LateralSigmaM
	return summary.Cov{
		EE: along*s*s + across*c*c,
		EN: (along - across) * s * c,
		NN: along*c*c + across*s*s,
	}
}
