package score

import (
	"encoding/json"
	"math"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/summary"
)

// frame's lengths near its origin are true ones: scale error x²/2R² < 1e-13
// within a metre or two, 1e-11 within 30 m.
var frame = geo.NewFrame(geo.FromDegrees(11, 47))

func at(e, n float64) geo.LonLat { return frame.Inverse(geo.Point{E: e, N: n}) }

// posterior is one at second t with mean at the origin, unit covariance, radii
// of 1, 2 and 3 m and a protection radius of 4 m.
func posterior(t int64, st summary.Status) *summary.Posterior {
	return &summary.Posterior{
		TimeNS: t * 1e9, Status: st, Mean: at(0, 0), Cov: summary.Cov{EE: 1, NN: 1},
		MostProbable: summary.Cell{Position: at(0, 0)},
		Radius50M:    1, Radius95M: 2, Radius99M: 3,
		Protection:  summary.Protection{Bounded: true, RadiusM: 4},
		LogEvidence: float64(-t),
		Edges:       []summary.Edge{{Chart: 7, Twin: 8, Probability: 0.6}, {Chart: 9, Twin: -1, Probability: 0.4}},
	}
}

func near(t *testing.T, name string, got *float64, want, tol float64) {
	t.Helper()
	if got == nil || math.Abs(*got-want) > tol {
		t.Errorf("%s is %v, want %v ± %v", name, show(got), want, tol)
	}
}

func show(x *float64) any {
	if x == nil {
		return "null"
	}
	return *x
}

// TestWorked scores five posteriors by hand. The truth walks east at 1 m/s from
// the origin, so that the error at second t is t metres; the first second is
// not located and its most probable cell is 10 m north of the truth.
func TestWorked(t *testing.T) {
	in := Input{Drive: "walk", Version: "v1", SHA256: "abc", StartNS: -1e9}
	for s := range int64(5) {
		p := posterior(s, summary.Located)
		if s == 0 {
			p.Status = summary.Unsure
			p.MostProbable.Position = at(0, 10)
		}
		in.Posteriors = append(in.Posteriors, p)
		in.Truth = append(in.Truth, Truth{TimeNS: s * 1e9, At: at(float64(s), 0)})
	}
	in.Truth = append([]Truth{{TimeNS: -1e9, At: at(-2, 0)}}, in.Truth...)
	s, err := Of(in)
	if err != nil {
		t.Fatal(err)
	}
	// Vincenty's inverse stops at 1e-12 rad, which is 6 µm.
	const tol = 1e-5
	f := s.Figures // errors 1, 2, 3, 4
	if f.Scored != 4 || s.FiguresAll.Scored != 5 || s.Posteriors != 5 {
		t.Errorf("scored %d, all %d, of %d", f.Scored, s.FiguresAll.Scored, s.Posteriors)
	}
	near(t, "rmse_m", f.RMSEM, math.Sqrt(30.0/4), tol)
	near(t, "mean_m", f.MeanM, 2.5, tol)
	near(t, "p50_m", f.P50M, 2.5, tol)         // rank 1.5
	near(t, "p68_m", f.P68M, 3.04, tol)        // rank 2.04
	near(t, "p95_m", f.P95M, 3.85, tol)        // rank 2.85
	near(t, "p99_9_m", f.P999M, 3.997, tol)    // rank 2.997
	near(t, "max_m", f.MaxM, 4, tol)           //
	near(t, "anees", f.ANEES, 30.0/4, 4*8*tol) // (1 + 4 + 9 + 16)/4; d(e²) = 2e·de
	a := s.FiguresAll                          // errors 10, 1, 2, 3, 4; NEES by the mean: 0, 1, 4, 9, 16
	near(t, "rmse_m_all", a.RMSEM, math.Sqrt(130.0/5), tol)
	near(t, "max_m_all", a.MaxM, 10, tol)
	near(t, "anees_all", a.ANEES, 6, 4*8*tol)
	near(t, "located_after_s", s.LocatedAfterS, 2, 1e-12) // from second -1 to 1
	near(t, "located_after_m", s.LocatedAfterM, 3, tol)   // from -2 m to 1 m
	if s.LogEvidence != -4 || s.PosteriorSHA256 != "abc" || s.Version != "v1" || s.Architecture == "" {
		t.Errorf("%+v", s)
	}
	if f.RightRoadFraction != nil {
		t.Error("a right road without roads")
	}
}

