package sensor

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// one of every nuisance, on the sensors that they are of.
func everyNuisance() *Suite {
	n := func(name string, drift float64) Nuisance {
		return Nuisance{Name: name, Sigma: 0.1, DriftPerSqrtS: drift}
	}
	zero := 0.0
	return &Suite{Sensors: []Sensor{
		{Name: "gyro", Kind: KindTurn, Nuisances: []Nuisance{n(NuisanceGyroBias, 0.01)}},
		{Name: "alt", Kind: KindClearance, OutlierProbability: &zero, Nuisances: []Nuisance{n(NuisanceAltimeterOffset, 0.02)}},
		{Name: "baro", Kind: KindBarometer, OutlierProbability: &zero, CorrelationS: &zero, Nuisances: []Nuisance{n(NuisanceBarometerOffset, 0.03)}},
		{Name: "sounder", Kind: KindSounding, OutlierProbability: &zero, Nuisances: []Nuisance{n(NuisanceTide, 0.04), n(NuisanceSoundSpeed, 1e-3)}},
		{Name: "ins", Kind: KindDisplacement, Nuisances: []Nuisance{n(NuisanceVelocityEast, 0.05), n(NuisanceVelocityNorth, 0.05), n(NuisanceAzimuth, 0.06)}},
	}}
}

// Heights say what they are the sum of: the residual at a place for known
// nuisances, and rows that are its derivatives.
func TestNuisancesOfHeights(t *testing.T) {
	w := newWorld()
	at := geo.Point{E: 400, N: 150}
	h, _, _ := w.height(at.E, at.N)
	const offset, baro, tide, scale = 7.0, -3.0, 1.25, 0.01
	value := map[string]float64{
		filter.East: at.E, filter.North: at.N, filter.Along: 120, filter.Heading: 0.4, filter.GyroBias: 1e-3,
		filter.AltimeterOffset: offset, filter.BarometerOffset: baro, filter.Tide: tide, filter.SoundSpeedScale: scale,
	}
	cols := w.road(filter.WantPosition|filter.WantHeight, []float64{120})
	for _, c := range []struct {
		dim int
		ev  Event
		row map[string]float64
	}{
		{2, Event{Sensor: "alt", Measurement: Clearance{300, 300 + h + offset, 3}}, map[string]float64{filter.AltimeterOffset: 1}},
		{1, Event{Sensor: "alt", Measurement: Clearance{300, 300 + cols.Height[0] + offset, 3}}, map[string]float64{filter.AltimeterOffset: 1}},
		{1, Event{Sensor: "baro", Measurement: Barometer{AltitudeM: cols.Height[0] + baro, SigmaM: 3}}, map[string]float64{filter.BarometerOffset: 1}},
		// The sea floor at a height of -50 m: 51.25 m of water, of which the
		// transducer is 1.25 m below the surface; 1 % fast sound makes 50 m of 49.5.
		{
			2,
			Event{Sensor: "sounder", Measurement: Sounding{DepthBelowTransducerM: (1.25 + 200 - h - 1.25) / 1.01, TransducerDepthM: 1.25 - 200, SigmaM: 1}},
			map[string]float64{filter.Tide: -1, filter.SoundSpeedScale: (200 - h) / 1.01},
		},
		// Another altimeter has no offset.
		{2, Event{Sensor: "other", Measurement: Clearance{300, 300 + h, 3}}, nil},
	} {
		s := everyNuisance()
		if c.ev.Sensor == "sounder" {
			// Eight quantities are the most that a belief has.
			s.Sensors = s.Sensors[:4]
		} else {
			s.Sensors = s.Sensors[:3]
		}
		ctx := w.context(c.dim, s.Quantities(c.dim), at)
		ctx.Suite = s.For(c.dim)
		ls, err := Likelihoods(c.ev, ctx)
		if err != nil {
			t.Fatal(err)
		}
		l := ls[0].(filter.LinearLikelihood)
		k := len(ctx.Quantities)
		x := make([]float64, k)
		for i, q := range ctx.Quantities {
			x[i] = value[q.Name]
		}
		look := func(x []float64) *filter.Terms {
			at := w.spot(l.Wants(), geo.Point{E: x[0], N: x[1]})
			if c.dim == 1 {
				at = w.road(l.Wants(), x[:1])
			}
			tm := terms(1, 1, k)
			l.Linearize(tm, at, ctx.Quantities, x)
			return tm
		}
		base := look(x)
		if !near(base.Residual[0], 0, 1e-9) {
			t.Errorf("dim %d, %s: residual %v at the truth", c.dim, c.ev.Sensor, base.Residual[0])
		}
		for i, q := range ctx.Quantities {
			up, down := append([]float64(nil), x...), append([]float64(nil), x...)
			up[i] += 1e-3
			down[i] -= 1e-3
			want := -(look(up).Residual[0] - look(down).Residual[0]) / 2e-3
			if !near(base.Row[i], want, 1e-6) {
				t.Errorf("dim %d, %s: row of %s is %v, differences say %v", c.dim, c.ev.Sensor, q.Name, base.Row[i], want)
			}
			if by := c.row[q.Name]; i >= c.dim && !near(base.Row[i], by, 1e-9) {
				t.Errorf("dim %d, %s: row of %s is %v, want %v", c.dim, c.ev.Sensor, q.Name, base.Row[i], by)
			}
		}
	}
}

