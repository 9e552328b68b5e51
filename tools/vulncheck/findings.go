package main

import (
	"cmp"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
)

// standardLibrary is how govulncheck names the module of the Go distribution.
const standardLibrary = "stdlib"

// message is the part of govulncheck's JSON that is used here; see
// `go doc golang.org/x/vuln/scan`.
type message struct {
	Config *struct {
		ScannerVersion string `json:"scanner_version"`
	} `json:"config"`
	OSV *struct {
		ID      string `json:"id"`
		Summary string `json:"summary"`
	} `json:"osv"`
	Finding *struct {
		OSV          string  `json:"osv"`
		FixedVersion string  `json:"fixed_version"`
		Trace        []frame `json:"trace"`
	} `json:"finding"`
}

// frame is one step from the vulnerable symbol (first) to our code (last).
type frame struct {
	Module   string `json:"module"`
	Version  string `json:"version"`
	Package  string `json:"package"`
	Receiver string `json:"receiver"`
	Function string `json:"function"`
	Position *struct {
		Filename string `json:"filename"`
		Line     int    `json:"line"`
	} `json:"position"`
}

type finding struct {
	id, module, version, fixed, symbol, caller string
}

type findings struct {
	called    []finding // one a vulnerability and module
	uncalled  map[string]bool
	summaries map[string]string
}

// read collects findings from govulncheck's JSON. Output that lacks its
// heading is an error, so that silence is not taken for safety.
func read(r io.Reader) (*findings, error) {
	f := &findings{uncalled: map[string]bool{}, summaries: map[string]string{}}
	called := map[string]finding{}
	sawConfig := false
	for decoder := json.NewDecoder(r); ; {
		var m message
		if err := decoder.Decode(&m); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			return nil, fmt.Errorf("govulncheck's output: %w", err)
		}
		switch {
		case m.Config != nil:
			sawConfig = true
		case m.OSV != nil:
			f.summaries[m.OSV.ID] = m.OSV.Summary
		case m.Finding != nil && len(m.Finding.Trace) > 0:
			first := m.Finding.Trace[0]
			key := m.Finding.OSV + " " + first.Module
			if first.Function == "" { // the module or package is there, no call
				f.uncalled[key] = true
				continue
			}
			if _, ok := called[key]; ok {
				continue
			}
			called[key] = finding{
				id: m.Finding.OSV, module: first.Module, version: first.Version, fixed: m.Finding.FixedVersion,
				symbol: symbol(first), caller: caller(m.Finding.Trace),
			}
		}
	}
	if !sawConfig {
		return nil, errors.New("govulncheck printed no configuration: it did not run")
	}
	for key, c := range called {
		delete(f.uncalled, key)
		f.called = append(f.called, c)
	}
	slices.SortFunc(f.called, func(a, b finding) int {
		return cmp.Or(cmp.Compare(a.module, b.module), cmp.Compare(a.id, b.id))
	})
	return f, nil
}

func symbol(f frame) string {
	return strings.TrimPrefix(f.Package+"."+strings.TrimPrefix(f.Receiver, "*")+"."+f.Function, ".")
}

// caller names the place in our code that the trace starts from.
func caller(trace []frame) string {
	last := trace[len(trace)-1]
	if last.Position == nil {
		return symbol(last)
	}
	return fmt.Sprintf("%s:%d", last.Position.Filename, last.Position.Line)
}

// print lists the findings and says whether any of them fails the check.
func (f *findings) print(w io.Writer) (failed bool) {
	for _, c := range f.called {
		verdict := "FAILURE"
		if c.module == standardLibrary {
			verdict = "listed only"
		} else {
			failed = true
		}
		fixed := "no fixed version"
		if c.fixed != "" {
			fixed = "fixed in " + c.fixed
		}
		fmt.Fprintf(w, "vulncheck: %s: %s in %s %s (%s): %s; %s is reached from %s\n",
			verdict, c.id, c.module, c.version, fixed, f.summaries[c.id], c.symbol, c.caller)
	}
	fmt.Fprintf(w, "vulncheck: %d called, %d in modules required but not called\n", len(f.called), len(f.uncalled))
	return failed
}