// TestTruthElsewhen: truths of another hour are said to be that, and not that there
// are none.
func TestTruthElsewhen(t *testing.T) {
	in := Input{StartNS: 100e9, Posteriors: []*summary.Posterior{posterior(100, summary.Located), posterior(101, summary.Located)}}
	for s := range int64(3) {
		in.Truth = append(in.Truth, Truth{TimeNS: (3700 + s) * 1e9, At: at(0, 0)})
	}
	s, err := Of(in)
	if err != nil {
		t.Fatal(err)
	}
	if want := (Elsewhen{3, 3600, 3602}); s.TruthElsewhen == nil || *s.TruthElsewhen != want {
		t.Errorf("elsewhen %+v, want %+v", s.TruthElsewhen, want)
	}
	in.Truth[0].TimeNS, in.Truth[1].TimeNS = 100e9, 101e9
	if s, err = Of(in); err != nil || s.TruthElsewhen != nil || s.FiguresAll.Scored != 2 {
		t.Errorf("elsewhen %+v of truths of which two are not: %v", s.TruthElsewhen, err)
	}
	in.Truth = nil
	if s, err = Of(in); err != nil || s.TruthElsewhen != nil {
		t.Errorf("elsewhen %+v of no truths: %v", s.TruthElsewhen, err)
	}
}

// TestTruthOffMap: the road is at a distance that the truths come nearest to in the
// middle, or so far that nothing is known but that. One truth at a road is enough.
func TestTruthOffMap(t *testing.T) {
	for _, c := range []struct {
		eastM, roadM, want float64 // the truths' middle, the road's and how far it is; -1 for none
		text               string
	}{{100, 0, 96, " m from its"}, {-100, 0, 96, " m from its"}, {0, 50_000, 49_996, "at least 50 km"}, {0, 2e6, 1e6, "at least 1000 km"}, {3, 0, -1, ""}, {18, 0, -1, ""}} {
		looked := 0
		in := Input{StartNS: 1e9, Roads: func(p geo.LonLat, radiusM float64) []Road {
			looked++
			if m := math.Abs(frame.Forward(p).E - c.roadM); m <= radiusM {
				return []Road{{Chart: 7, DistM: m}, {Chart: 8, DistM: m}}
			}
			return nil
		}}
		const n = 2001 // from 4 m one way to 4 m the other way
		for s := range int64(n) {
			in.Truth = append(in.Truth, Truth{TimeNS: s * 1e9, At: at(c.eastM+4-8*float64(s)/(n-1), 0)})
			if s < 20 || s == n-1 {
				in.Posteriors = append(in.Posteriors, posterior(s, summary.Located))
			}
		}
		s, err := Of(in)
		if err != nil {
			t.Fatal(err)
		}
		switch got := s.TruthOffMap; {
		case c.want < 0 && got != nil:
			t.Errorf("%+v: %+v", c, got)
		case c.want >= 0 && (got == nil || got.Truths != n || got.NearestM > c.want+1e-3 || got.NearestM < 0.99*c.want || !strings.Contains(got.String(), c.text)):
			t.Errorf("%+v: %+v", c, got)
		case looked > 200: // 21 posteriors, some doublings, and one each hundredth of the way nearer
			t.Errorf("%+v: %d times looked up", c, looked)
		}
	}
}

