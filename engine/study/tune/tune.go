package tune

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"gonum.org/v1/gonum/optimize"

	"leadline/engine/sensor"
)

// Figure is a figure of the suite to be tuned: its key (sensor.Suite.Set) and the
// bounds within which it is looked for. Bounds that are 0 are a factor of 30 to
// either side of the suite's own figure.
type Figure struct {
	Key       string
	Low, High float64
}

// boundFactor is how far to either side of the suite's figure is looked.
const boundFactor = 30.0

// Options say what is tuned.
type Options struct {
	Figures  []Figure
	MaxCells int // as in session.Config
	// MaxEvaluations bounds the search for the maximum; 0: 60 a figure.
	MaxEvaluations int
	// NoProfile leaves out the profiles, which cost more than the rest.
	NoProfile bool
	// Progress, if set, is called with the number of evaluations now and then.
	Progress func(evaluations int)
	// Stop, if set, is asked often, also by several goroutines: an error of it ends
	// the tuning with what was found so far.
	Stop func() error
}

const maxFigures = 6

// What is known of a figure.
const (
	Estimated = "estimated"
	// BestSoFar: the tuning was interrupted before it was known what the figure is.
	BestSoFar = "best so far"
	// Silent: whatever it is within its bounds, the log evidence stays within a
	// nat of its maximum.
	Silent = "the drives say nothing of it"
	// AtMost and AtLeast: only a limit is known, beyond which the log evidence is
	// 1.92 nats below its maximum (a confidence of 95 %, by Wilks' theorem; of a
	// limit to one side alone it is 97.5 %).
	AtMost  = "at most"
	AtLeast = "at least"
)

const (
	silentNats = 1.0
	limitNats  = 1.92
)

// Tuned is what came out for a figure. Before is what the suite had, or, if it is
// not Given, where the search began.
type Tuned struct {
	Key    string  `json:"key"`
	Before float64 `json:"before"`
	Given  bool    `json:"given"`
	Low    float64 `json:"low"`
	High   float64 `json:"high"`
	// Known is one of the constants above; Value the estimate or the limit, null if
	// the drives say nothing.
	Known string   `json:"known"`
	Value *float64 `json:"value"`
	// LogSigma is the standard error of the figure's natural logarithm, from the
	// curvature; From and To are the value over and times e^(1.96 LogSigma).
	LogSigma *float64 `json:"log_sigma"`
	From     *float64 `json:"from"`
	To       *float64 `json:"to"`
	// Bared is how many measurements lost the sigma that they carried.
	Bared int `json:"bared"`
	// Profile is the greatest log evidence for each of some values of the figure,
	// the others at their best, less that of the maximum.
	Profile []Point `json:"profile"`
}

// Point is a value of a figure and its log evidence, relative to the maximum.
type Point struct {
	Value float64 `json:"value"`
	Nats  float64 `json:"nats"`
}

// Result is what tuning found.
type Result struct {
	Figures []Tuned `json:"figures"`
	// Correlation of the estimated figures' logarithms, in their order among
	// Figures.
	Correlation [][]float64 `json:"correlation"`
	// Evidence of the drives that were tuned on, before and after, nats; and of those
	// held out, null without any.
	Before     float64  `json:"log_evidence_before"`
	After      float64  `json:"log_evidence_after"`
	HeldBefore *float64 `json:"held_out_before"`
	HeldAfter  *float64 `json:"held_out_after"`
	Drives     int      `json:"drives"`
	Held       int      `json:"held_out"`
	// Evaluations is how many sets of figures were tried, those for curvature and
	// profiles and for the drives held out included.
	Evaluations int `json:"evaluations"`
	// Searched is how many of them the search itself tried, at most MaxEvaluations.
	Searched int `json:"search_evaluations"`
	// Interrupted says that Stop ended it.
	Interrupted bool `json:"interrupted"`
	// Converged says that the search ended by itself.
	Converged bool `json:"converged"`
	// Suite is the suite with what was found.
	Suite *sensor.Suite `json:"-"`
}

// search is the state of a tuning: x are natural logarithms of the figures.
type search struct {
	*evaluator
	low, high []float64
	best      []float64
	most      float64
	failed    error
}

