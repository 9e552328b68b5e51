package forecast

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// world drives a plan's path and measures by the suite's own models: what a
// filter takes for granted is what happens. Without a random source nothing errs,
// and the measurements are those that are expected.
//
//   - Each quantity that is estimated beside the position starts at its prior and
//     wanders by its drift.
//   - On roads the way driven differs from the map's by stretch_m_per_sqrt_m and
//     corner_sigma_m, and at bends by keeps_right_m; the vehicle keeps to a distance from the line that is
//     normal with lateral_sigma_m and changes over lateralLengthM, smoothly: a
//     critically damped second-order process along the way. Its heading is off the
//     road's by the slope of that. The 10° by which the filter lets it differ are
//     caution of the filter's, not a figure of the suite, and do not happen.
//   - A noise that the suite makes last correlation_s is a first-order
//     autoregression of half of that.
//   - Outliers and heavy parts come as often as the suite says.
type world struct {
	*Plan
	rng      *rand.Rand
	t        float64 // s since the start
	now      place
	x        []float64 // quantities, positions 0, heading the vehicle's own
	lateralM float64   // to the right of the road
	wander   float64   // heading about the road's: the slope of lateralM
	next     []int     // tick of each sensor
	acc      []gathered
	ar       []float64 // noise that lasts, of each sensor
	fixes    int       // of fixesS
	heading  int       // index of the quantity, -1
	events   []sensor.Event
}

// gathered is what happened since a motion sensor's last word.
type gathered struct{ sinceS, forward, turn, east, north float64 }

const (
	lateralLengthM = 100.0 // over which a lane is kept; practice
	mostStepM      = 2.0
)

// startNS is when a forecast begins: any time does.
const startNS = sensor.Time(1_900_000_000e9)

func at(t float64) sensor.Time { return startNS + sensor.Time(math.Round(t*1e9)) }

func (p *Plan) world(rng *rand.Rand) *world {
	w := &world{
		Plan: p, rng: rng, now: p.Path.place(p.Path.wayAt(0)), heading: filter.Index(p.qs, filter.Heading),
		next: make([]int, len(p.sensors)), acc: make([]gathered, len(p.sensors)), ar: make([]float64, len(p.sensors)),
		x: make([]float64, max(len(p.qs), p.dim)),
	}
	for i := p.dim; i < len(p.qs); i++ {
		w.x[i] = p.qs[i].PriorMean + w.normal()*math.Sqrt(p.qs[i].PriorVar)
	}
	for i, s := range p.sensors {
		w.ar[i] = w.normal()
		if sensor.IsMotion(s.Kind) && s.Kind != sensor.KindSpeed {
			w.next[i] = 1
		}
	}
	if p.dim == 1 {
		w.lateralM = w.normal() * p.Suite.Vehicle.LateralSigmaM
		w.wander = w.normal() * p.Suite.Vehicle.LateralSigmaM / lateralLengthM
	}
	w.face()
	return w
}

// face sets the vehicle's heading.
func (w *world) face() {
	if w.heading >= 0 {
		w.x[w.heading] = w.now.heading + w.wander
	}
}

func (w *world) normal() float64 {
	if w.rng == nil {
		return 0
	}
	return w.rng.NormFloat64()
}

// truth is where the vehicle is, in the frame.
func (w *world) truth() geo.Point { return beside(w.now, w.lateralM) }

// due is when the next sensor speaks, and which one; the fixes beside come last.
func (w *world) due() (t float64, which int) {
	t, which = math.Inf(1), -1
	for i, s := range w.sensors {
		if d := float64(w.next[i]) / s.hz; d < t {
			t, which = d, i
		}
	}
	if w.fixes < len(w.fixesS) && w.fixesS[w.fixes] < t {
		return w.fixesS[w.fixes], -1
	}
	return t, which
}

// more reports whether the path goes on.
func (w *world) more() bool {
	t, _ := w.due()
	return t <= w.Path.durationS() && (w.untilS == 0 || t <= w.untilS)
}

// step goes on to the next word and appends it to the events.
func (w *world) step() error {
	if w.stop != nil {
		if err := w.stop(); err != nil {
			return err
		}
	}
	t, which := w.due()
	w.advance(t)
	if which < 0 {
		w.fixes++
		w.events = append(w.events, w.fix(sensor.Sensor{Name: extraFix, Kind: sensor.KindFix}, w.fixSigmaM))
		return nil
	}
	n := w.next[which]
	w.next[which]++
	before := len(w.events)
	if err := w.measure(which, n); err != nil {
		return err
	}
	for i := before; i < len(w.events); i++ { // as the instrument would say it
		ev := &w.events[i]
		ev.Number = uint64(n*64 + i - before)
	}
	return nil
}

// extraFix is the sensor of a plan's single fixes.
const extraFix = "extra fix"

// advance moves the world to a time.
func (w *world) advance(t float64) {
	way := w.Path.wayAt(t) - w.Path.wayAt(w.t)
	n := 1
	if w.dim == 1 {
		n = max(1, int(math.Ceil(way/mostStepM)))
	}
	from := w.t
	for i := 1; i <= n; i++ {
		w.move(from + (t-from)*float64(i)/float64(n))
	}
	w.t = t
}