// TestCoverageAndProtection uses errors well between the radii.
func TestCoverageAndProtection(t *testing.T) {
	in := Input{}
	for i, e := range []float64{0.5, 1.5, 2.5, 3.5, 4.5, 5.5} {
		p := posterior(int64(i), summary.Located)
		if i == 5 {
			p.Protection = summary.Protection{RadiusM: math.Inf(1)} // unbounded
		}
		in.Posteriors = append(in.Posteriors, p)
		in.Truth = append(in.Truth, Truth{TimeNS: int64(i) * 1e9, At: at(0, e)})
	}
	s, err := Of(in)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "coverage50", s.Figures.Coverage50, 1.0/6, 1e-12)
	near(t, "coverage95", s.Figures.Coverage95, 2.0/6, 1e-12)
	near(t, "coverage99", s.Figures.Coverage99, 3.0/6, 1e-12)
	if *s.Figures.BeyondProtection != 1 {
		t.Errorf("%d beyond protection, want 1: 4.5 m; 5.5 m has none", *s.Figures.BeyondProtection)
	}
}

// TestTooFewToSay: two hundred errors that rise steadily are worth few, and the first
// ten of them less than one: of their protection radii no interval is given.
func TestTooFewToSay(t *testing.T) {
	in := Input{}
	for i := range int64(200) {
		p := posterior(i, summary.Located)
		p.Protection.Bounded = i < 10
		in.Posteriors = append(in.Posteriors, p)
		in.Truth = append(in.Truth, Truth{TimeNS: i * 1e9, At: at(0, 3.5+0.1*float64(i))})
	}
	s, err := Of(in)
	if err != nil {
		t.Fatal(err)
	}
	if p := s.Protection; p.Beyond == 0 || p.Share == nil || p.Low != nil || p.High != nil || !(p.Trials > 0 && p.Trials < leastTrials) {
		t.Errorf("%+v", p)
	}
}

// TestNEES is by hand: P = [[4 1] [1 2]], r = 1: P + I = [[5 1] [1 3]], its
// inverse [[3 -1] [-1 5]]/14; e = (1, 2): (3 - 4 + 20)/14.
func TestNEES(t *testing.T) {
	if got := nees(1, 2, summary.Cov{EE: 4, EN: 1, NN: 2}, 1); math.Abs(got-19.0/14) > 1e-15 {
		t.Errorf("%v, want 19/14", got)
	}
	if got := nees(1, 2, summary.Cov{EE: 1, EN: 1, NN: 1}, 0); !math.IsInf(got, 1) {
		t.Errorf("a flat covariance gives %v", got)
	}
}

func TestInterpolate(t *testing.T) {
	deg := geo.FromDegrees
	truth := []Truth{
		{TimeNS: 0, At: deg(179.9999, 10), SigmaM: 1},
		{TimeNS: 2e9, At: deg(-179.9999, 10.0002), SigmaM: 3},
		{TimeNS: 4000000001, At: deg(0, 0)},
	}
	for _, c := range []struct {
		ns       int64
		lon, lat float64
		sigma    float64
		ok       bool
	}{
		{-1, 0, 0, 0, false},
		{0, 179.9999, 10, 1, true},
		{1e9, -180, 10.0001, 3, true}, // across the antimeridian
		{2e9, -179.9999, 10.0002, 3, true},
		{3e9, 0, 0, 0, false}, // neighbours 1 ns too far apart
		{4000000001, 0, 0, 0, true},
		{5e9, 0, 0, 0, false},
	} {
		got, ok := Interpolate(truth, c.ns)
		lon, lat := got.At.Degrees()
		if ok != c.ok || ok && (math.Abs(geo.WrapPi(geo.Rad(lon-c.lon))) > 1e-14 || math.Abs(lat-c.lat) > 1e-12 || got.SigmaM != c.sigma) {
			t.Errorf("at %d: %v, %v (%v), %v; want %+v", c.ns, lon, lat, got.SigmaM, ok, c)
		}
	}
	if _, ok := Interpolate(nil, 0); ok {
		t.Error("a truth from none")
	}
}

