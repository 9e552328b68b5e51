package score

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
)

// walk is a truth that goes east at 10 m/s from 0 to 20 s, every second, and
// posteriors there whose means are off by what off says, in metres east and
// north.
func walk(off func(s int64) (e, n float64), sigmaM float64) Input {
	in := Input{}
	for s := range int64(21) {
		in.Truth = append(in.Truth, Truth{TimeNS: s * 1e9, At: at(10*float64(s), 0), SigmaM: sigmaM})
		p := posterior(s, summary.Located)
		e, n := off(s)
		p.Mean = at(10*float64(s)+e, n)
		in.Posteriors = append(in.Posteriors, p)
	}
	return in
}

func scored(t *testing.T, in Input) *Score {
	t.Helper()
	s, err := Of(in)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// TestAlongAndAcross: east is along, south is right.
func TestAlongAndAcross(t *testing.T) {
	s := scored(t, walk(func(int64) (e, n float64) { return 0.5, -1 }, 0))
	const tol = 2e-5
	near(t, "along_mean_m", s.AlongMeanM, 0.5, tol)
	near(t, "along_rmse_m", s.AlongRMSEM, 0.5, tol)
	near(t, "across_mean_m", s.AcrossMeanM, 1, tol)
	near(t, "across_p95_m", s.AcrossP95M, 1, tol)
	near(t, "p75_m", s.P75M, math.Sqrt(1.25), tol)
	// N((0.5, -1), I): -ln of the density is ln 2π + 1.25/2; the CRPS of a unit
	// normal at z is z(2Φ(z)-1) + 2φ(z) - 1/√π.
	near(t, "log_score", s.LogScore, math.Log(2*math.Pi)+0.625, 1e-4)
	crps := (CRPS([]float64{1}, []float64{0.5}, []float64{1}, 0) + CRPS([]float64{1}, []float64{1}, []float64{1}, 0)) / 2
	near(t, "crps_m", s.CRPSM, crps, 1e-5)
	// Φ(-0.5) = 0.309 and Φ(-1) = 0.159: the truth is behind and to the left.
	if s.RankAlong[6] != 21 || s.RankAcross[3] != 21 {
		t.Errorf("ranks %v, %v", s.RankAlong, s.RankAcross)
	}
	if s.TruthNote.SigmaM != 0 || len(s.TruthNote.Below) != 0 {
		t.Errorf("truth %+v", s.TruthNote)
	}
}

// TestBelowTruth: an error of 0.5 m is not told from 0 by a truth of 1 m.
func TestBelowTruth(t *testing.T) {
	s := scored(t, walk(func(int64) (e, n float64) { return 0.5, 0 }, 1))
	near(t, "truth_p95_m", &s.TruthNote.P95M, 2.4477, 1e-4)
	want := map[string]bool{"rmse_m": true, "mean_m": true, "p50_m": true, "p95_m": true, "along_rmse_m": true, "across_rmse_m": true}
	for _, name := range s.TruthNote.Below {
		delete(want, name)
	}
	if len(want) > 0 {
		t.Errorf("claimed: %v", want)
	}
	if s = scored(t, walk(func(int64) (e, n float64) { return 9, 0 }, 1)); len(s.TruthNote.Below) != 1 { // across is 0
		t.Errorf("not claimed: %v", s.TruthNote.Below)
	}
}

// TestTwofold: truths that another vehicle or device has put in between, and ones said
// twice, change no figure, since the first of a time counts; those that say another place
// are counted.
func TestTwofold(t *testing.T) {
	in := walk(func(s int64) (e, n float64) { return float64(s % 3), 1 }, 0.5)
	for _, p := range in.Posteriors {
		p.TimeNS += 4e8 // between truths
	}
	want := scored(t, in)
	var doubled []Truth
	elsewhere := 0
	for i, x := range in.Truth {
		doubled = append(doubled, x)
		switch i % 3 {
		case 0:
			other := x
			other.At = at(float64(100*i), 900)
			doubled = append(doubled, other)
			elsewhere++
		case 1:
			doubled = append(doubled, x)
		}
	}
	in.Truth = doubled
	got := scored(t, in)
	if got.TruthNote.Twofold != elsewhere || elsewhere < 5 {
		t.Errorf("%d truths say another place, want %d", got.TruthNote.Twofold, elsewhere)
	}
	got.TruthNote.Twofold = 0
	if a, b := asJSON(t, got), asJSON(t, want); a != b {
		t.Errorf("with doubled truths\n%s\nwithout\n%s", a, b)
	}
}

func asJSON(t *testing.T, v any) string {
	t.Helper()
	b, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// TestLongestWrong: the 99 % radius is 3 m. Of a stretch of 4 s with 40 m and
// one of 2 s the first counts; with a truth of 1 m, 2.45 m more are needed.
func TestLongestWrong(t *testing.T) {
	off := func(s int64) (e, n float64) {
		if s >= 5 && s < 9 || s >= 12 && s < 14 {
			return 0, 5
		}
		return 0, 0
	}
	in := walk(off, 0)
	in.StartNS = -2e9
	w := scored(t, in).LongestWrong
	if w == nil || w.StartS != 7 || w.ForS != 4 || math.Abs(w.ForM-40) > 1e-3 {
		t.Errorf("%+v", w)
	}
	if w := scored(t, walk(off, 1)).LongestWrong; w != nil {
		t.Errorf("within the truth's own error: %+v", w)
	}
	// A stretch that lasts until the end.
	if w := scored(t, walk(func(s int64) (e, n float64) { return 0, 5 * float64(s/19) }, 0)).LongestWrong; w == nil || w.StartS != 19 || w.ForS != 1 {
		t.Errorf("at the end: %+v", w)
	}
}

// TestExceedance: errors of 5 m pass the protection radius of 4 m in two
// episodes.
func TestExceedance(t *testing.T) {
	x := scored(t, walk(func(s int64) (e, n float64) {
		if s >= 5 && s < 8 || s == 12 {
			return 0, 5
		}
		return 0, 0
	}, 0)).Protection
	if x.Bounded != 21 || x.Beyond != 4 || x.Episodes != 2 || *x.Share != 4.0/21 || !(*x.Low < *x.Share && *x.Share < *x.High) {
		t.Errorf("%+v", x)
	}
}

// TestOffset proves that a stated offset is taken off, and that a wrong one is
// not: the antenna is 2 m ahead and 1 m to the right of the reference point, and
// its clock 0.3 s late.
func TestOffset(t *testing.T) {
	in := walk(func(int64) (e, n float64) { return 0, 0 }, 0)
	for i := range in.Truth {
		s := float64(in.Truth[i].TimeNS) / 1e9
		in.Truth[i].At = at(10*(s-0.3)+2, -1)
	}
	near(t, "rmse_m as it stands", scored(t, in).Figures.RMSEM, math.Hypot(1, 1), 1e-3) // 3 m behind, 2 m ahead
	in.Offset = Offset{ForwardM: 2, RightM: 1, LateS: 0.3}
	near(t, "rmse_m", scored(t, in).Figures.RMSEM, 0, 1e-4)
}

// TestEstimate recovers an offset from noisy errors, within four of its own
// standard errors, and leaves the figures as they are.
func TestEstimate(t *testing.T) {
	const seed, n = 8, 4000
	rng := rand.New(rand.NewPCG(seed, 0))
	var in Input
	x := 0.0
	for i := range int64(n) {
		speed := 10 + 5*math.Sin(float64(i)/40)
		x += speed / 10
		in.Truth = append(in.Truth, Truth{TimeNS: i * 1e8, At: at(x+1.5-0.2*speed, -0.7), SigmaM: 0.01})
		p := posterior(0, summary.Located)
		p.TimeNS, p.Mean = i*1e8, at(x+rng.NormFloat64(), rng.NormFloat64())
		in.Posteriors = append(in.Posteriors, p)
	}
	plain := scored(t, in)
	in.Estimate = true
	s := scored(t, in)
	e := s.TruthNote.Estimate
	if e == nil || *s.Figures.RMSEM != *plain.Figures.RMSEM || s.TruthNote.Offset != (Offset{}) {
		t.Fatalf("%+v", s.TruthNote)
	}
	for _, c := range []struct{ got, sigma, want, most float64 }{
		{e.ForwardM, e.ForwardSigmaM, 1.5, 0.3}, {e.RightM, e.RightSigmaM, 0.7, 0.1}, {e.LateS, e.LateSigmaS, 0.2, 0.03},
	} {
		if math.Abs(c.got-c.want) > 4*c.sigma || c.sigma > c.most {
			t.Errorf("seed %d: %.3f ± %.3f, want %v", seed, c.got, c.sigma, c.want)
		}
	}
}

// change weighs sensor s at second t where its measurement fell at z.
func change(t int64, z float64) session.Change {
	c := session.Change{
		Time: sensor.Time(t * 1e9), Event: sensor.Event{Sensor: "s", Measurement: sensor.Fix{}}, Likelihood: struct{}{},
	}
	c.Fell = filter.Predictive{Rows: 1, Below: [2]float64{phi(z)}, Above: [2]float64{phi(-z)}}
	return c
}

func phi(z float64) float64 { return 0.5 * math.Erfc(-z/math.Sqrt2) }

// TestInnovations: what is weighed again counts once, also across the bound up
// to which a session may go back.
func TestInnovations(t *testing.T) {
	const seed = 3
	rng := rand.New(rand.NewPCG(seed, 0))
	z := make([]float64, 9000)
	for i := range z {
		z[i] = rng.NormFloat64()
	}
	z[17] = 5
	var once, again Innovations
	for i := range int64(len(z)) {
		once.Add(change(i, z[i]))
		if i%10 == 9 { // the last three, first with other values
			for k := i - 2; k <= i; k++ {
				again.Add(change(k, 9))
			}
			again.Add(session.Change{From: sensor.Time((i-3)*1e9 + 1), Time: sensor.Time((i - 2) * 1e9)})
			for k := i - 2; k <= i; k++ {
				again.Add(change(k, z[k]))
			}
		} else if i%10 < 7 {
			again.Add(change(i, z[i]))
		}
	}
	a, b := once.End(), again.End()
	if len(a) != 1 || len(b) != 1 {
		t.Fatalf("%d, %d sensors", len(a), len(b))
	}
	x, y := a[0], b[0]
	if x.Weighed != len(z) || x.Scores != len(z) || y.Scores != x.Scores || *x.LjungBox != *y.LjungBox || x.Mean != y.Mean {
		t.Errorf("once %+v, again %+v", x, y)
	}
	if q, p := LjungBox(z, whiteLags); math.Abs(*x.LjungBox-q) > 1e-3 || math.Abs(*x.Whiteness-p) > 1e-3 {
		t.Errorf("seed %d: Q %v, p %v; of the series %v, %v", seed, *x.LjungBox, *x.Whiteness, q, p)
	}
	sum := 0
	for _, n := range x.Histogram {
		sum += n
	}
	if sum != len(z) || x.Histogram[histogramBins-1] < 1 || math.Abs(x.SD-1) > 0.05 {
		t.Errorf("%+v", x)
	}
}