// Run tunes figures of a suite on drives; those held out are only compared before
// and after.
func Run(suite *sensor.Suite, drives, held []Drive, o Options) (*Result, error) {
	if suite == nil {
		suite = &sensor.Suite{}
	}
	if len(drives) == 0 {
		return nil, errors.New("there is no drive to tune on: hold fewer out")
	}
	s, r, err := begin(suite, drives, o)
	if err != nil {
		return nil, err
	}
	start := append([]float64(nil), s.best...)
	before, err := s.values([][]float64{start})
	if err != nil {
		return nil, err
	}
	r.Before, s.most = before[0], before[0]
	err = s.steps(r, held, start, o)
	switch {
	case err != nil && o.Stop != nil && o.Stop() != nil:
		s.cut(r)
	case err != nil:
		return nil, err
	}
	return r, nil
}

// steps are what follows the first evaluation.
func (s *search) steps(r *Result, held []Drive, start []float64, o Options) error {
	if err := s.climb(o, r); err != nil {
		return err
	}
	if err := s.know(r); err != nil {
		return err
	}
	if err := s.curve(r); err != nil {
		return err
	}
	if !o.NoProfile {
		if err := s.profiles(r); err != nil {
			return err
		}
	}
	r.After = s.most
	return s.write(r, held, start, o)
}

// cut ends a tuning that was interrupted with what is known.
func (s *search) cut(r *Result) {
	r.Interrupted, r.After, r.Evaluations, r.Suite, r.Held = true, s.most, s.count, s.suite, 0
	for i := range r.Figures {
		if t := &r.Figures[i]; t.Known == "" || t.Value == nil && t.Known != Silent {
			v := math.Exp(s.best[i])
			t.Known, t.Value = BestSoFar, &v
		}
	}
}

// begin checks what is asked for and prepares the drives.
func begin(suite *sensor.Suite, drives []Drive, o Options) (*search, *Result, error) {
	if n := len(o.Figures); n == 0 || n > maxFigures {
		return nil, nil, fmt.Errorf("%d figures are to be tuned: give 1 to %d", n, maxFigures)
	}
	s := &search{evaluator: &evaluator{suite: suite, maxCells: o.MaxCells, known: map[string][]float64{}, progress: o.Progress, stop: o.Stop}}
	r := &Result{Drives: len(drives)}
	noise := map[string]bool{}
	for i, f := range o.Figures {
		for _, g := range o.Figures[:i] {
			if g.Key == f.Key {
				return nil, nil, fmt.Errorf("%s is to be tuned twice", f.Key)
			}
		}
		v, ok, err := figureOf(suite, f.Key, drives)
		if err != nil {
			return nil, nil, err
		}
		if f.Low == 0 && f.High == 0 && ok {
			f.Low, f.High = v/boundFactor, v*boundFactor
		}
		if !(f.Low > 0 && f.High > f.Low && !math.IsInf(f.High, 1)) {
			if f.Low == 0 && f.High == 0 {
				return nil, nil, fmt.Errorf("the suite does not say what %s is: give bounds, as in %s=0.01:1", f.Key, f.Key)
			}
			return nil, nil, fmt.Errorf("%s is looked for from %v to %v: bounds must be above 0, the lower first", f.Key, f.Low, f.High)
		}
		if !ok || v < f.Low || v > f.High {
			v = math.Sqrt(f.Low * f.High)
		}
		s.keys = append(s.keys, f.Key)
		s.low, s.high, s.best = append(s.low, math.Log(f.Low)), append(s.high, math.Log(f.High)), append(s.best, math.Log(v))
		r.Figures = append(r.Figures, Tuned{Key: f.Key, Given: ok, Before: v, Low: f.Low, High: f.High})
		if name, ok := noiseOf(suite, f.Key); ok {
			noise[name] = true
		}
	}
	for i := range s.keys { // the bounds must be figures that a suite may have
		for _, end := range []float64{s.low[i], s.high[i]} {
			x := append([]float64(nil), s.best...)
			x[i] = end
			if _, err := s.with(figures(x)); err != nil {
				return nil, nil, fmt.Errorf("a bound of %w", err)
			}
		}
	}
	for _, d := range drives {
		for i, key := range s.keys {
			if name, ok := noiseOf(suite, key); ok {
				_, n := bared(d.Drive, map[string]bool{name: true})
				r.Figures[i].Bared += n
			}
		}
		d.Drive, _ = bared(d.Drive, noise)
		s.drives = append(s.drives, d)
	}
	return s, r, nil
}

