package score

import (
	"math"
	"runtime"

	"leadline/engine/geo"
	"leadline/engine/summary"
)

// Scorer scores a drive as its posteriors come. What it keeps of
// them has a bound (Sample). One goroutine owns it.
type Scorer struct {
	score  Score
	roads  func(geo.LonLat, float64) []Road
	truths truths

	lastNS, firstNS int64 // of all, and the first located
	n               int
	located         bool
	onMap           bool // any truth
	all, counted    sums
	inOrder         series // those that count
	details         details
	fit             *fit
	mix             []component
	fromNS          int64 // see Input.FromNS
}

// New makes a scorer; the posteriors of in are not looked at, nor its start. It
// panics if truths are not by time.
func New(in Input) *Scorer {
	for i := 1; i < len(in.Truth); i++ {
		if in.Truth[i].TimeNS < in.Truth[i-1].TimeNS {
			panic("score: truths out of order")
		}
	}
	s := &Scorer{
		score:  Score{Drive: in.Drive, Version: in.Version, Architecture: runtime.GOARCH},
		roads:  in.Roads,
		truths: truths{in.Truth, in.Offset},
		fromNS: in.FromNS,
	}
	if in.Estimate {
		s.fit = newFit()
	}
	return s
}

// Located is the time of the first located posterior, 0 before there is one.
func (s *Scorer) Located() int64 { return s.firstNS }

// Add takes the next posterior and returns its error: from the truth to the
// scored position; not ok if the truth is not known. It panics if it is not
// later than the last one.
func (s *Scorer) Add(p *summary.Posterior) (truth Truth, errM float64, ok bool, err error) {
	if s.n > 0 && p.TimeNS <= s.lastNS {
		panic("score: posteriors out of order")
	}
	s.n++
	s.lastNS = p.TimeNS
	s.score.Posteriors, s.score.LogEvidence = s.n, p.LogEvidence
	if !s.located && (s.fromNS == 0 && p.Status == summary.Located || s.fromNS != 0 && p.TimeNS >= s.fromNS) {
		s.located, s.firstNS = true, p.TimeNS
	}
	truth, m, ok := s.truths.at(p.TimeNS)
	if !ok {
		s.details.wrong.end()
		return Truth{}, 0, false, nil
	}
	e, err := errorOf(p, truth, s.roads)
	if err != nil {
		return Truth{}, 0, false, err
	}
	s.all.add(e)
	s.onMap = s.onMap || e.onMap
	if s.located {
		s.counted.add(e)
		s.inOrder.add(e.errM)
		if s.mix, err = mixture(s.mix[:0], p, truth); err != nil {
			return Truth{}, 0, false, err
		}
		if err := s.details.add(p, e, truth, m, s.mix); err != nil {
			return Truth{}, 0, false, err
		}
		if s.fit != nil {
			s.fit.add(e, p, truth, m)
		}
	}
	return truth, e.errM, true, nil
}

// Score sums up a drive that began at a time; hash is that of its posteriors.
func (s *Scorer) Score(startNS int64, hash string) (*Score, error) {
	out := s.score
	out.PosteriorSHA256 = hash
	if s.located {
		after := float64(s.firstNS-startNS) / 1e9
		out.LocatedAfterS = &after
		m, ok, err := distance(s.truths.list, startNS, s.firstNS)
		if err != nil {
			return nil, err
		}
		if ok {
			out.LocatedAfterM = &m
		}
	}
	independent := IndependentOf(s.inOrder.x)
	out.Figures = s.counted.figures(s.roads != nil)
	out.Details = s.details.figures(&s.counted, independent, startNS)
	if out.TruthNote != nil {
		out.TruthNote.Offset = s.truths.offset
		twofold, err := s.truths.twofold()
		if err != nil {
			return nil, err
		}
		out.TruthNote.Twofold = twofold
		if s.fit != nil {
			out.TruthNote.Estimate = s.fit.estimate(independent)
		}
		out.TruthNote.below(&out)
	}
	out.FiguresAll = FiguresAll(s.all.figures(s.roads != nil))
	if list := s.truths.list; len(list) > 0 && out.FiguresAll.Scored == 0 {
		after := func(t Truth) float64 { return float64(t.TimeNS-startNS) / 1e9 }
		out.TruthElsewhen = &Elsewhen{len(list), after(list[0]), after(list[len(list)-1])}
	}
	if s.roads != nil && !s.onMap && out.FiguresAll.Scored > 0 {
		m, err := s.truths.fromRoads(s.roads)
		if err != nil {
			return nil, err
		}
		out.TruthOffMap = &OffMap{len(s.truths.list), m}
	}
	return &out, nil
}

// Of scores a drive. It panics if posteriors or truths are not by time.
func Of(in Input) (*Score, error) {
	s := New(in)
	for _, p := range in.Posteriors {
		if _, _, _, err := s.Add(p); err != nil {
			return nil, err
		}
	}
	return s.Score(in.StartNS, in.SHA256)
}

// rankBins is how finely ranks are counted.
const rankBins = 20

// details collects what Details say.
type details struct {
	along, across     Sample
	alongM, acrossM   float64
	alongM2, acrossM2 float64
	ranks             [2][]int
	logScore, crps    float64
	scored, moved     int
	bounded, beyond   int
	episodes          int
	outside           bool
	risk, truthM2     float64
	wrong             wrong
	axes              [2]line
	lastTruth         Truth
	haveTruth         bool
}

