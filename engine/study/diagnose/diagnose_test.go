package diagnose

import (
	"errors"
	"fmt"
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"leadline/engine/sensor"
	"leadline/fixtures/accept"
)

// diagnosed plants a mistake in a scene and tries to find it.
func diagnosed(t testing.TB, p *plant, seed uint64) *Report {
	t.Helper()
	s := p.scene(t, seed)
	if p.spoil != nil {
		for i := range s.drive.Events {
			p.spoil(&s.drive.Events[i])
		}
	}
	o := Options{MaxCells: 1000, Each: accept.Each}
	if !accept.Long() {
		o.OpeningS = p.shortS
	}
	if p.grid != nil {
		o.Grids = []Grid{*p.grid}
	}
	r, err := Run(s.drive, s.config, o)
	return must(t, r, err)
}

// found reports whether the planted mistake is among those that a report
// names, the first of them, and what else it names.
func (p *plant) found(r *Report) bool {
	for _, k := range r.Candidates {
		if k.Named && k.Mistake == p.want && math.Abs(k.Value-p.value) <= p.within {
			return true
		}
	}
	return false
}

// estimated reports whether what takes the planted mistake upon itself is said to
// end beyond its prior.
func (p *plant) estimated(t *testing.T, seed uint64) bool {
	f, _ := looked(t, spoiled(p.scene(t, seed), p.spoil))
	return slices.ContainsFunc(f.Beyond, func(b Beyond) bool { return b.Name == p.absorbed })
}

func named(r *Report) (out []string) {
	for _, k := range r.Candidates {
		if k.Named {
			out = append(out, fmt.Sprintf("%s %+.0f", k.Text(), k.GainNats))
		}
	}
	return out
}

// TestFindsPlantedMistakes plants each usual mistake in simulated logs. The
// diagnosis knows the log and the map alone. In the short form some of each sort,
// once, within an opening that is enough for them; in the long one all ten times,
// of which nine must be named.
func TestFindsPlantedMistakes(t *testing.T) {
	seeds, least := 1, 1
	if accept.Long() {
		seeds, least = 10, 9
	}
	for i := range plants {
		p := &plants[i]
		if !accept.Long() && p.shortS == 0 {
			continue
		}
		t.Run(p.name, func(t *testing.T) {
			hits, alone := 0, 0
			first := uint64(1)
			if !accept.Long() {
				first += uint64(i % 2)
			}
			for seed := first; seed < first+uint64(seeds); seed++ {
				r := diagnosed(t, p, seed)
				names := named(r)
				if p.found(r) || p.absorbed != "" && p.estimated(t, seed) {
					hits++
					if len(names) == 1 {
						alone++
					}
				} else {
					t.Logf("seed %d: %s", seed, r.Verdict)
				}
				if accept.Long() {
					t.Logf("seed %d: %s", seed, strings.Join(names, "; "))
				}
			}
			what := "named"
			if p.absorbed != "" {
				what = "named, or " + p.absorbed + " said to be beyond its prior,"
			}
			t.Logf("%-32s %s in %d of %d, alone in %d", p.name, what, hits, seeds, alone)
			if hits < least {
				t.Errorf("named in %d of %d, want %d", hits, seeds, least)
			}
		})
	}
}

// TestFactorsNearAUnit: a factor that fits better speaks against a unit, but not where
// it is the unit's to within what a sensor's own scale may be off: then the unit is
// named, and what is left of it said.
func TestFactorsNearAUnit(t *testing.T) {
	vs := voices([]sensor.Event{{Sensor: "odo", Measurement: sensor.Travel{}}})
	all := catalogue(vs)
	feet := &all[slices.IndexFunc(all, func(m Mistake) bool { return m.Name == "distances in feet, taken as metres" })]
	s := &factorScans(vs, sensor.Default(1))[0]
	for _, c := range []struct {
		factor, gain float64 // beyond the unit's
		named        bool
		says         string
	}{
		{0.317, 40, true, "a factor of 1.04"},
		{0.3048 * 0.95, 40, true, "a factor of 0.95"},
		{0.317, 2, true, "multiply by 0.3048"},
		{0.33, 40, false, "×0.33"},
		{0.28, 40, false, "×0.28"},
		{0.33, 2, true, "multiply by 0.3048"},
	} {
		free := s.named(math.Log(c.factor), 0)
		r := &Report{NeededNats: needed(100), Candidates: []Candidate{
			{GainNats: 200, eligible: true, Remedy: feet.Remedy, mistake: feet},
			{GainNats: 200 + c.gain, eligible: true, Value: c.factor, mistake: &free},
		}}
		r.challenge()
		r.judge()
		named := slices.ContainsFunc(r.Candidates, func(k Candidate) bool { return k.Named })
		if named != c.named || !strings.Contains(r.Verdict, c.says) {
			t.Errorf("×%g by %g nats: %s", c.factor, c.gain, r.Verdict)
		}
	}
}

