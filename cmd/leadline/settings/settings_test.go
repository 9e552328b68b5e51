package settings

import (
	"maps"
	"slices"
	"strings"
	"testing"
)

// TestParse: what is no file of settings is refused with its line.
func TestParse(t *testing.T) {
	keys := []string{"listen", "map", "max_cells"}
	got, err := Parse("s.yaml", []byte("# none yet\n\nmap:\n  - a=b.roads.arrow # the town\n  - \"c d\"\n  - ''\nlisten: 'x:1'\nmax_cells: 1_000\n"), keys)
	want := map[string]Value{"map": {[]string{"a=b.roads.arrow", "c d", ""}, 3}, "listen": {[]string{"x:1"}, 7}, "max_cells": {[]string{"1_000"}, 8}}
	if err != nil || !maps.EqualFunc(got, want, func(a, b Value) bool { return a.Line == b.Line && slices.Equal(a.Texts, b.Texts) }) {
		t.Errorf("%v, %v", got, err)
	}
	for _, text := range []string{"", "# nothing\n", "---\n"} {
		if got, err := Parse("s.yaml", []byte(text), keys); err != nil || len(got) != 0 {
			t.Errorf("%q: %v, %v", text, got, err)
		}
	}
	for _, c := range []struct{ text, where, what string }{
		{"listen: a\nlisten: b\n", "s.yaml:2", "already"},
		{"listen: a\nlisen: b\n", "s.yaml:2", `no setting "lisen"`},
		{"listen:\n", "s.yaml:1", "plain value"},
		{"listen: {a: b}\n", "s.yaml:1", "plain value"},
		{"map:\n  - a\n  - {b: c}\n", "s.yaml:3", "plain value"},
		{"map:\n  - [a]\n", "s.yaml:2", "plain value"},
		{"listen: &x a\nmap: *x\n", "s.yaml:1", "plain value"},
		{"listen: !!str a\n", "s.yaml:1", "plain value"},
		{"- listen\n", "s.yaml:1", "KEY: VALUE"},
		{"listen\n", "s.yaml:1", "KEY: VALUE"},
		{"listen: a\n---\nlisten: b\n", "s.yaml", "second document"},
		{"listen: [a\n", "s.yaml:1", ""},
		{"listen: a\n\tmap: b\n", "s.yaml:2", "no text"},
		{"listen: \xff\n", "s.yaml:1", "no text"},
		{strings.Repeat("#", MaxBytes+1), "s.yaml", "settings need less"},
	} {
		_, err := Parse("s.yaml", []byte(c.text), keys)
		if err == nil || !strings.HasPrefix(err.Error(), c.where+":") || !strings.Contains(err.Error(), c.what) {
			t.Errorf("%.40q: %v, want %s: … %s", c.text, err, c.where, c.what)
		}
	}
}

// FuzzParse: no file panics; what is taken has known keys and lines
// of the file.
func FuzzParse(f *testing.F) {
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) > 1<<14 {
			return
		}
		keys := []string{"listen", "map"}
		got, err := Parse("s.yaml", text, keys)
		if err != nil {
			if !strings.HasPrefix(err.Error(), "s.yaml:") {
				t.Errorf("%v", err)
			}
			return
		}
		for k, v := range got {
			if !slices.Contains(keys, k) || v.Line < 1 || v.Line > 1+strings.Count(string(text), "\n") {
				t.Errorf("%s: %+v", k, v)
			}
		}
	})
}
