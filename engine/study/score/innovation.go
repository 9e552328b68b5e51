package score

import (
	"cmp"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"

	"leadline/engine/sensor"
	"leadline/engine/session"
)

// Innovation says how measurements of a sensor fell in what was expected of
// them, as normal scores Φ⁻¹(u): standard normal and independent of one another
// if belief, map and noise are right. Those alone count that share little of
// their errors with the ones before, as the session's monitor has them.
type Innovation struct {
	Sensor string `json:"sensor"`
	Kind   string `json:"kind"`
	// Component is 1, or 2 for the second of two (the second given the first).
	Component int `json:"component"`
	// Weighed counts all measurements, Scores those that count here.
	Weighed int     `json:"weighed"`
	Scores  int     `json:"scores"`
	Mean    float64 `json:"score_mean"`      // 0 is right
	SD      float64 `json:"score_sd"`        // 1 is right
	Beyond  float64 `json:"beyond_three"`    // share beyond ±3; 0.0027 is right
	Lag1    float64 `json:"autocorrelation"` // of neighbours; 0 is right
	// LjungBox is Q over ten lags (fewer for a short series), Whiteness the
	// probability of a larger one if scores are independent; null where there are
	// too few.
	LjungBox  *float64 `json:"ljung_box"`
	Lags      int      `json:"ljung_box_lags"`
	Whiteness *float64 `json:"whiteness_p"`
	// Histogram counts scores in steps of a half from -4 to 4, with those beyond
	// in the outermost.
	Histogram []int `json:"histogram"`
}

const (
	whiteLags     = 10
	histogramBins = 16
	histogramFrom = -4.0
	histogramStep = 0.5
)

// LjungBox returns Q = n(n+2) Σ ρₖ²/(n-k) over lags 1 to h of a series, and the
// probability that a χ² variable with h degrees of freedom exceeds it: small if
// the series is not white. It panics unless 1 ≤ h < n. A constant series has Q =
// 0.
//
// Source: Ljung & Box, Biometrika 65, 1978.
func LjungBox(x []float64, h int) (q, p float64) {
	if h < 1 || h >= len(x) {
		panic("score: Ljung–Box needs more values than lags")
	}
	var s lagged
	for _, v := range x {
		s.add(v)
	}
	return s.ljungBox(h)
}

// lagged sums up a series with its lags.
type lagged struct {
	n           int
	sum, square float64
	cross       [whiteLags]float64 // Σ xₜ xₜ₋ₖ
	first, last []float64          // up to whiteLags
}

func (s *lagged) add(x float64) {
	for k := 1; k <= min(len(s.last), whiteLags); k++ {
		s.cross[k-1] += x * s.last[len(s.last)-k]
	}
	s.n++
	s.sum, s.square = s.sum+x, s.square+x*x
	if len(s.first) < whiteLags {
		s.first = append(s.first, x)
	}
	if s.last = append(s.last, x); len(s.last) > whiteLags {
		s.last = slices.Delete(s.last, 0, 1)
	}
}

// rho is the autocorrelation at lag k, around the mean of all.
func (s *lagged) rho(k int) float64 {
	n := float64(s.n)
	mean := s.sum / n
	variance := s.square - n*mean*mean
	if k >= s.n || !(variance > 1e-12*s.square) {
		return 0
	}
	without := 2 * s.sum // Σ over t > k of xₜ, and of xₜ₋ₖ
	for i := range k {
		without -= s.first[i] + s.last[len(s.last)-1-i]
	}
	return (s.cross[k-1] - mean*without + (n-float64(k))*mean*mean) / variance
}

func (s *lagged) ljungBox(h int) (q, p float64) {
	n := float64(s.n)
	for k := 1; k <= h; k++ {
		r := s.rho(k)
		q += r * r / (n - float64(k))
	}
	q *= n * (n + 2)
	return q, distuv.ChiSquared{K: float64(h)}.Survival(q)
}

// Innovations collects them: have the session watched by Add. The zero value is
// ready. One goroutine owns it.
type Innovations struct {
	list    []*innovations
	waiting []fell // may be weighed again
	enough  int    // of them, to count those that may not
	last    sensor.Time
}

type innovations struct {
	Innovation
	lagged
	beyond int
}

type fell struct {
	ns           int64
	sensor, kind string
	rows         int
	scores       [2]float64
}

// mostBackNS is how far a session may go back: what is older counts.
const mostBackNS = 120e9

// Add takes a change.
func (v *Innovations) Add(c session.Change) {
	if until, yes := c.Rewinds(v.last); yes {
		n := len(v.waiting)
		for n > 0 && v.waiting[n-1].ns > int64(until) {
			n--
		}
		v.waiting = v.waiting[:n]
	}
	v.last = c.Time
	if c.Likelihood == nil {
		return
	}
	f := fell{ns: int64(c.Time), sensor: c.Event.Sensor, kind: c.Event.Measurement.Kind(), rows: c.Fell.Rows}
	for row := range f.rows {
		f.scores[row] = c.Fell.Score(row)
	}
	v.waiting = append(v.waiting, f)
	if n := len(v.waiting); n >= v.enough {
		old := 0
		for old < n && v.waiting[old].ns < int64(v.last)-mostBackNS {
			old++
		}
		v.count(old)
		v.enough = max(4096, 2*len(v.waiting)) // those that stay are moved once for each of their number
	}
}

func (v *Innovations) count(n int) {
	for _, f := range v.waiting[:n] {
		for row := range max(f.rows, 1) {
			s := v.of(f, row+1)
			s.Weighed++
			if f.rows == 0 {
				continue
			}
			z := f.scores[row]
			s.add(z)
			if math.Abs(z) > 3 {
				s.beyond++
			}
			s.Histogram[max(0, min(histogramBins-1, int(math.Floor((z-histogramFrom)/histogramStep))))]++
		}
	}
	v.waiting = slices.Delete(v.waiting, 0, n)
}

func (v *Innovations) of(f fell, component int) *innovations {
	for _, s := range v.list {
		if s.Sensor == f.sensor && s.Kind == f.kind && s.Component == component {
			return s
		}
	}
	s := &innovations{Innovation: Innovation{Sensor: f.sensor, Kind: f.kind, Component: component, Histogram: make([]int, histogramBins)}}
	v.list = append(v.list, s)
	return s
}

// End sums up, by name of the sensor.
func (v *Innovations) End() []Innovation {
	v.count(len(v.waiting))
	out := []Innovation{}
	for _, s := range v.list {
		i := s.Innovation
		if n := float64(s.n); s.n > 1 {
			i.Scores, i.Mean = s.n, s.sum/n
			i.SD = math.Sqrt(math.Max(0, s.square-n*i.Mean*i.Mean) / (n - 1))
			i.Beyond, i.Lag1 = float64(s.beyond)/n, s.rho(1)
			if i.Lags = min(whiteLags, s.n/5); i.Lags > 0 { // a fifth: practice
				q, p := s.ljungBox(i.Lags)
				i.LjungBox, i.Whiteness = &q, &p
			}
		}
		out = append(out, i)
	}
	slices.SortStableFunc(out, func(a, b Innovation) int {
		return cmp.Or(cmp.Compare(a.Sensor, b.Sensor), cmp.Compare(a.Kind, b.Kind), cmp.Compare(a.Component, b.Component))
	})
	return out
}