// Signs and sizes: what each error adds to a motion is taken off again.
func TestErrorsOfMotion(t *testing.T) {
	s := everyNuisance()
	move := func(dim int, pick int, x map[string]float64, events ...Event) map[string]float64 {
		t.Helper()
		one := &Suite{Sensors: append([]Sensor{s.Sensors[pick]}, Sensor{Name: "odo", Kind: KindTravel})}
		if dim == 2 && pick == 4 {
			one.Sensors = one.Sensors[:1]
		}
		qs := one.Quantities(dim)
		st, _ := step(t, one.For(dim), 2*second, qs, dim, Pose{}, events...)
		k := len(qs)
		mean := make([]float64, k)
		for i, q := range qs {
			mean[i] = x[q.Name]
		}
		add, f := append([]float64(nil), st.Add...), modelOf(st).f
		if st.Local != nil {
			la, lf := make([]float64, dim), make([]float64, dim*k)
			st.Local.Local(la, lf, newWorld().spot(filter.WantPosition, geo.Point{E: mean[0], N: mean[1]}), mean, make([]float64, k*(k+1)/2))
			copy(add, la)
			for d := range dim {
				f[d] = lf[d*k : d*k+k]
			}
		}
		out := map[string]float64{}
		for i, q := range qs {
			out[q.Name] = add[i]
			for j := range k {
				out[q.Name] += f[i][j] * mean[j]
			}
		}
		return out
	}
	// A gyro that is 0.01 rad/s too fast for 2 s.
	turn, odo := event(2*second, "gyro", Turn{0, 0.32, 1e-3}), event(2*second, "odo", Travel{0, 10, 0.1})
	for dim := 1; dim <= 2; dim++ {
		x := map[string]float64{filter.GyroBias: 0.01, filter.Heading: 0.5}
		got := move(dim, 0, x, turn, odo)
		if !near(got[filter.Heading], 0.8, 1e-12) {
			t.Errorf("dim %d: heading %v, want 0.8", dim, got[filter.Heading])
		}
		// On the plane it goes by the middle of the way turned: 0.65.
		if dim == 2 && (!near(got[filter.East], 10*math.Sin(0.65), 1e-9) || !near(got[filter.North], 10*math.Cos(0.65), 1e-9)) {
			t.Errorf("went to %v, %v", got[filter.East], got[filter.North])
		}
	}
	// The true way is (30, 40) m in 2 s; the unit's azimuth is 0.02 rad short of
	// it and its velocity (0.3, -0.2) m/s too large. To first order in the turn.
	const delta = 0.02
	e, n := 30-delta*40, 40+delta*30
	x := map[string]float64{filter.VelocityErrorEast: 0.3, filter.VelocityErrorNorth: -0.2, filter.AzimuthError: delta}
	got := move(2, 4, x, event(2*second, "ins", Displacement{0, e + 0.6, n - 0.4, [3]float64{1, 0, 1}}))
	if !near(got[filter.East], 30, 50*delta*delta+0.6*delta) || !near(got[filter.North], 40, 50*delta*delta+0.6*delta) {
		t.Errorf("went to %v, %v, want 30, 40", got[filter.East], got[filter.North])
	}
	if !near(got[filter.East], e+delta*(n-0.4), 1e-9) || !near(got[filter.North], n-delta*(e+0.6), 1e-9) {
		t.Errorf("went to %v, %v: not the linear form", got[filter.East], got[filter.North])
	}
	// A second unit without errors halves them.
	got = move(2, 4, map[string]float64{filter.VelocityErrorEast: 0.3},
		event(2*second, "ins", Displacement{0, 30.6, 40, [3]float64{1, 0.2, 1}}), event(2*second, "log", Displacement{0, 30, 40, [3]float64{1, 0.2, 1}}))
	if !near(got[filter.East], 30, 1e-9) || !near(got[filter.North], 40, 1e-9) {
		t.Errorf("two units: %v, %v", got[filter.East], got[filter.North])
	}
}

