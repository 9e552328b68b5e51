package summary

import (
	"math"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// TestStatus walks the boundaries of the rule.
func TestStatus(t *testing.T) {
	for _, c := range []struct {
		contradicted bool
		offMap, best float64
		heavy        int
		radius       float64
		want         Status
	}{
		{true, 1, 1, 1, 1, Contradicted},
		{false, 0.5, 1, 1, 1, OffMap},
		{false, 0.4999, 1, 1, 1, Located},
		{false, 0, 0.95, 2, 25, Located},
		{false, 0, 0.9499, 2, 1, Ambiguous},
		{false, 0, 0.9499, 1, 1, Unsure},
		{false, 0, 0.95, 1, 25.01, Unsure},
		{false, 0, 0.95, 2, 25.01, Ambiguous},
		{false, 0, 0.04, 0, 1, Unsure},
		{false, math.NaN(), 1, 1, math.NaN(), Unsure},
	} {
		if got := statusOf(c.contradicted, c.offMap, c.best, c.heavy, c.radius, 25); got != c.want {
			t.Errorf("%+v: got %v", c, got)
		}
	}
	for s, name := range map[Status]string{1: "contradicted", 2: "off map", 3: "located", 4: "ambiguous", 5: "unsure", 0: "unknown"} {
		if s.String() != name {
			t.Errorf("status %d is called %q, want %q", s, s, name)
		}
	}
}

// TestBadInput proves that input no posterior can be made of gives one error
// that names it, and leaves the posterior alone.
func TestBadInput(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		say string
		set func(*Input)
	}{
		{"empty", func(in *Input) { *in.Cloud = filter.Cloud{} }},
		{"empty", func(in *Input) { in.Cloud.Mass[0], in.Cloud.Mass[1] = 0, 0 }},
		{"entry 1", func(in *Input) { in.Cloud.Mass[1] = nan }},
		{"entry 1", func(in *Input) { in.Cloud.Mass[1] = -0.1 }},
		{"entry 0", func(in *Input) { in.Cloud.East[0] = math.Inf(1) }},
		{"semi-definite", func(in *Input) { in.Cloud.VarEE[0] = -1 }},
		{"semi-definite", func(in *Input) { in.Cloud.VarEN[1] = 5 }},
		{"north variances", func(in *Input) { in.Cloud.VarNN = in.Cloud.VarNN[:1] }},
		{"means", func(in *Input) { in.Cloud.Mean = nil }},
		{"spacing", func(in *Input) { in.Belief.Lattice.SpacingM = 0 }},
		{"frame", func(in *Input) { in.Frame = geo.Frame{} }},
		{"belief", func(in *Input) { in.Belief = nil }},
		{"Lines", func(in *Input) { in.Belief.Dim = 1 }},
	} {
		in := planeInput([]gauss{{0.5, 0, 0, Cov{1, 0, 1}}, {0.5, 3, 0, Cov{1, 0, 1}}})
		c.set(in)
		s, _ := New(Options{})
		p := &Posterior{Status: 77}
		err := s.Summarize(p, in)
		if err == nil || !strings.Contains(err.Error(), c.say) {
			t.Errorf("want an error that says %q, got %v", c.say, err)
		}
		if p.Status != 77 {
			t.Errorf("%v: the posterior was touched", err)
		}
	}
	err := Options{AlertLimitM: -1, IntegrityRisk: 2, MaxModes: -1}.Validate()
	if err == nil || strings.Count(err.Error(), "summary:") != 3 {
		t.Errorf("want three complaints, got %v", err)
	}
}

// TestDegenerate proves that points, lines and distances without spread give
// finite figures.
func TestDegenerate(t *testing.T) {
	for name, gs := range map[string][]gauss{
		"a point":          {{1, 7, 7, Cov{}}},
		"two points":       {{0.5, 7, 7, Cov{}}, {0.5, 7, 9000, Cov{}}},
		"a line":           {{1, 7, 7, Cov{4, 4, 4}}},
		"zero mass beside": {{0, 1e5, 7, Cov{1, 0, 1}}, {1, 0, 0, Cov{1, 0, 1}}, {0, 5, 5, Cov{}}},
		"tiny":             {{1, 7, 7, Cov{1e-300, 0, 1e-300}}},
		"denormal mass":    {{5e-324, 700, 7, Cov{1, 0, 1}}, {1, 0, 0, Cov{1, 0, 1}}},
		"huge":             {{1, 7, 7, Cov{1e12, 0, 1e12}}},
	} {
		s, p := summarize(t, Options{}, planeInput(gs))
		if !geo.Finite(p.MeanFrame.E, p.Cov.EE, p.Cov.EN, p.Cov.NN, p.Radius50M, p.Radius95M, p.Radius99M, p.Protection.RadiusM, p.EntropyNats) {
			t.Errorf("%s: %+v", name, p)
		}
		if p.Radius50M > p.Radius95M || p.Radius99M > p.Protection.RadiusM {
			t.Errorf("%s: radii %v %v %v %v", name, p.Radius50M, p.Radius95M, p.Radius99M, p.Protection.RadiusM)
		}
		if name == "huge" {
			continue
		}
		if r, err := s.Region(0.95); err != nil || r.Holds < 0.95 {
			t.Errorf("%s: region %+v, %v", name, r, err)
		}
	}
}

// TestHash pins the layout of the hash.
func TestHash(t *testing.T) {
	h := NewHasher()
	p := &Posterior{TimeNS: 1, Status: Located, MeanFrame: geo.Point{E: 1, N: math.Copysign(0, -1)}, LogEvidence: -2}
	h.Add(p)
	// Python: hashlib.sha256(struct.pack('<qQdddddd', 1, 3, 1, 0, 0, 0, 0, -2)).
	const want = "bc8891aa9278b49215283597927a1c31441b4ef7597865fed89889fce0ddaeaa"
	one := h.Sum()
	if one != want {
		t.Errorf("hash %s, want %s", one, want)
	}
	h.Add(p)
	if h.Sum() == one {
		t.Error("a second posterior does not change the hash")
	}
}

// TestSameBits proves that a Summarizer's answer does not depend on what it did
// before, and that it allocates nothing once warm.
func TestSameBits(t *testing.T) {
	r := street(geo.Point{E: 300, N: 100}, geo.Point{E: 900, N: 450}, "q")
	in := roadInput(r, 1, []part{{0, 0.6, 200, 3}, {1, 0.4, 300, 9}})
	s, p := summarize(t, Options{}, in)
	first := *p
	var q Posterior
	if err := s.Summarize(&q, latticeInput(80, 3, 40, geo.Point{E: -4e4})); err != nil {
		t.Fatal(err)
	}
	if err := s.Summarize(p, in); err != nil {
		t.Fatal(err)
	}
	if p.MeanFrame != first.MeanFrame || p.Cov != first.Cov || p.Protection != first.Protection ||
		p.Radius50M != first.Radius50M || p.EntropyNats != first.EntropyNats || p.ModeCount != first.ModeCount {
		t.Errorf("second answer %+v, first %+v", p, first)
	}
	if n := testing.AllocsPerRun(20, func() {
		if err := s.Summarize(p, in); err != nil {
			t.Fatal(err)
		}
	}); n > 0 {
		t.Errorf("%v allocations a posterior", n)
	}
}
