package main

import (
	"strings"
	"testing"
)

const heading = `{"config":{"scanner_version":"v1"}}
{"osv":{"id":"GO-1","summary":"third party"}}
{"osv":{"id":"GO-2","summary":"standard library"}}
`

const thirdPartyRequired = `{"finding":{"osv":"GO-1","trace":[{"module":"example.org/m","version":"v1.0.0"}]}}
`

const thirdPartyCalled = `{"finding":{"osv":"GO-1","fixed_version":"v1.0.1","trace":[
 {"module":"example.org/m","version":"v1.0.0","package":"example.org/m/p","receiver":"*T","function":"Do"},
 {"module":"leadline","package":"leadline/x","function":"run","position":{"filename":"x/x.go","line":7}}]}}
`

const libraryCalled = `{"finding":{"osv":"GO-2","fixed_version":"v1.99.0","trace":[
 {"module":"stdlib","version":"v1.98.0","package":"net","function":"Dial"},
 {"module":"leadline","package":"leadline/x","function":"run"}]}}
`

func TestWhatFails(t *testing.T) {
	for _, c := range []struct {
		name, stream string
		failed       bool
		says         string
	}{
		{"nothing", "", false, "0 called, 0 in modules"},
		{"required, not called", thirdPartyRequired, false, "0 called, 1 in modules"},
		{"called", thirdPartyRequired + thirdPartyCalled, true, "FAILURE: GO-1 in example.org/m v1.0.0 (fixed in v1.0.1): third party; example.org/m/p.T.Do is reached from x/x.go:7"},
		{"standard library", libraryCalled, false, "listed only: GO-2"},
	} {
		found, err := read(strings.NewReader(heading + c.stream))
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		var out strings.Builder
		if failed := found.print(&out); failed != c.failed || !strings.Contains(out.String(), c.says) {
			t.Errorf("%s: failed %v, want %v with %q:\n%s", c.name, failed, c.failed, c.says, out.String())
		}
	}
}

func TestSilenceIsNoAnswer(t *testing.T) {
	for _, stream := range []string{"", "{", thirdPartyCalled} {
		if _, err := read(strings.NewReader(stream)); err == nil {
			t.Errorf("output %q was taken for an answer", stream)
		}
	}
}