// TestKeepsWhoHasNotBegun: a mistake of which nothing has come yet is the log as it
// stands, and is not given up before that is.
func TestKeepsWhoHasNotBegun(t *testing.T) {
	of := func(string, string) bool { return true }
	one := func(begun bool, nats float64) *entrant {
		return &entrant{mistake: &Mistake{of: of}, run: &run{begun: begun}, nats: []float64{nats}}
	}
	log := &entrant{mistake: &Mistake{}, run: &run{}, nats: []float64{-100}}
	best, late, behind := one(true, 0), one(false, -100), one(true, -100)
	if got := keep([]*entrant{log, best, late, behind}); !slices.Equal(got, []*entrant{log, best, late}) {
		t.Errorf("%d of four are kept", len(got))
	}
	log.nats[0], late.nats[0] = -301, -301
	if got := keep([]*entrant{log, best, late}); !slices.Equal(got, []*entrant{best}) {
		t.Errorf("%d of three are kept", len(got))
	}
}

// TestNamesNothingUnspoiled: in logs without a mistake none is named.
func TestNamesNothingUnspoiled(t *testing.T) {
	seeds := 1
	if accept.Long() {
		seeds = 20
	}
	for i := range unspoiled {
		p := &unspoiled[i]
		if !accept.Long() && p.shortS == 0 {
			continue
		}
		t.Run(p.name, func(t *testing.T) {
			wrong, most := 0, math.Inf(-1)
			for seed := uint64(1); seed <= uint64(seeds); seed++ {
				r := diagnosed(t, p, seed)
				for _, k := range r.Candidates {
					if k.GivenUpAfter == nil {
						most = math.Max(most, k.GainNats)
					}
				}
				if names := named(r); len(names) > 0 {
					wrong++
					t.Logf("seed %d: %s", seed, strings.Join(names, "; "))
				}
				for _, f := range r.Fits {
					if f.Bad {
						t.Errorf("seed %d: %s fits badly", seed, f.Sensor)
					}
				}
			}
			t.Logf("%-32s something named in %d of %d, greatest gain %.1f nats", p.name, wrong, seeds, most)
			if wrong > seeds/20 {
				t.Errorf("something is named in %d of %d", wrong, seeds)
			}
		})
	}
}

// TestNamesNothingUnlisted: of a log with a mistake that is not tried, none is
// named in nine of ten, however much better it fits with one of the others
// undone, or not without what the plant wants to be said beside it.
func TestNamesNothingUnlisted(t *testing.T) {
	seeds, most := 1, 0
	if accept.Long() {
		seeds, most = 10, 1
	}
	for i := range unlisted {
		p := &unlisted[i]
		if !accept.Long() && p.shortS == 0 {
			continue
		}
		t.Run(p.name, func(t *testing.T) {
			wrong := 0
			for seed := uint64(1); seed <= uint64(seeds); seed++ {
				r := diagnosed(t, p, seed)
				t.Logf("seed %d: %s", seed, r.Verdict)
				if names := named(r); len(names) > 0 && (p.want == "" || !strings.Contains(r.Verdict, p.want)) {
					wrong++
				} else if len(names) == 0 && !strings.HasPrefix(r.Verdict, "none of the usual mistakes") {
					t.Errorf("seed %d: the verdict does not say so", seed)
				}
			}
			if wrong > most {
				t.Errorf("something is named in %d of %d, %d may be", wrong, seeds, most)
			}
		})
	}
}

// TestSameInAnyOrder: what runs at once, and in which order, changes nothing.
func TestSameInAnyOrder(t *testing.T) {
	p := plants[slices.IndexFunc(plants, func(p plant) bool { return strings.Contains(p.name, "swapped") })]
	var reports []*Report
	for _, each := range []func(int, func(int)){
		nil,
		accept.Each,
		func(n int, f func(int)) {
			for i := n - 1; i >= 0; i-- {
				f(i)
			}
		},
	} {
		s := p.scene(t, 3)
		for i := range s.drive.Events {
			p.spoil(&s.drive.Events[i])
		}
		r, err := Run(s.drive, s.config, Options{MaxCells: 1000, OpeningS: 30, Each: each})
		must(t, r, err)
		r.TookS = 0
		for i := range r.Candidates {
			r.Candidates[i].mistake = nil
		}
		reports = append(reports, r)
	}
	if len(reports[0].Candidates) < 10 {
		t.Fatalf("only %d candidates", len(reports[0].Candidates))
	}
	for _, r := range reports[1:] {
		if !reflect.DeepEqual(r, reports[0]) {
			t.Error("the report depends on the order of the runs")
		}
	}
}

