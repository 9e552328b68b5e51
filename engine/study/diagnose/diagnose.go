package diagnose

import (
	"errors"
	"math"
	"slices"
	"time"

	"leadline/engine/drivefile"
	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
)

// Options say how a diagnosis is made. The zero value is useful.
type Options struct {
	// OpeningS is how much of the drive is tried again: until a sensor has
	// measured motion for so many seconds; 0: 300. A vehicle that stands tells
	// little.
	OpeningS float64
	// MaxEvents cuts the opening short; 0: 20 000.
	MaxEvents int
	// MaxCells bounds the cells or Gaussians of the belief, points of a plane
	// as well, of which a session would have more; 0: 10 000, or what the
	// configuration says if that is less.
	MaxCells int
	// Grids are norths besides the true one that directions may count from.
	Grids []Grid
	// Each runs f for 0 to n-1, at once if it likes; nil: one after the other.
	// No result depends on it.
	Each func(n int, f func(i int))
	// Stop, if set, is asked before each measurement, by many at once; its error ends
	// the diagnosis and comes back from Run.
	Stop func() error
	// Beside is the record of the drive's replay where the diagnosis is made
	// unasked: it then takes at most sixty times as long (budget.go), and no
	// more than a minute of one core in any case, and as long again for the
	// finalists (finals.go). It tries less of the drive with the others if it must.
	Beside *Record
	// Progress, if set, is called now and then, one call at a time, and at the
	// end with done = total; the steps do not take equally long.
	Progress func(done, total int)
}

// Grid is a map grid and its convergence at a place: by how much its north is
// clockwise of the true one.
type Grid struct {
	Name        string
	Convergence func(geo.LonLat) float64
}

// Report is what a diagnosis finds.
type Report struct {
	OpeningS     float64 `json:"opening_s"`
	Measurements int     `json:"measurements"`
	// CutShort: with all mistakes more of the drive would have taken too long; the
	// best few were tried on all of the opening.
	CutShort bool `json:"cut_short"`
	// Tried is how many mistakes were tried, each value that was looked for
	// counted; NeededNats the gain from which one is named (see verdict.go).
	Tried      int     `json:"tried"`
	NeededNats float64 `json:"needed_nats"`
	// Fits is how the log fits as it stands.
	Fits       []Fit       `json:"fits"`
	Candidates []Candidate `json:"candidates"` // best first
	// BaseGivenUpAfter is when the log as it stands was given up, being far
	// behind: gains are then at least what they say.
	BaseGivenUpAfter *float64 `json:"log_given_up_after_s"`
	Verdict          string   `json:"verdict"`
	TookS            float64  `json:"took_s"`
}

// Candidate is a mistake that was tried.
type Candidate struct {
	Mistake string  `json:"mistake"`
	Sensor  string  `json:"sensor,omitempty"`
	Value   float64 `json:"value,omitempty"`
	Unit    string  `json:"unit,omitempty"`
	// GainNats is by how much the log evidence of the opening's measurements
	// grows if it is undone; of one that was given up, until then.
	GainNats     float64  `json:"gain_nats"`
	GivenUpAfter *float64 `json:"given_up_after_s"`
	// Suspect says what makes the log suspect even though it is undone: it then
	// does not explain the log and is not named.
	Suspect []string `json:"suspect,omitempty"`
	Named   bool     `json:"named"`
	Remedy  string   `json:"remedy,omitempty"`

	mistake  *Mistake
	eligible bool // it came to the end, and is large enough for a mistake
}

// Text names the mistake with its sensor and value.
func (k *Candidate) Text() string { return k.mistake.String() }

// ErrNoMeasurements is returned by Run for a drive that holds none.
var ErrNoMeasurements = errors.New("the drive holds no measurement")

// Run tries the opening of a drive again with each usual mistake undone. An
// error is about the configuration or the drive as a whole.
func Run(d *drivefile.Drive, c session.Config, o Options) (*Report, error) {
	began := time.Now()
	k, err := newCourse(d, c, o)
	if err != nil {
		return nil, err
	}
	r := &Report{}
	err = k.tryAll(r, o)
	if stopped := k.stop(); stopped != nil {
		return nil, stopped
	}
	if err != nil {
		return nil, err
	}
	end := k.rounds[len(k.rounds)-1]
	r.OpeningS, r.CutShort = end.Seconds(k.start), k.cutShort()
	for _, ev := range k.events {
		if ev.Time <= end {
			r.Measurements++
		}
	}
	r.TookS = time.Since(began).Seconds()
	return r, nil
}