func (w *world) move(t float64) {
	next := w.Path.place(w.Path.wayAt(t))
	dt := t - w.t
	if !(dt > 0) {
		return
	}
	ds, turn := next.wayM-w.now.wayM, w.Path.turned(w.now, next)
	c, s, k := w.Space.Frame().Rotation(w.now.at)
	d := next.at.Sub(w.now.at)
	east, north := (c*d.E+s*d.N)/k, (c*d.N-s*d.E)/k
	forward := ds
	if w.dim == 1 {
		v := w.Suite.Vehicle
		forward += w.normal()*math.Sqrt(v.StretchMPerSqrtM*v.StretchMPerSqrtM*ds+v.CornerSigmaM*v.CornerSigmaM*math.Abs(turn)/(math.Pi/2)) - v.KeepsRightM*turn
		push := w.normal() * 2 * v.LateralSigmaM / lateralLengthM * math.Sqrt(ds/lateralLengthM)
		wander := w.wander + push - ds/lateralLengthM*(2*w.wander+w.lateralM/lateralLengthM)
		w.lateralM += ds * wander
		turn += wander - w.wander
		w.wander = wander
	}
	drift := 0.0 // of the heading: what a turn is off by beside its own noise
	for i := w.dim; i < len(w.qs); i++ {
		step := w.normal() * math.Sqrt(w.qs[i].DriftVar*dt)
		if i == w.heading {
			drift = step
			continue
		}
		w.x[i] += step
	}
	for i := range w.acc {
		a := &w.acc[i]
		a.forward += forward
		a.turn += turn + drift
		a.east += east
		a.north += north
	}
	w.now, w.t = next, t
	w.face()
}

// quantity is the present value of one, 0 for one that is not estimated or is
// another sensor's.
func (w *world) quantity(d sensor.Sensor, name, nuisance string) float64 {
	if nuisance != "" {
		has := false
		for _, n := range d.Nuisances {
			has = has || n.Name == nuisance
		}
		if !has {
			return 0
		}
	}
	if i := filter.Index(w.qs, name); i >= 0 {
		return w.x[i]
	}
	return 0
}

func (w *world) put(d sensor.Sensor, m sensor.Measurement) {
	w.events = append(w.events, sensor.Event{Time: at(w.t), Sensor: d.Name, Measurement: m})
}

// measure appends what a sensor says now; its times and signs are those after
// the suite has mended them (Suite.Prepare is undone by raw).
func (w *world) measure(which, tick int) error {
	d := w.sensors[which]
	a := w.acc[which]
	w.acc[which] = gathered{sinceS: w.t}
	switch d.Kind {
	case sensor.KindTravel, sensor.KindTurn, sensor.KindDisplacement, sensor.KindBodyDisplacement:
		return w.increment(d.Sensor, a)
	case sensor.KindSpeed:
		return w.speed(which, a, tick)
	case sensor.KindFix:
		w.events = append(w.events, w.fix(d.Sensor, 0))
		return nil
	}
	return w.weighing(which)
}

// sigmas is a measurement with the suite's noise filled in.
func (w *world) sigmas(d sensor.Sensor, m sensor.Measurement) (sensor.Measurement, error) {
	ev, err := w.Suite.Prepare(raw(d, sensor.Event{Time: at(w.t), Sensor: d.Name, Measurement: m}))
	switch {
	case err != nil && noiseless(ev.Measurement):
		return nil, fmt.Errorf("%w (a forecast needs each sensor's noise in the suite)", err)
	case err != nil:
		return nil, err
	}
	return ev.Measurement, nil
}

func (w *world) increment(d sensor.Sensor, a gathered) error {
	since, dt := at(a.sinceS), w.t-a.sinceS
	scale := 1 + w.quantity(sensor.Sensor{}, filter.OdometerScale, "")
	bias := w.quantity(d, filter.GyroBias, sensor.NuisanceGyroBias)
	var m sensor.Measurement
	switch d.Kind {
	case sensor.KindTravel:
		m = sensor.Travel{Since: since, DistanceM: a.forward / scale}
	case sensor.KindTurn:
		m = sensor.Turn{Since: since, AngleRad: a.turn + bias*dt}
	case sensor.KindDisplacement:
		uE := w.quantity(d, filter.VelocityErrorEast, sensor.NuisanceVelocityEast)
		uN := w.quantity(d, filter.VelocityErrorNorth, sensor.NuisanceVelocityNorth)
		delta := w.quantity(d, filter.AzimuthError, sensor.NuisanceAzimuth)
		e, n := a.east+dt*uE, a.north+dt*uN
		m = sensor.Displacement{Since: since, EastM: e - delta*n, NorthM: n + delta*e}
	case sensor.KindBodyDisplacement:
		m = sensor.BodyDisplacement{Since: since, ForwardM: a.forward / scale, TurnRad: a.turn}
	}
	filled, err := w.sigmas(d, m)
	if err != nil {
		return err
	}
	switch f := filled.(type) {
	case sensor.Travel:
		m = sensor.Travel{Since: since, DistanceM: a.forward/scale - w.normal()*f.SigmaM, SigmaM: f.SigmaM}
	case sensor.Turn:
		m = sensor.Turn{Since: since, AngleRad: a.turn + bias*dt + w.normal()*f.SigmaRad, SigmaRad: f.SigmaRad}
	case sensor.Displacement:
		f.EastM += w.normal() * math.Sqrt(f.CovM2[0])
		f.NorthM += w.normal() * math.Sqrt(f.CovM2[2])
		m = f
	case sensor.BodyDisplacement:
		f.ForwardM += w.normal() * f.SigmaForwardM
		f.RightM += w.normal() * f.SigmaRightM
		f.TurnRad += w.normal() * f.SigmaTurnRad
		m = f
	}
	w.put(d, m)
	return nil
}