// TestRightRoad puts the most probable edge (7, its twin 8) at distances around
// the margin.
func TestRightRoad(t *testing.T) {
	p := posterior(0, summary.Located)
	for name, c := range map[string]struct {
		near []Road
		want bool
	}{
		"nearest":              {[]Road{{7, 2}, {9, 4}}, true},
		"the twin":             {[]Road{{8, 2}}, true},
		"just within":          {[]Road{{9, 2}, {7, 5}}, true},
		"just beyond":          {[]Road{{9, 2}, {7, 5.001}}, false},
		"within, but over 15":  {[]Road{{9, 13}, {7, 15.001}}, false},
		"another":              {[]Road{{9, 2}}, false},
		"none":                 {nil, false},
		"in any order of them": {[]Road{{7, 5.001}, {9, 2}}, false},
	} {
		if got := right(p, c.near); got != c.want {
			t.Errorf("%s: %v", name, got)
		}
	}
	p.Edges[0].Twin = -1 // one way: an edge numbered -1 does not exist
	if right(p, []Road{{-1, 0}}) {
		t.Error("no twin was taken for a road")
	}
	roads := func(geo.LonLat, float64) []Road { return []Road{{7, 0}} }
	other := posterior(1, summary.Located)
	other.Edges = other.Edges[1:]
	s, err := Of(Input{
		Posteriors: []*summary.Posterior{posterior(0, summary.Located), other}, Roads: roads,
		Truth: []Truth{{TimeNS: 0, At: at(0, 0)}, {TimeNS: 1e9, At: at(0, 0)}},
	})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "right_road_fraction", s.Figures.RightRoadFraction, 0.5, 0)
}

// TestJSON proves that the names are the documented ones, and that what is not
// known is null.
func TestJSON(t *testing.T) {
	s, err := Of(Input{Drive: "d", Posteriors: []*summary.Posterior{posterior(0, summary.Unsure)}})
	if err != nil {
		t.Fatal(err)
	}
	b, err := json.Marshal(s)
	if err != nil {
		t.Fatal(err)
	}
	var m map[string]any
	if err := json.Unmarshal(b, &m); err != nil {
		t.Fatal(err)
	}
	always := "drive posteriors log_evidence posterior_sha256 version architecture scored scored_all"
	figures := "rmse_m mean_m p50_m p68_m p95_m p99_9_m max_m anees anees_low anees_high coverage50 coverage95 coverage99 right_road_fraction beyond_protection"
	details := "p75_m along_mean_m along_rmse_m along_p95_m across_mean_m across_rmse_m across_p95_m independent log_score crps_m rank_along rank_across longest_wrong protection truth"
	if v, ok := m["sensors"].([]any); !ok || len(v) > 0 {
		t.Errorf("sensors is %v, want none", m["sensors"])
	}
	delete(m, "sensors")
	for name := range strings.FieldsSeq(always) {
		if v, ok := m[name]; !ok || v == nil {
			t.Errorf("%s is missing or null", name)
		}
		delete(m, name)
	}
	for name := range strings.FieldsSeq(figures + " " + strings.ReplaceAll(figures, " ", "_all ") + "_all located_after_s located_after_m " + details) {
		if v, ok := m[name]; !ok || v != nil {
			t.Errorf("%s is %v, want null", name, v)
		}
		delete(m, name)
	}
	if len(m) > 0 {
		t.Errorf("fields that nobody asked for: %v", m)
	}
}

func TestOrderIsChecked(t *testing.T) {
	defer func() {
		if recover() == nil {
			t.Error("posteriors out of order were taken")
		}
	}()
	_, _ = Of(Input{Posteriors: []*summary.Posterior{posterior(1, summary.Located), posterior(0, summary.Located)}})
}
