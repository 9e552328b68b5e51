package compare

import (
	"math"
	"strings"
	"testing"
)

// three drives: p95_m is 8, 10, 12 in A and 7, 10, 19 in B.
func comparison() *Comparison {
	low, high := -1.0, 7.0
	return &Comparison{Drives: 3, Figures: []Changed{
		{Name: "p95_m", Drives: 3, A: 10, B: 12, Difference: 2, Low: &low, High: &high, Better: 1, Worse: 1, WorstB: 19},
		{Name: "rmse_m", Drives: 1, A: 4, B: 3, Difference: -1},
	}}
}

func TestGate(t *testing.T) {
	c := comparison()
	for text, want := range map[string]bool{
		"p95_m > 8":                               true,
		"p95_m>12":                                false,
		"p95_m >= 12":                             true,
		"p95_m == 1.2e1":                          true,
		"p95_m != 12":                             false,
		"a.p95_m < b.p95_m":                       true,
		"diff.p95_m > 0.1*a.p95_m":                true,
		"low.p95_m > 0":                           false,
		"high.p95_m - low.p95_m == 8":             true,
		"worst.p95_m > 18 and drives >= 3":        true,
		"p95_m > 100 or rmse_m < -(-4)":           true,
		"not (p95_m > 8)":                         false,
		"not p95_m > 8":                           false,
		"not not p95_m > 8":                       true,
		"1 - 1 - 1 == -1":                         true, // from the left
		"2 + 3 * 4 == 14":                         true,
		"(2 + 3) * 4 == 20":                       true,
		"8 / 4 / 2 == 1":                          true,
		"p95_m > 8 and rmse_m > 8 or drives == 3": true, // and before or
		"p95_m > 8 or rmse_m > 8 and drives == 4": true,
		"better.p95_m + worse.p95_m == 2":         true,
		"((p95_m)) > ((8))":                       true,
	} {
		g, err := ParseGate(text)
		if err != nil {
			t.Errorf("%s: %v", text, err)
			continue
		}
		if got, err := g.Holds(c); err != nil || got != want {
			t.Errorf("%s: %v, %v", text, got, err)
		}
	}
}

func TestBadGates(t *testing.T) {
	for text, want := range map[string]string{
		"":                        "byte 1: it ends where",
		"p95_m":                   "byte 1: it is a number",
		"p95_m >":                 "byte 8: it ends where",
		"p95_m > 8 8":             "byte 11: nothing more",
		"p95 > 8":                 "byte 1: there is no figure p95",
		"c.p95_m > 8":             "there is no figure c.p95_m",
		"p95_m > 8 and 3":         "byte 15: and joins comparisons",
		"(p95_m > 8) + 1 > 2":     "+ joins numbers",
		"p95_m > (8 > 7)":         "> compares numbers",
		"not 3":                   "not is of a comparison",
		"-(1 > 2) > 0":            "- is of a number",
		"(p95_m > 8":              "a ) is missing",
		"p95_m > 1.2.3":           "1.2.3 is no number",
		"p95_m > 8 & 1":           `byte 11: '&' has no meaning`,
		"p95_m > ∞":               `'∞' has no meaning`,
		") > 1":                   "byte 1: ) where",
		strings.Repeat("(", 2000): "at most 1000",
	} {
		if _, err := ParseGate(text); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%.40s: %v, want %q", text, err, want)
		}
	}
	for text, want := range map[string]string{
		"max_m > 3":              "no drive has max_m",
		"p95_m > 8 or max_m > 3": "no drive has max_m", // although the first decides
		"low.rmse_m > 0":         "takes three drives",
	} {
		g, err := ParseGate(text)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := g.Holds(comparison()); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v, want %q", text, err, want)
		}
	}
}

// FuzzParseGate: no expression panics; what is taken is decided or says why not,
// and means the same in brackets.
func FuzzParseGate(f *testing.F) {
	for _, s := range []string{"p95_m > 8", "not (diff.p95_m > 0.1*a.p95_m or drives<3) and low.p95_m>=-1e2", "1/0 > 2"} {
		f.Add(s)
	}
	c := comparison()
	f.Fuzz(func(t *testing.T, text string) {
		g, err := ParseGate(text)
		if err != nil {
			if strings.ContainsAny(err.Error(), "\n") {
				t.Fatalf("more than one line: %q", err)
			}
			return
		}
		got, err := g.Holds(c)
		again, bad := ParseGate("(" + text + ")")
		if bad != nil {
			if len(text) > maxGate-2 {
				return
			}
			t.Fatalf("%q in brackets: %v", text, bad)
		}
		same, other := again.Holds(c)
		if got != same || (err == nil) != (other == nil) {
			t.Fatalf("%q: %v, in brackets %v", text, got, same)
		}
	})
}

func TestWorse(t *testing.T) {
	for _, c := range []struct {
		name string
		a, b float64
		is   bool // b is worse
	}{
		{"p95_m", 3, 4, true},
		{"coverage95", 0.95, 0.99, true},
		{"coverage95", 0.90, 0.96, false},
		{"right_road_fraction", 0.9, 0.8, true},
		{"anees", 2, 1, true},
		{"log_evidence", -5, -4, false},
	} {
		for i := range Figures {
			if f := &Figures[i]; f.Name == c.name && (f.worse(c.b) > f.worse(c.a)) != c.is {
				t.Errorf("%s from %v to %v", c.name, c.a, c.b)
			}
		}
	}
	if math.Abs(tolerance) > 1e-3 {
		t.Error("a tolerance that hides what matters")
	}
}