func newCourse(d *drivefile.Drive, c session.Config, o Options) (*course, error) {
	events := replay.Ordered(d.Events)
	if len(events) == 0 {
		return nil, ErrNoMeasurements
	}
	c.Vehicle, c.Start = d.Header.Vehicle, replay.Start(d.Header.Start)
	if o.OpeningS == 0 {
		o.OpeningS = 300
	}
	if o.MaxEvents == 0 {
		o.MaxEvents = 20_000
	}
	if o.MaxCells == 0 {
		o.MaxCells = 10_000
		if c.MaxCells > 0 {
			o.MaxCells = min(o.MaxCells, c.MaxCells)
		}
	}
	c.MaxCells = o.MaxCells
	if pointsAlone(c) {
		c.MaxCells = max(1, c.MaxCells/session.PointsPerGaussian)
	}
	c.Suite = onRoads(c)
	k := &course{config: c, each: o.Each, start: events[0].Time, tick: func(int, float64) {}, budget: budgetOf(o.Beside)}
	for _, ev := range events {
		if since, ok := sensor.Since(ev.Measurement); ok {
			k.start = min(k.start, since)
		}
	}
	if k.stop = o.Stop; k.stop == nil {
		k.stop = func() error { return nil }
	}
	if k.each == nil {
		k.each = func(n int, f func(int)) {
			for i := range n {
				f(i)
			}
		}
	}
	k.suite, _ = suiteOf(c)
	n := opening(events[:min(len(events), o.MaxEvents)], o.OpeningS)
	k.events = events[:n:n]
	for i := range k.events {
		if ev := &k.events[i]; ev.Sensor == "" {
			ev.Sensor = ev.Measurement.Kind()
		}
	}
	k.voices = voices(k.events)
	end := k.events[n-1].Time
	for _, part := range []sensor.Time{32, 16, 8, 4, 2, 1} {
		if t := k.start + (end-k.start)/part; len(k.rounds) == 0 || t > k.rounds[len(k.rounds)-1] {
			k.rounds = append(k.rounds, t)
		}
	}
	k.rounds = slices.Compact(k.rounds)
	return k, nil
}

// movingMPS is the speed from which a vehicle moves.
const movingMPS = 0.2

// opening is how many events a drive's opening has.
func opening(events []sensor.Event, seconds float64) int {
	moved := map[string]float64{} // seconds, by sensor
	last := map[string]sensor.Time{}
	most := 0.0
	for i, ev := range events {
		if most >= seconds {
			return i
		}
		var d float64
		since := last[ev.Sensor]
		switch m := ev.Measurement.(type) {
		case sensor.Travel:
			d, since = m.DistanceM, m.Since
		case sensor.Displacement:
			d, since = math.Hypot(m.EastM, m.NorthM), m.Since
		case sensor.BodyDisplacement:
			d, since = m.ForwardM, m.Since
		case sensor.Speed:
			if since != 0 {
				d = m.MPS * ev.Time.Seconds(since)
			}
			last[ev.Sensor] = ev.Time
		default:
			continue
		}
		if dt := ev.Time.Seconds(since); math.Abs(d) > movingMPS*dt {
			moved[ev.Sensor] += dt
			most = math.Max(most, moved[ev.Sensor])
		}
	}
	return len(events)
}

// onRoads is the suite of a configuration for a vehicle that stays on the map's
// roads and is moved by nobody: whoever may be anywhere explains every log a
// little, right or wrong, and hides what a mistake costs.
func onRoads(c session.Config) *sensor.Suite {
	suite, _ := suiteOf(c)
	never, always := new(float64), *suite
	always.Vehicle.OffMapPerM = never
	always.Vehicle.LostPerS, always.Vehicle.MovedPerS = never, never
	return &always
}

// pointsAlone reports whether a session's belief is points of a plane.
func pointsAlone(c session.Config) bool {
	if _, lines := c.Space.(filter.LineSpace); lines {
		return false
	}
	suite := c.Suite
	if suite == nil {
		suite = sensor.Default(2)
	}
	return len(suite.For(2).Quantities(2)) == 0
}
