package main

import (
	"strings"
	"testing"
)

// What go test -json says of a package with a test that passes, one that
// fails inside a subtest, one that is skipped and one that lacks a file; of a
// package that panics; and of one that does not build.
const stream = `{"Action":"start","Package":"p/a"}
{"Action":"output","Package":"p/a","Test":"TestQuick","Output":"=== RUN   TestQuick\n"}
{"Action":"output","Package":"p/a","Test":"TestQuick","Output":"chatter of a test that passes\n"}
{"Action":"pass","Package":"p/a","Test":"TestQuick","Elapsed":0.5}
{"Action":"output","Package":"p/a","Test":"TestBad/case","Output":"    a_test.go:7: got 1, want 2\n"}
{"Action":"fail","Package":"p/a","Test":"TestBad/case","Elapsed":9}
{"Action":"output","Package":"p/a","Test":"TestBad","Output":"--- FAIL: TestBad (9.00s)\n"}
{"Action":"fail","Package":"p/a","Test":"TestBad","Elapsed":9}
{"Action":"output","Package":"p/a","Test":"TestTool","Output":"    a_test.go:9: outside tool thing is not here: install it\n"}
{"Action":"output","Package":"p/a","Test":"TestTool","Output":"--- SKIP: TestTool (0.00s)\n"}
{"Action":"skip","Package":"p/a","Test":"TestTool","Elapsed":0}
{"Action":"output","Package":"p/a","Test":"TestFile","Output":"    a_test.go:9: outside data m.nc is not here: fetch it\n"}
{"Action":"skip","Package":"p/a","Test":"TestFile","Elapsed":0}
{"Action":"output","Package":"p/a","Output":"FAIL\n"}
{"Action":"output","Package":"p/a","Output":"FAIL\tp/a\t9.6s\n"}
{"Action":"fail","Package":"p/a","Elapsed":9.6}
{"Action":"output","Package":"p/b","Test":"TestDies","Output":"panic: ouch\n"}
{"Action":"output","Package":"p/b","Output":"FAIL\tp/b\t0.1s\n"}
{"Action":"fail","Package":"p/b","Elapsed":0.1}
{"ImportPath":"p/c","Action":"build-output","Output":"c.go:1:1: syntax error\n"}
{"Action":"output","Package":"p/c","Output":"FAIL\tp/c [build failed]\n"}
{"Action":"fail","Package":"p/c","Elapsed":0}
go: a complaint that is no event
`

func play(t *testing.T, events string, noSkip bool, vanished ...string) (string, bool) {
	t.Helper()
	set := map[string]bool{}
	for _, name := range vanished {
		set[name] = true
	}
	var out strings.Builder
	r := newReport(&out, noSkip, set)
	if err := r.read(strings.NewReader(events)); err != nil {
		t.Fatal(err)
	}
	passed := r.close()
	return out.String(), passed
}

func TestReportOfFailures(t *testing.T) {
	out, passed := play(t, stream, false)
	if passed {
		t.Error("a run with failures passed")
	}
	for _, want := range []string{
		"got 1, want 2", "--- FAIL: TestBad", "panic: ouch", "c.go:1:1: syntax error", "go: a complaint",
		"p/a TestTool: outside tool thing is not here: install it\n",
		"Slowest 4 of 4 tests:\n     9.00 s  p/a TestBad\n     0.50 s  p/a TestQuick\n",
		"\n1 passed, 2 failed, 2 skipped\n",
		"\nFAIL\tp/a\t9.6s\nFAIL\tp/b\t0.1s\nFAIL\tp/c [build failed]\nFAIL\n",
	} {
		if !strings.Contains(out, want) {
			t.Errorf("the report lacks %q:\n%s", want, out)
		}
	}
	if strings.Contains(out, "chatter") {
		t.Errorf("the report shows what a passing test printed:\n%s", out)
	}
}

func TestSkipsFailOnlyWhereAsked(t *testing.T) {
	const skipped = `{"Action":"output","Package":"p","Test":"TestFile","Output":"    a_test.go:9: outside data m.nc is not here: fetch it\n"}
{"Action":"skip","Package":"p","Test":"TestFile","Elapsed":0}
{"Action":"output","Package":"p","Output":"ok  \tp\t0.1s\n"}
{"Action":"pass","Package":"p","Elapsed":0.1}
`
	for _, c := range []struct {
		name     string
		noSkip   bool
		vanished []string
		passed   bool
		says     string
	}{
		{"a developer's machine", false, nil, true, "TestFile: outside data"},
		{"nothing may be skipped", true, nil, false, "FAILURE"},
		{"the file has vanished", true, []string{"m.nc"}, true, "COVERAGE NARROWED"},
		{"another file has vanished", true, []string{"n.nc"}, false, "FAILURE"},
	} {
		out, passed := play(t, skipped, c.noSkip, c.vanished...)
		if passed != c.passed || !strings.Contains(out, c.says) {
			t.Errorf("%s: passed %v, want %v with %q:\n%s", c.name, passed, c.passed, c.says, out)
		}
	}
}

func TestNoTestIsNoPass(t *testing.T) {
	if out, passed := play(t, "", false); passed || !strings.Contains(out, "no test ran") {
		t.Errorf("an empty run passed %v:\n%s", passed, out)
	}
}