// figureOf is a figure as the suite has it, or by its default where drives are.
func figureOf(suite *sensor.Suite, key string, drives []Drive) (float64, bool, error) {
	v, ok, err := suite.Figure(key)
	if err != nil || ok {
		return v, ok, err
	}
	dim := 2
	if _, roads := drives[0].Space.(interface{ Levels() int }); roads {
		dim = 1
	}
	return suite.For(dim).Figure(key)
}

// noiseOf is the sensor whose noise a key is.
func noiseOf(suite *sensor.Suite, key string) (string, bool) {
	for _, d := range suite.Sensors {
		if strings.HasPrefix(key, "sensors."+d.Name+".noise.") {
			return d.Name, true
		}
	}
	return "", false
}

func figures(x []float64) []float64 {
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = math.Exp(v)
	}
	return out
}

// values are the log evidence at points, which are cut to the bounds.
func (s *search) values(points [][]float64) ([]float64, error) {
	cut := make([][]float64, len(points))
	for i, x := range points {
		c := make([]float64, len(x))
		for j, v := range x {
			c[j] = math.Min(math.Max(v, s.low[j]), s.high[j])
		}
		cut[i] = figures(c)
	}
	return s.sums(cut)
}

// beyond is by how much a point is out of bounds, as a penalty in nats that leads
// back in.
func (s *search) beyond(x []float64) float64 {
	sum := 0.0
	for j, v := range x {
		d := math.Max(0, math.Max(s.low[j]-v, v-s.high[j]))
		sum += 10 * d * (1 + d)
	}
	return sum
}

// The search ends where some steps together gain less than this, nats: far less than
// what a standard error is (0.5).
const (
	enoughNats  = 0.02
	simplexSize = 0.7 // a factor of two
)

// climb looks for the maximum over all figures, or those that are free.
func (s *search) climb(o Options, r *Result) error {
	free := make([]bool, len(s.best))
	for i := range free {
		free[i] = true
	}
	most := o.MaxEvaluations
	if most <= 0 {
		most = 60 * len(s.best)
	}
	best, value, converged, err := s.maximum(s.best, free, most, simplexSize)
	r.Searched = s.count
	if err != nil {
		if value > s.most {
			s.best, s.most = best, value
		}
		return err
	}
	r.Converged = converged
	s.best, s.most = best, value
	return nil
}

// maximum is the greatest log evidence over the figures that are free.
func (s *search) maximum(from []float64, free []bool, mostEvaluations int, size float64) (best []float64, value float64, converged bool, err error) {
	var at []int
	for i, f := range free {
		if f {
			at = append(at, i)
		}
	}
	full := func(y []float64) []float64 {
		x := append([]float64(nil), from...)
		for j, i := range at {
			x[i] = y[j]
		}
		return x
	}
	if len(at) == 0 {
		v, err := s.values([][]float64{from})
		if err != nil {
			return nil, 0, false, err
		}
		return from, v[0], true, nil
	}
	best, value = from, math.Inf(-1)
	problem := optimize.Problem{Func: func(y []float64) float64 {
		if s.failed != nil {
			return math.Inf(1)
		}
		x := full(y)
		v, err := s.values([][]float64{x})
		if err != nil {
			s.failed = err
			return math.Inf(1)
		}
		if inside := s.clamp(x); v[0] > value {
			best, value = inside, v[0]
		}
		return s.beyond(x) - v[0]
	}}
	y := make([]float64, len(at))
	for j, i := range at {
		y[j] = from[i]
	}
	settings := &optimize.Settings{
		FuncEvaluations: mostEvaluations, Concurrent: 1,
		Converger: &optimize.FunctionConverge{Absolute: enoughNats, Iterations: 4 + 4*len(at)},
	}
	result, err := optimize.Minimize(problem, y, settings, &optimize.NelderMead{SimplexSize: size})
	if s.failed != nil {
		return best, value, false, s.failed
	}
	if result == nil {
		return nil, 0, false, fmt.Errorf("searching for the maximum: %w", err)
	}
	converged = result.Status == optimize.FunctionConvergence || result.Status == optimize.MethodConverge
	return best, value, converged, nil
}

func (s *search) clamp(x []float64) []float64 {
	c := make([]float64, len(x))
	for j, v := range x {
		c[j] = math.Min(math.Max(v, s.low[j]), s.high[j])
	}
	return c
}