func (d *details) add(p *summary.Posterior, e one, truth Truth, m motion, mix []component) error {
	d.scored++
	d.truthM2 += truth.SigmaM * truth.SigmaM
	u := geo.Point{N: 1}
	if m.known {
		u = m.along
		along, across := dot(e.off, u), dot(e.off, rightOf(u))
		d.moved++
		d.along.Add(math.Abs(along))
		d.across.Add(math.Abs(across))
		d.alongM, d.acrossM = d.alongM+along, d.acrossM+across
		d.alongM2, d.acrossM2 = d.alongM2+along*along, d.acrossM2+across*across
	}
	for i, axis := range [2]geo.Point{u, rightOf(u)} {
		l := &d.axes[i]
		l.of(mix, axis)
		d.crps += CRPS(l.weights, l.means, l.sigmas, 0) / 2
		if m.known {
			if d.ranks[i] == nil {
				d.ranks[i] = make([]int, rankBins)
			}
			d.ranks[i][min(int(l.below()*rankBins), rankBins-1)]++
		}
	}
	d.logScore -= logDensity(mix)
	if p.Protection.Bounded {
		d.bounded++
		d.risk = math.Max(d.risk, p.Protection.Risk)
		if e.beyond {
			d.beyond++
			if !d.outside {
				d.episodes++
			}
		}
	}
	d.outside = e.beyond
	way := 0.0
	if d.haveTruth {
		var err error
		if way, _, err = geo.WGS84.Distance(d.lastTruth.At, truth.At); err != nil {
			return err
		}
	}
	d.lastTruth, d.haveTruth = truth, true
	is := p.Status == summary.Located && e.fromMeanM > p.Radius99M+radius95*truth.SigmaM
	d.wrong.add(is, p.TimeNS, way)
	return nil
}

// figures are of those that count, of which so many are independent.
func (d *details) figures(counted *sums, independent float64, startNS int64) Details {
	out := Details{Sensors: []Innovation{}}
	if d.scored == 0 {
		return out
	}
	n := float64(d.scored)
	out.P75M = finite(counted.errM.Quantile(0.75))
	out.Independent = &independent
	out.LogScore, out.CRPSM = finite(d.logScore/n), finite(d.crps/n)
	out.RankAlong, out.RankAcross = d.ranks[0], d.ranks[1]
	if k := float64(d.moved); k > 0 {
		out.AlongMeanM, out.AcrossMeanM = finite(d.alongM/k), finite(d.acrossM/k)
		out.AlongRMSEM, out.AcrossRMSEM = finite(math.Sqrt(d.alongM2/k)), finite(math.Sqrt(d.acrossM2/k))
		out.AlongP95M, out.AcrossP95M = finite(d.along.Quantile(0.95)), finite(d.across.Quantile(0.95))
	}
	x := &Exceedance{Bounded: d.bounded, Beyond: d.beyond, Episodes: d.episodes, Risk: d.risk}
	if d.bounded > 0 {
		share := float64(d.beyond) / float64(d.bounded)
		trials := independent * float64(d.bounded) / n
		x.Share, x.Trials = &share, trials
		if low, high, ok := ShareInterval(share, trials, 0.95); ok {
			x.Low, x.High = &low, &high
		}
	}
	out.Protection = x
	out.LongestWrong = d.wrong.longest(startNS)
	sigma := math.Sqrt(d.truthM2 / n)
	out.TruthNote = &TruthNote{SigmaM: sigma, P50M: radius50 * sigma, P95M: radius95 * sigma, Below: []string{}}
	return out
}

// Radii of a circular normal distribution of unit sigma: sqrt(-2 ln(1-p)).
var (
	radius50 = math.Sqrt(2 * math.Ln2)
	radius95 = math.Sqrt(-2 * math.Log(0.05))
)

// below names the figures that the truth cannot tell from 0.
func (t *TruthNote) below(s *Score) {
	for _, f := range []struct {
		name   string
		value  *float64
		leastM float64
	}{
		{"rmse_m", s.Figures.RMSEM, math.Sqrt2 * t.SigmaM},
		{"mean_m", s.Figures.MeanM, math.Sqrt(math.Pi/2) * t.SigmaM},
		{"p50_m", s.Figures.P50M, t.P50M},
		{"p95_m", s.Figures.P95M, t.P95M},
		{"along_rmse_m", s.AlongRMSEM, t.SigmaM},
		{"across_rmse_m", s.AcrossRMSEM, t.SigmaM},
	} {
		if f.value != nil && *f.value < f.leastM {
			t.Below = append(t.Below, f.name)
		}
	}
}

// wrong finds the longest stretch.
type wrong struct {
	now, most span
	in        bool
}

type span struct {
	fromNS, toNS int64
	m            float64
}

func (w *wrong) add(is bool, ns int64, way float64) {
	switch {
	case is && !w.in:
		w.in, w.now = true, span{ns, ns, 0}
	case w.in: // up to the first that is right again
		w.now.toNS, w.now.m = ns, w.now.m+way
	}
	if !is {
		w.end()
	}
}

// end ends a stretch where the truth does.
func (w *wrong) end() {
	if w.in && (w.most == span{} || w.now.toNS-w.now.fromNS > w.most.toNS-w.most.fromNS) {
		w.most = w.now
	}
	w.in = false
}

func (w *wrong) longest(startNS int64) *Stretch {
	w.end()
	if (w.most == span{}) {
		return nil
	}
	return &Stretch{float64(w.most.fromNS-startNS) / 1e9, float64(w.most.toNS-w.most.fromNS) / 1e9, w.most.m}
}
