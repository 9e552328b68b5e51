package sweep

import (
	"strings"
	"testing"
)

func TestCombine(t *testing.T) {
	got, err := Combine([]Change{{"a", "1"}, {"b", "x"}, {"a", "2"}, {"b", "y"}})
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, s := range got {
		names = append(names, s.Name)
	}
	if want := "a=1,b=x a=1,b=y a=2,b=x a=2,b=y"; strings.Join(names, " ") != want {
		t.Errorf("%v, want %s", names, want)
	}
	if _, err := Combine([]Change{{"a", "1"}, {"a", "1"}}); err == nil {
		t.Error("one value twice")
	}
	var many []Change
	for _, key := range []string{"a", "b", "c"} {
		for i := range 30 {
			many = append(many, Change{key, strings.Repeat("1", i+1)})
		}
	}
	if _, err := Combine(many); err == nil || !strings.Contains(err.Error(), "10000") {
		t.Errorf("27000 settings: %v", err)
	}
}

// TestNames: what no folder may be called becomes one that differs where the
// settings do.
func TestNames(t *testing.T) {
	seen := map[string]bool{}
	for _, value := range []string{"1", "a/b", "a b", "../x", strings.Repeat("9", 300), strings.Repeat("9", 301), "."} {
		name := nameOf([]Change{{"k", value}})
		if seen[name] || len(name) > maxName || strings.ContainsAny(name, "/ ") || strings.HasPrefix(name, ".") {
			t.Errorf("%q is called %q", value, name)
		}
		seen[name] = true
	}
	if nameOf(nil) != "given" {
		t.Error("nothing is not given")
	}
}

func TestParsePlan(t *testing.T) {
	plan, err := ParsePlan("s.yaml", []byte(`
vary:
  vehicle.corner_sigma_m: [2, 3.5]
settings:
  - name: given
  - name: soft
    set: {vehicle.hold_s: 2, session.max_cells: 500}
hold_out: ["night-*"]
`))
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, s := range plan.Settings {
		names = append(names, s.Name)
	}
	if got := strings.Join(names, " "); got != "vehicle.corner_sigma_m=2 vehicle.corner_sigma_m=3.5 given soft" {
		t.Errorf("%s", got)
	}
	if c := plan.Settings[3].Changes; len(c) != 2 || c[0].String() != "session.max_cells=500" || !matches(plan.HoldOut, "night-7") || matches(plan.HoldOut, "day") {
		t.Errorf("%+v", plan)
	}
	for text, want := range map[string]string{
		"very: {}":                               "there is no such key",
		"vary: {a: []}":                          "has no values",
		"vary: {a: [[1]]}":                       "give numbers or texts",
		"vary: {a: [1, 1]}":                      "twice",
		"settings: [{name: a/b}]":                "cannot name a folder",
		"settings: [{name: given, set: {a: 1}}]": "nothing is set",
		"settings: [{name: a}, {name: a}]":       "twice",
		"hold_out: ['[']":                        "no pattern",
	} {
		if _, err := ParsePlan("s.yaml", []byte(text)); err == nil || !strings.Contains(err.Error(), want) || !strings.Contains(err.Error(), "settings s.yaml:1") {
			t.Errorf("%s: %v, want %q", text, err, want)
		}
	}
	for _, text := range []string{"", "a", "=1", "a="} {
		if _, err := ParseChange(text); err == nil {
			t.Errorf("%q was taken", text)
		}
	}
}

// FuzzParsePlan: no file of settings panics, and each setting has a folder of its
// own.
func FuzzParsePlan(f *testing.F) {
	f.Add([]byte("vary: {a: [1, 2], b: [x]}\nhold_out: [c]\n"))
	f.Add([]byte("settings:\n  - set: {a: true}\n  - {name: n, set: {b: 1e9}}\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		plan, err := ParsePlan("f", text)
		if err != nil {
			return
		}
		seen := map[string]bool{}
		for _, s := range plan.Settings {
			if s.Name == "" || seen[s.Name] || strings.ContainsAny(s.Name, "/\\") || s.Name[0] == '.' || len(s.Name) > maxName {
				t.Fatalf("a setting called %q", s.Name)
			}
			seen[s.Name] = true
		}
	})
}