// TestStopped stops a diagnosis at many places of its way: its error comes back, and
// nothing more is taken but what was begun.
func TestStopped(t *testing.T) {
	asked, most := 0, math.MaxInt
	stop := errors.New("stopped")
	s := flyer(t, 1)
	run := func() error {
		asked = 0
		_, err := Run(s.drive, s.config, Options{MaxCells: 300, OpeningS: 20, Stop: func() error {
			if asked++; asked > most {
				return stop
			}
			return nil
		}})
		return err
	}
	if err := run(); err != nil {
		t.Fatal(err)
	}
	all := asked
	for i := range 6 {
		most = all * i / 6
		if err := run(); !errors.Is(err, stop) {
			t.Fatalf("after %d of %d: %v", most, all, err)
		}
		if asked > most+all/10 {
			t.Errorf("after %d of %d: asked %d times more", most, all, asked-most)
		}
	}
	if _, err := Explain(s.drive, s.config, s.drive.Time+5e9, 1, func() error { return stop }); !errors.Is(err, stop) {
		t.Errorf("an explanation: %v", err)
	}
}

// TestNoMeasurements: a drive without any is an error.
func TestNoMeasurements(t *testing.T) {
	s := flyer(t, 1)
	s.drive.Events = nil
	if _, err := Run(s.drive, s.config, Options{}); err == nil {
		t.Error("a drive without measurements is diagnosed")
	}
	if _, err := Explain(s.drive, s.config, 0, 1, nil); err == nil {
		t.Error("a drive without measurements is explained")
	}
}

// TestNeeded: by Bayes' rule, the gain that is needed leaves odds of 99 to 1
// for a mistake against none, whatever the number tried.
func TestNeeded(t *testing.T) {
	for _, tried := range []int{1, 8, 377, 10000} {
		prior := 0.01 / float64(tried) // of each mistake
		odds := prior * math.Exp(needed(tried)) / 0.99
		if math.Abs(odds-99) > 1e-6 {
			t.Errorf("%d tried: the odds are %v, want 99", tried, odds)
		}
	}
}

// TestOpening: the opening ends when a sensor has measured so many seconds of
// motion; standing does not count.
func TestOpening(t *testing.T) {
	travel := func(s, d float64) sensor.Event {
		at := sensor.Time(s * 1e9)
		return sensor.Event{Time: at, Sensor: "odo", Measurement: sensor.Travel{Since: at - 1e9, DistanceM: d}}
	}
	speed := func(s, v float64) sensor.Event {
		return sensor.Event{Time: sensor.Time(s * 1e9), Sensor: "log", Measurement: sensor.Speed{MPS: v}}
	}
	for _, c := range []struct {
		name    string
		events  []sensor.Event
		seconds float64
		want    int
	}{
		{"moves", []sensor.Event{travel(1, 5), travel(2, 5), travel(3, 5)}, 2, 2},
		{"goes backward", []sensor.Event{travel(1, -5), travel(2, -5), travel(3, 5)}, 2, 2},
		{"stands first", []sensor.Event{travel(1, 0), travel(2, 0.1), travel(3, 5), travel(4, 5), travel(5, 5)}, 2, 4},
		{"stands", []sensor.Event{travel(1, 0), travel(2, 0), travel(3, 0)}, 2, 3},
		{"is short", []sensor.Event{travel(1, 5)}, 2, 1},
		{"by speeds, the first of which covers nothing", []sensor.Event{speed(1, 3), speed(2, 3), speed(3, 3), speed(4, 3)}, 2, 3},
		{"two sensors", []sensor.Event{speed(1, 3), travel(1, 5), speed(2, 3), travel(2, 5), speed(3, 3), travel(3, 5)}, 2, 4},
		{"no motion at all", []sensor.Event{{Sensor: "fix", Measurement: sensor.Fix{}}, {Sensor: "fix", Measurement: sensor.Fix{}}}, 2, 2},
	} {
		if got := opening(c.events, c.seconds); got != c.want {
			t.Errorf("%s: %d events, want %d", c.name, got, c.want)
		}
	}
}

// TestRefusedMotions: where the log as it stands has motions that no vehicle
// makes, it is compared all the same, and what mends them is named.
func TestRefusedMotions(t *testing.T) {
	s := plainCar(t, 1)
	s.config.Suite = &sensor.Suite{Vehicle: sensor.Vehicle{MaxSpeedMPS: 0.1}}
	most := 0.0
	for i := range s.drive.Events {
		if m, ok := s.drive.Events[i].Measurement.(sensor.Travel); ok {
			m.DistanceM *= 10
			most = math.Max(most, m.DistanceM)
			s.drive.Events[i].Measurement = m
		}
	}
	if most < 10*0.1+100 { // session refuses from there on
		t.Fatalf("at most %v m in a second are not refused", most)
	}
	r, err := Run(s.drive, s.config, Options{MaxCells: 500, Each: accept.Each})
	must(t, r, err)
	for _, k := range r.Candidates {
		if mends := k.Mistake == "distances ten times too large"; k.Named != mends {
			t.Errorf("%s: named %v, given up after %v, gain %v", k.Text(), k.Named, k.GivenUpAfter, k.GainNats)
		}
	}
}