func (w *world) speed(which int, a gathered, tick int) error {
	d := w.sensors[which].Sensor
	var mps float64
	if dt := w.t - a.sinceS; tick > 0 && dt > 0 {
		mps = a.forward / dt
	} else {
		mps = (w.Path.wayAt(w.t+0.1) - w.Path.wayAt(w.t)) / 0.1
	}
	m := sensor.Speed{MPS: mps}
	if d.Course {
		gamma, _ := w.Space.Frame().Convergence(w.now.at)
		m.HasCourse, m.CourseRad = true, w.now.heading+gamma
	}
	filled, err := w.sigmas(d, m)
	if err != nil {
		return err
	}
	m = filled.(sensor.Speed)
	m.MPS += w.lasting(which) * m.SigmaMPS
	w.put(d, m)
	return nil
}

// lasting is the next value of a sensor's unit noise.
func (w *world) lasting(which int) float64 {
	d := w.sensors[which]
	c := w.Suite.CorrelationS(d.Name, d.Kind)
	if c == 0 {
		return w.normal()
	}
	keep := math.Exp(-2 / (d.hz * c))
	w.ar[which] = keep*w.ar[which] + math.Sqrt(1-keep*keep)*w.normal()
	return w.ar[which]
}

// fix is a satellite fix of the vehicle's antenna.
func (w *world) fix(d sensor.Sensor, sigmaM float64) sensor.Event {
	q := w.truth()
	u := geo.Direction(w.now.heading + w.wander)
	q = q.Add(geo.Point{E: d.Mounting.ForwardM*u.E + d.Mounting.RightM*u.N, N: d.Mounting.ForwardM*u.N - d.Mounting.RightM*u.E})
	if sigmaM == 0 {
		sigmaM = d.Noise.SigmaM
	}
	e, n := w.normal()*sigmaM, w.normal()*sigmaM
	if w.rng != nil {
		switch u, out := w.rng.Float64(), w.outliers(d, sigmaM); {
		case u < out:
			e, n = (w.rng.Float64()-0.5)*10e3, (w.rng.Float64()-0.5)*10e3
		case u < out+d.HeavyProbability:
			e, n = e*d.HeavyFactor, n*d.HeavyFactor
		}
	}
	return sensor.Event{Time: at(w.t), Sensor: d.Name, Measurement: sensor.Fix{
		Position: w.Space.Frame().Inverse(geo.Point{E: q.E + e, N: q.N + n}), SigmaM: sigmaM,
	}}
}

// outliers is the part of fixes that the suite takes for outliers.
func (w *world) outliers(d sensor.Sensor, sigmaM float64) float64 {
	ev := sensor.Event{Time: at(w.t), Sensor: d.Name, Measurement: sensor.Fix{Position: w.Path.lonLat(w.now), SigmaM: sigmaM}}
	ls, err := sensor.Likelihoods(ev, w.context(math.Inf(1), math.Inf(1)))
	if err != nil {
		return 0
	}
	return ls[0].(filter.LinearLikelihood).Noise().FlatWeight
}

// raw is an event as the instrument gives it: with the suite's time offset and
// sign, which Suite.Prepare takes off again.
func raw(d sensor.Sensor, ev sensor.Event) sensor.Event {
	off := sensor.Time(math.Round(d.TimeOffsetS * 1e9))
	ev.Time += off
	sign := 1.0
	if d.Sign < 0 {
		sign = -1
	}
	switch m := ev.Measurement.(type) {
	case sensor.Travel:
		m.Since += off
		m.DistanceM *= sign
		ev.Measurement = m
	case sensor.Turn:
		m.Since += off
		m.AngleRad *= sign
		ev.Measurement = m
	case sensor.Displacement:
		m.Since += off
		ev.Measurement = m
	case sensor.BodyDisplacement:
		m.Since += off
		m.ForwardM, m.RightM, m.TurnRad = m.ForwardM*sign, m.RightM*sign, m.TurnRad*sign
		ev.Measurement = m
	case sensor.Speed:
		m.MPS *= sign
		ev.Measurement = m
	}
	return ev
}

var errNoEvents = errors.New("the route is over before a sensor speaks: it is too short, or the speed too great")