// Each nuisance is a quantity where its sensor describes it, in the filter's
// units, and is told in the suite's.
func TestNuisanceUnits(t *testing.T) {
	all := everyNuisance()
	seen := map[string]bool{}
	for _, dim := range []int{1, 2} {
		for i, d := range all.Sensors {
			one := &Suite{Sensors: all.Sensors[i : i+1]}
			if err := one.Validate(); err != nil {
				t.Errorf("%s: %v", d.Name, err)
			}
			qs := one.Quantities(dim)
			for _, n := range d.Nuisances {
				k, _ := findNuisance(func(k nuisanceKind) bool { return k.name == n.Name })
				i := filter.Index(qs, k.quantity)
				here := dim == 1 && k.roads || dim == 2 && k.plane
				if here != (i >= 0) || here != (one.CheckSpace(dim) == nil) {
					t.Errorf("dim %d: %s among %v, %v", dim, n.Name, qs, one.CheckSpace(dim))
				}
				if i < 0 {
					continue
				}
				seen[n.Name] = true
				name, unit, sigma, drift := InUnits(k.quantity, math.Sqrt(qs[i].PriorVar), math.Sqrt(qs[i].DriftVar))
				if name != n.Name || !near(sigma, n.Sigma, 1e-12) || !near(drift, n.DriftPerSqrtS, 1e-12) {
					t.Errorf("%s: told as %s, %v, %v", n.Name, name, sigma, drift)
				}
				if suffix := map[string]string{"m": "_m", "deg": "_deg", "deg/s": "_dps", "m/s": "_mps", "": "_scale"}[unit]; !strings.HasSuffix(name, suffix) {
					t.Errorf("%s is in %q", name, unit)
				}
			}
		}
	}
	for _, name := range NuisanceNames() {
		if !seen[name] && name != NuisanceHeading && name != NuisanceOdometerScale {
			t.Errorf("%s was never estimated", name)
		}
	}
}

// Nuisances that contradict each other or the space name their field.
func TestContradictingNuisances(t *testing.T) {
	all := everyNuisance()
	for _, c := range []struct {
		name string
		of   func() *Suite
		dim  int
		want []string
	}{
		{"more than the filter keeps", func() *Suite { return all }, 0, []string{"sensors[4].nuisances[2].name", "10 quantities", "at most 8"}},
		{"one velocity error", func() *Suite {
			d := all.Sensors[4]
			d.Nuisances = d.Nuisances[1:]
			return &Suite{Sensors: []Sensor{d}}
		}, 0, []string{"sensors[0].nuisances[0].name", "go together"}},
		{"barometer over heights", func() *Suite { return &Suite{Sensors: all.Sensors[2:3]} }, 2, []string{"sensors[0].nuisances[0].name", "roads alone"}},
		{"velocity errors on roads", func() *Suite { return &Suite{Sensors: all.Sensors[4:]} }, 1, []string{"sensors[0].nuisances[0].name", "height maps alone"}},
	} {
		err := c.of().Validate()
		if c.dim > 0 {
			if err != nil {
				t.Errorf("%s: %v", c.name, err)
			}
			err = c.of().CheckSpace(c.dim)
		}
		for _, want := range c.want {
			if !strings.Contains(fmt.Sprint(err), want) {
				t.Errorf("%s: %v lacks %q", c.name, err, want)
			}
		}
	}
}
