package diagnose

import (
	"fmt"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// Findings are what a replay says of itself.
type Findings struct {
	// Reasons are what speaks for a mistake, in words; none if the run is
	// neither contradicted nor unlocated nor wrong.
	Reasons []string `json:"reasons"`
	// Misplaced: the map is of the wrong kind, so that no mistake need be tried.
	Misplaced bool `json:"misplaced"`
	// Fits say how each sensor's measurements fit the run.
	Fits []Fit `json:"fits"`
	// Beyond are what was estimated along the way and left its prior.
	Beyond []Beyond `json:"beyond_prior"`
}

// Beyond is a nuisance that ended more than beyondSigmas of its prior away
// from where it began: it may have taken a mistake upon itself.
type Beyond struct {
	Name        string  `json:"name"`
	Mean        float64 `json:"mean"`
	Sigma       float64 `json:"sigma"`
	PriorMean   float64 `json:"prior_mean"`
	PriorSigma  float64 `json:"prior_sigma"` // with its drift until then
	PriorSigmas float64 `json:"prior_sigmas"`
	Suggests    string  `json:"suggests"`
}

const beyondSigmas = 3.0

// A run is wrong if the truth lies outside the 99 % radius for a fifth of the
// posteriors that say located: twenty times as often as it may.
const wrongShare = 0.2

// A run has strayed if it is off the map for half of its posteriors: car parks
// and missing roads are left again.
const strayedShare = 0.5

// A sensor's measurements are refused if a tenth of them are.
const refusedShare = 0.1

// Look reads a replay. record watched it (replay.Options.Watch); truth may be
// empty; c is what it ran with. What no mistake that is
// undone can cure comes first.
func Look(res *replay.Result, record *Record, truth []score.Truth, events []sensor.Event, c session.Config) (*Findings, error) {
	f := &Findings{Reasons: []string{}, Fits: record.fits(math.MinInt64), Beyond: []Beyond{}}
	var o outcomes
	var isolated []string
	seen := map[monitor.Key]bool{}
	for _, p := range res.Posteriors {
		for _, a := range p.Alarms {
			if a.Kind == monitor.Isolated && !seen[a.Key] {
				seen[a.Key] = true
				isolated = append(isolated, fmt.Sprintf("%s (%s) disagrees with the others and is isolated from %.0f s after the start on", a.Key.Sensor, a.Key.Kind, sensor.Time(a.RaisedNS).Seconds(res.Start)))
			}
		}
		o = append(o, outcome{p.TimeNS, p.Status})
	}
	f.Reasons = append(f.Reasons, o.suspicions(res.Start, math.MinInt64)...)
	if text := o.strayed(); text != "" {
		f.Reasons = append(f.Reasons, text)
	}
	f.Reasons = append(f.Reasons, isolated...)
	wrong, compared, mostM, err := astray(res.Posteriors, truth)
	if err != nil {
		return nil, err
	}
	if compared > 0 && float64(wrong) >= wrongShare*float64(compared) {
		f.Reasons = append(f.Reasons, fmt.Sprintf("it is located wrongly: of %d located posteriors with a truth, %d have it outside the 99 %% radius, by up to %.0f m", compared, wrong, mostM))
	}
	for _, b := range f.Fits {
		if text := b.suspicion(); text != "" {
			f.Reasons = append(f.Reasons, text)
		}
	}
	f.Reasons = append(f.Reasons, refusals(res, events)...)
	if text := unmeasured(events); text != "" && len(f.Reasons) > 0 {
		f.Reasons = slices.Insert(f.Reasons, 0, text)
	}
	if text := misplaced(res, events, c); text != "" {
		f.Reasons, f.Misplaced = []string{text}, true
	}
	if n := len(res.Posteriors); n > 0 {
		last := res.Posteriors[n-1]
		f.Beyond = beyond(last, sensor.Time(last.TimeNS).Seconds(res.Start), c)
	}
	return f, nil
}

// astray counts located posteriors with the truth outside their 99 % radius.
func astray(ps []*summary.Posterior, truth []score.Truth) (wrong, compared int, mostM float64, err error) {
	for _, p := range ps {
		t, ok := score.Interpolate(truth, p.TimeNS)
		if !ok || p.Status != summary.Located {
			continue
		}
		compared++
		d, _, err := geo.WGS84.Distance(p.Mean, t.At)
		if err != nil {
			return 0, 0, 0, fmt.Errorf("comparing with the truth: %w", err)
		}
		if over := d - p.Radius99M - 3*t.SigmaM; over > 0 {
			wrong++
			mostM = math.Max(mostM, over)
		}
	}
	return wrong, compared, mostM, nil
}

// refusals says which sensors' measurements were refused; of many refusals
// only the first are listed, which is enough.
func refusals(res *replay.Result, events []sensor.Event) []string {
	refused := map[string]int{}
	why := map[string]session.Reason{}
	for _, r := range res.Refusals {
		if refused[r.Sensor]++; refused[r.Sensor] == 1 {
			why[r.Sensor] = r.Reason
		}
	}
	all := map[string]int{}
	var names []string
	for _, ev := range events {
		if all[ev.Sensor]++; all[ev.Sensor] == 1 {
			names = append(names, ev.Sensor)
		}
	}
	slices.Sort(names)
	var out []string
	for _, n := range names {
		if float64(refused[n]) >= refusedShare*float64(all[n]) && refused[n] > 0 {
			out = append(out, fmt.Sprintf("%s is refused: %d of %d measurements, first as %s", n, refused[n], all[n], why[n]))
		}
	}
	return out
}

// beyond compares what was estimated with its prior, seconds after the start.
func beyond(last *summary.Posterior, seconds float64, c session.Config) []Beyond {
	out := []Beyond{}
	if last == nil {
		return out
	}
	suite, dim := suiteOf(c)
	for _, q := range suite.Quantities(dim) {
		for _, n := range last.Nuisances {
			if n.Name != q.Name {
				continue
			}
			prior := math.Sqrt(q.PriorVar + q.DriftVar*seconds)
			if prior == 0 {
				continue
			}
			away := (n.Mean - q.PriorMean) / prior
			if math.Abs(away) > beyondSigmas {
				name, _, mean, sigma := sensor.InUnits(n.Name, n.Mean, n.Sigma)
				_, _, priorMean, prior := sensor.InUnits(n.Name, q.PriorMean, prior)
				out = append(out, Beyond{name, mean, sigma, priorMean, prior, away, suggests(name, mean)})
			}
		}
	}
	return out
}

// suggests says what a nuisance that left its prior may stand for.
func suggests(name string, mean float64) string {
	if name == sensor.NuisanceOdometerScale {
		return fmt.Sprintf("distances are to be taken %.4g times: look at the wheel's size, its ticks a metre and the unit, or give the scale a wider prior", 1+mean)
	}
	return "something that it is not may have been put down to it: look at what it stands for, or give it a wider prior"
}

// suiteOf is the suite that a session of a configuration goes by, with its
// defaults, and the dimension of its space.
func suiteOf(c session.Config) (*sensor.Suite, int) {
	dim := 2
	if _, ok := c.Space.(filter.LineSpace); ok {
		dim = 1
	}
	if c.Suite != nil {
		return c.Suite.For(dim), dim
	}
	return sensor.Default(dim), dim
}

func (f *Fit) who() string {
	if f.Sensor == road {
		return "the road"
	}
	return f.Sensor
}
