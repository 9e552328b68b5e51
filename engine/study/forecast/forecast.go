package forecast

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// Options say what is forecast. The zero value is useful.
type Options struct {
	// LimitM is the radius that is wanted; 0: the suite's alert limit.
	LimitM float64
	// SampleM is the distance between the places that are reported; 0: a 400th of
	// the path, at least 5 m.
	SampleM float64
	// StretchM is over how much of the way alike places are told apart; 0: 500 m on
	// roads, on a plane thirty details of the map. SearchM is how well the place is
	// known before it; 0: 1000 m, on a plane as much as the stretch.
	// NoAmbiguity leaves it out.
	StretchM, SearchM float64
	NoAmbiguity       bool
	// Runs is how many drives are simulated and filtered; Seed their seed.
	Runs int
	Seed uint64
	// MaxCells is as in session.Config.
	MaxCells int
	// Progress, if set, is called now and then.
	Progress func(done, total int)
	// Stop, if set, is asked often, also by several goroutines where there are runs:
	// an error of it ends the forecast.
	Stop func() error
}

// Bounds of what is asked for.
const (
	maxSamples   = 20_000
	maxRuns      = 10_000
	maxStretches = 60
)

// Sample is what is expected at a place of the path.
type Sample struct {
	WayM  float64 `json:"way_m"`
	TimeS float64 `json:"time_s"`
	Lon   float64 `json:"lon"`
	Lat   float64 `json:"lat"`
	// Radius95M is the predicted 95 % radius: the median of what the runs' posteriors
	// state, or without runs that of the Cramér–Rao bound.
	Radius95M float64 `json:"radius95_m"`
	// BoundRMSM is the root of the bound's mean squared error, BoundRadius95M and
	// BoundProtectionM the radii that hold 95 % and all but the integrity risk of a
	// normal error with that covariance.
	BoundRMSM        float64 `json:"bound_rms_m"`
	BoundRadius95M   float64 `json:"bound_radius95_m"`
	BoundProtectionM float64 `json:"bound_protection_m"`
	// Runs are the figures of the runs; null without.
	Runs *RunFigures `json:"runs"`
}

// Forecast is what is expected along a path.
type Forecast struct {
	Route     string             `json:"route"`
	LengthM   float64            `json:"length_m"`
	DurationS float64            `json:"duration_s"`
	LimitM    float64            `json:"limit_m"`
	Risk      float64            `json:"integrity_risk"`
	StartM    float64            `json:"start_sigma_m"`
	RatesHz   map[string]float64 `json:"rates_hz"`
	LeftOut   []string           `json:"left_out"`
	Runs      int                `json:"runs"`
	Seed      *uint64            `json:"seed"`
	StretchM  float64            `json:"stretch_m"`
	SearchM   float64            `json:"search_m"`
	// WorstM is the greatest predicted radius, MedianM the median over the path, and
	// Beyond the part of the path where it is beyond the limit; Unprotected the part
	// where the protection radius is: that of the bound, or the median of the runs.
	WorstM      float64 `json:"worst_radius95_m"`
	WorstAtM    float64 `json:"worst_at_m"`
	MedianM     float64 `json:"median_radius95_m"`
	Beyond      float64 `json:"beyond_limit"`
	Unprotected float64 `json:"protection_beyond_limit"`
	// MostAmbiguous is the greatest ambiguity of the stretches, LocateM the median
	// way after which a vehicle is located; null if a half of them are not.
	MostAmbiguous *float64  `json:"most_ambiguous"`
	LocateM       *float64  `json:"locate_median_m"`
	Samples       []Sample  `json:"samples"`
	Alike         []Alike   `json:"stretches"`
	Weak          []Stretch `json:"weak"`
}

func (o *Options) check(p *Plan) error {
	if o.LimitM == 0 {
		o.LimitM = p.Suite.Vehicle.AlertLimitM
	}
	if o.SampleM == 0 {
		o.SampleM = math.Max(5, p.Path.lengthM/400)
	}
	if o.StretchM == 0 {
		o.StretchM = p.stretchM()
	}
	if o.SearchM == 0 {
		o.SearchM = math.Max(1000, o.StretchM)
	}
	for _, c := range []struct {
		what   string
		v      float64
		lo, hi float64
		unit   string
	}{
		{"limit", o.LimitM, 0.01, 1e6, "m"},
		{"distance between samples", o.SampleM, p.Path.lengthM / maxSamples, 1e6, "m"},
		{"stretch", o.StretchM, 1, 1e6, "m"},
		{"search", o.SearchM, 1, 1e6, "m"},
		{"number of runs", float64(o.Runs), 0, maxRuns, ""},
	} {
		if !(c.v >= c.lo && c.v <= c.hi) {
			return fmt.Errorf("the %s is %v %s: it must be from %.3g to %.3g", c.what, c.v, c.unit, c.lo, c.hi)
		}
	}
	return nil
}

// stretchM is over how much of the way places are told apart unless it is said.
func (p *Plan) stretchM() float64 {
	if d, ok := p.Space.(interface{ DetailM() float64 }); ok {
		return 30 * d.DetailM()
	}
	return 500
}

