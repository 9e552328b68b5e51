package tune

import (
	"math"
	"strconv"

	"gonum.org/v1/gonum/mat"
)

// slice is the log evidence, less the maximum's, where one figure alone is another.
func (s *search) slice(i int, at []float64) ([]float64, error) {
	points := make([][]float64, len(at))
	for k, v := range at {
		points[k] = append([]float64(nil), s.best...)
		points[k][i] = v
	}
	values, err := s.values(points)
	if err != nil {
		return nil, err
	}
	for k := range values {
		values[k] -= s.most
	}
	return values, nil
}

// know says what the drives say of each figure: by how far the log evidence falls
// towards either bound.
func (s *search) know(r *Result) error {
	for i := range r.Figures {
		t := &r.Figures[i]
		for again := true; again; {
			again = false
			at := []float64{s.low[i], (s.low[i] + s.best[i]) / 2, (s.high[i] + s.best[i]) / 2, s.high[i]}
			d, err := s.slice(i, at)
			if err != nil {
				return err
			}
			for k, v := range d { // the search had not found the top
				if v > enoughNats {
					s.best[i], s.most = at[k], s.most+v
					again = true
					break
				}
			}
			if again {
				continue
			}
			down, up := -math.Min(d[0], d[1]), -math.Min(d[2], d[3])
			switch {
			case down < silentNats && up < silentNats:
				t.Known = Silent
			case down < limitNats:
				t.Known = AtMost
			case up < limitNats:
				t.Known = AtLeast
			default:
				t.Known = Estimated
			}
		}
		var err error
		switch t.Known {
		case AtMost:
			t.Value, err = s.limit(i, s.high[i])
		case AtLeast:
			t.Value, err = s.limit(i, s.low[i])
		case Estimated:
			v := math.Exp(s.best[i])
			t.Value = &v
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// limit is where the log evidence has fallen by limitNats towards an end.
func (s *search) limit(i int, end float64) (*float64, error) {
	near, far := s.best[i], end
	for math.Abs(far-near) > 0.02 {
		mid := (near + far) / 2
		d, err := s.slice(i, []float64{mid})
		if err != nil {
			return nil, err
		}
		if d[0] > -limitNats {
			near = mid
		} else {
			far = mid
		}
	}
	v := math.Exp(far)
	return &v, nil
}

// The step of the differences is that at which the evidence falls by about a nat:
// wide enough to see over its roughness, narrow enough to be of the maximum.
const (
	leastFall, mostFall = 0.4, 2.5
	firstStep           = 0.1
	mostStep            = 1.0
)

// curve finds standard errors: the inverse of the matrix of second derivatives of
// the negative log evidence by the logarithms of the figures that are estimated, by
// central differences. The top of the parabola through an axis' three points, if it
// is within the step, is taken for the estimate, since the search ends within
// enoughNats of it.
func (s *search) curve(r *Result) error {
	var at []int
	for i, t := range r.Figures {
		if t.Known == Estimated {
			at = append(at, i)
		}
	}
	n := len(at)
	if n == 0 {
		return nil
	}
	steps := make([]float64, n)
	h := mat.NewSymDense(n, nil)
	for a, i := range at {
		step := firstStep
		var fall [2]float64
		for range 8 {
			step = math.Min(step, math.Min(s.high[i]-s.best[i], s.best[i]-s.low[i]))
			d, err := s.slice(i, []float64{s.best[i] - step, s.best[i] + step})
			if err != nil {
				return err
			}
			fall = [2]float64{-d[0], -d[1]}
			mean := (fall[0] + fall[1]) / 2
			if mean >= leastFall && mean <= mostFall || step >= mostStep {
				break
			}
			step = math.Min(step*math.Min(math.Max(math.Sqrt(1/math.Max(mean, 1e-3)), 0.3), 3), mostStep)
		}
		steps[a] = step
		h.SetSym(a, a, (fall[0]+fall[1])/(step*step))
	}
	for a := range at {
		for b := range a {
			points := make([][]float64, 0, 4)
			for _, sign := range [4][2]float64{{1, 1}, {1, -1}, {-1, 1}, {-1, -1}} {
				x := append([]float64(nil), s.best...)
				x[at[a]] += sign[0] * steps[a]
				x[at[b]] += sign[1] * steps[b]
				points = append(points, x)
			}
			v, err := s.values(points)
			if err != nil {
				return err
			}
			h.SetSym(a, b, -(v[0]-v[1]-v[2]+v[3])/(4*steps[a]*steps[b]))
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(h) || chol.Cond() > mat.ConditionTolerance {
		return nil // no maximum along some direction: the profiles show it
	}
	var cov mat.SymDense
	if err := chol.InverseTo(&cov); err != nil {
		return err
	}
	r.Correlation = make([][]float64, n)
	for a, i := range at {
		sigma := math.Sqrt(cov.At(a, a))
		from, to := math.Exp(s.best[i]-1.96*sigma), math.Exp(s.best[i]+1.96*sigma)
		t := &r.Figures[i]
		t.LogSigma, t.From, t.To = &sigma, &from, &to
		r.Correlation[a] = make([]float64, n)
		for b := range at {
			r.Correlation[a][b] = cov.At(a, b) / math.Sqrt(cov.At(a, a)*cov.At(b, b))
		}
	}
	return nil
}

const (
	profilePoints      = 9
	profileEvaluations = 12 // a point and other figure
)

// profiles are the greatest evidence for values of each figure: three standard
// errors to either side, or from bound to bound.
func (s *search) profiles(r *Result) error {
	for i := range r.Figures {
		t := &r.Figures[i]
		lo, hi := s.low[i], s.high[i]
		if t.LogSigma != nil {
			lo, hi = math.Max(lo, s.best[i]-3**t.LogSigma), math.Min(hi, s.best[i]+3**t.LogSigma)
		}
		free := make([]bool, len(s.best))
		others := 0
		for j, f := range r.Figures {
			free[j] = j != i && f.Known == Estimated
			if free[j] {
				others++
			}
		}
		for k := range profilePoints {
			x := append([]float64(nil), s.best...)
			x[i] = lo + (hi-lo)*float64(k)/(profilePoints-1)
			_, v, _, err := s.maximum(x, free, profileEvaluations*others, simplexSize/4)
			if err != nil {
				return err
			}
			t.Profile = append(t.Profile, Point{math.Exp(x[i]), v - s.most})
		}
	}
	return nil
}

// Text is a figure as it is written into a suite: three digits.
func Text(v float64) string { return strconv.FormatFloat(v, 'g', 3, 64) }

// write puts what was estimated into the suite, and compares on the drives that
// were held out.
func (s *search) write(r *Result, held []Drive, start []float64, o Options) error {
	suite := s.suite
	after := append([]float64(nil), start...)
	for i, t := range r.Figures {
		if t.Known != Estimated {
			continue
		}
		var err error
		if suite, err = suite.Set(t.Key, Text(*t.Value)); err != nil {
			return err
		}
		after[i] = s.best[i]
	}
	r.Suite, r.Held, r.Evaluations = suite, len(held), s.count
	if len(held) == 0 {
		return nil
	}
	e := *s.evaluator
	e.drives, e.known, e.count = nil, map[string][]float64{}, 0
	noise := map[string]bool{}
	for _, key := range s.keys {
		if name, ok := noiseOf(s.suite, key); ok {
			noise[name] = true
		}
	}
	for _, d := range held {
		d.Drive, _ = bared(d.Drive, noise)
		e.drives = append(e.drives, d)
	}
	v, err := e.sums([][]float64{figures(start), figures(after)})
	if err != nil {
		return err
	}
	r.HeldBefore, r.HeldAfter = &v[0], &v[1]
	r.Evaluations += e.count
	return nil
}