// Of forecasts a plan. A limit that is given takes the place of the suite's alert
// limit, so that a vehicle is located within it.
func Of(p *Plan, o Options) (*Forecast, error) {
	if err := o.check(p); err != nil {
		return nil, err
	}
	with, suite := *p, *p.Suite
	suite.Vehicle.AlertLimitM = o.LimitM
	with.Suite, with.stop = &suite, o.Stop
	p = &with
	stretches := 0
	if !o.NoAmbiguity {
		stretches = len(p.stretches(o))
	}
	steps := 1 + o.Runs + stretches + mostStretches
	told := func(done int) {
		if o.Progress != nil {
			o.Progress(done, steps)
		}
	}
	f := &Forecast{
		LengthM: p.Path.lengthM, DurationS: p.Path.durationS(), LimitM: o.LimitM, Risk: p.Suite.Vehicle.IntegrityRisk,
		StartM: p.Start, RatesHz: p.Rates(), LeftOut: p.LeftOut(), Runs: o.Runs, StretchM: o.StretchM, SearchM: o.SearchM,
	}
	marks, err := p.bound()
	if err != nil {
		return nil, err
	}
	told(1)
	n := max(1, int(math.Ceil(p.Path.lengthM/o.SampleM)))
	ways := make([]float64, n+1)
	for i := range ways {
		ways[i] = p.Path.lengthM * float64(i) / float64(n)
	}
	var all [][]seen
	if o.Runs > 0 {
		f.Seed = &o.Seed
		if all, err = p.runs(ways, o.Runs, o.Seed, o.MaxCells, func(done int) { told(1 + done) }); err != nil {
			return nil, err
		}
	}
	for i, wayM := range ways {
		s := p.sample(wayM, marks)
		if all != nil {
			s.Runs = figures(all, i, o.LimitM)
		}
		if s.Runs != nil {
			s.Radius95M = s.Runs.Radius95P50M
		}
		f.Samples = append(f.Samples, s)
	}
	f.sum()
	if !o.NoAmbiguity {
		if err := f.lookAround(p, o, func(done int) { told(1 + o.Runs + done) }); err != nil {
			return nil, err
		}
	}
	f.Weak = weak(f.Samples, o.LimitM)
	byLength := make([]*Stretch, len(f.Weak))
	for i := range f.Weak {
		byLength[i] = &f.Weak[i]
	}
	slices.SortStableFunc(byLength, func(a, b *Stretch) int { return cmp.Compare(b.ToM-b.FromM, a.ToM-a.FromM) })
	for i, s := range byLength[:min(len(byLength), mostStretches)] {
		if err := p.help(s, f.Samples, o); err != nil {
			return nil, err
		}
		told(1 + o.Runs + stretches + i + 1)
	}
	told(steps)
	return f, nil
}

// sample is what the recursion says at a place.
func (p *Plan) sample(wayM float64, marks []mark) Sample {
	t := p.Path.timeAt(wayM)
	m := markAt(marks, t)
	s := Sample{
		WayM: wayM, TimeS: t,
		BoundRMSM:        math.Sqrt(math.Max(m.cov.EE+m.cov.NN, 0)),
		BoundRadius95M:   radius(m.cov, 0.95),
		BoundProtectionM: radius(m.cov, 1-p.Suite.Vehicle.IntegrityRisk),
	}
	s.Lon, s.Lat = p.Path.lonLat(p.Path.place(wayM)).Degrees()
	s.Radius95M = s.BoundRadius95M
	return s
}

// sum fills the figures of the whole path.
func (f *Forecast) sum() {
	radii := make([]float64, len(f.Samples))
	beyond, unprotected := 0, 0
	for i, s := range f.Samples {
		radii[i] = s.Radius95M
		if s.Radius95M > f.WorstM {
			f.WorstM, f.WorstAtM = s.Radius95M, s.WayM
		}
		if s.Radius95M > f.LimitM {
			beyond++
		}
		switch {
		case s.Runs != nil && (s.Runs.ProtectionP50M == nil || *s.Runs.ProtectionP50M > f.LimitM),
			s.Runs == nil && s.BoundProtectionM > f.LimitM:
			unprotected++
		}
	}
	slices.Sort(radii)
	n := float64(len(radii))
	f.MedianM, f.Beyond, f.Unprotected = quantile(radii, 0.5), float64(beyond)/n, float64(unprotected)/n
}

// stretches is where those begin that are looked at for alike places.
func (p *Plan) stretches(o Options) (fromM []float64) {
	step := math.Max(o.StretchM, p.Path.lengthM/maxStretches)
	for from := 0.0; from < p.Path.lengthM && (from == 0 || p.Path.lengthM-from >= o.StretchM/2); from += step {
		fromM = append(fromM, from)
	}
	return fromM
}

// lookAround looks for alike places, stretch after stretch.
func (f *Forecast) lookAround(p *Plan, o Options, told func(done int)) error {
	var located []float64
	for i, from := range p.stretches(o) {
		a, err := p.alike(from, o.StretchM, o.SearchM, o.LimitM, o.MaxCells)
		if err != nil {
			return err
		}
		f.Alike = append(f.Alike, a)
		m := math.Inf(1)
		if a.LocatedM != nil {
			m = *a.LocatedM
		}
		located = append(located, m)
		if f.MostAmbiguous == nil || a.Ambiguity > *f.MostAmbiguous {
			f.MostAmbiguous = &a.Ambiguity
		}
		told(i + 1)
	}
	slices.Sort(located)
	if m := quantile(located, 0.5); len(located) > 0 && !math.IsInf(m, 1) && m == m {
		f.LocateM = &m
	}
	return nil
}

// At is the sample nearest to a place along the path.
func (f *Forecast) At(wayM float64) Sample {
	i, _ := slices.BinarySearchFunc(f.Samples, wayM, func(s Sample, m float64) int { return cmp.Compare(s.WayM, m) })
	i = min(i, len(f.Samples)-1)
	if i > 0 && wayM-f.Samples[i-1].WayM < f.Samples[i].WayM-wayM {
		i--
	}
	return f.Samples[i]
}
