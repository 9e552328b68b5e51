package main

import (
	"bufio"
	"cmp"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"regexp"
	"slices"
	"strings"
)

// slowest is the number of tests listed as slowest.
const slowest = 10

// maxEventBytes bounds one line of go test's JSON: a test that prints a longer
// line is an error, not a reason to grow without end.
const maxEventBytes = 16 << 20

// event is one line of `go test -json` (see `go doc test2json`).
type event struct {
	Action     string
	Package    string
	ImportPath string
	Test       string
	Elapsed    float64 // seconds
	Output     string
}

type testKey struct{ pkg, test string }

type timed struct {
	testKey
	seconds float64
}

type packageLine struct{ pkg, line string }

type skip struct {
	testKey
	reason string
}

// report collects events and prints as it goes what go test would have
// printed without -v.
type report struct {
	w        io.Writer
	noSkip   bool
	vanished map[string]bool

	output                  map[testKey]*strings.Builder // of tests still running
	packages                []packageLine                // go test's line for each package
	times                   []timed                      // top-level tests
	skips                   []skip
	passed, failed, skipped int // tests and subtests
	failedPackages          int
}

func newReport(w io.Writer, noSkip bool, vanished map[string]bool) *report {
	return &report{w: w, noSkip: noSkip, vanished: vanished, output: map[testKey]*strings.Builder{}}
}

// read takes events until the stream ends. A line that is no event, such as a
// complaint of the go command itself, is printed as it is.
func (r *report) read(stream io.Reader) error {
	lines := bufio.NewScanner(stream)
	lines.Buffer(make([]byte, 64<<10), maxEventBytes)
	for lines.Scan() {
		var e event
		if err := json.Unmarshal(lines.Bytes(), &e); err != nil || e.Action == "" {
			fmt.Fprintln(r.w, lines.Text())
			continue
		}
		r.take(e)
	}
	if err := lines.Err(); errors.Is(err, bufio.ErrTooLong) {
		return fmt.Errorf("a test printed a line of more than %d bytes", maxEventBytes)
	} else if err != nil {
		return err
	}
	return nil
}

func (r *report) take(e event) {
	key := testKey{e.Package, e.Test}
	switch {
	case e.Action == "build-output":
		fmt.Fprint(r.w, e.Output)
	case e.Test == "":
		r.takePackage(e)
	case e.Action == "output":
		buffer := r.output[key]
		if buffer == nil {
			buffer = &strings.Builder{}
			r.output[key] = buffer
		}
		if !strings.HasPrefix(e.Output, "=== ") { // RUN, PAUSE, CONT, NAME
			buffer.WriteString(e.Output)
		}
	case e.Action == "pass" || e.Action == "fail" || e.Action == "skip":
		said := ""
		if buffer := r.output[key]; buffer != nil {
			said = buffer.String()
			delete(r.output, key)
		}
		if !strings.Contains(e.Test, "/") {
			r.times = append(r.times, timed{key, e.Elapsed})
		}
		switch e.Action {
		case "pass":
			r.passed++
		case "fail":
			r.failed++
			fmt.Fprint(r.w, said)
		case "skip":
			r.skipped++
			r.skips = append(r.skips, skip{key, reason(said)})
		}
	}
}

// takePackage handles the events of a package as a whole.
func (r *report) takePackage(e event) {
	switch e.Action {
	case "output":
		line := e.Output
		if line == "PASS\n" || line == "FAIL\n" {
			return // the line that names the package follows
		}
		fmt.Fprint(r.w, line)
		for _, prefix := range []string{"ok  \t", "FAIL\t", "?   \t", "\t"} {
			if strings.HasPrefix(line, prefix) && strings.Contains(line, e.Package) {
				r.packages = append(r.packages, packageLine{e.Package, line})
				break
			}
		}
	case "fail":
		r.failedPackages++
		// What a test had printed when its process died.
		var open []testKey
		for key := range r.output {
			if key.pkg == e.Package {
				open = append(open, key)
			}
		}
		slices.SortFunc(open, func(a, b testKey) int { return cmp.Compare(a.test, b.test) })
		for _, key := range open {
			fmt.Fprint(r.w, r.output[key].String())
			delete(r.output, key)
		}
	}
}

// place is the "file_test.go:12: " that go test puts before a message.
var place = regexp.MustCompile(`^\s*\S+\.go:\d+: `)

// reason returns the last message a skipped test printed.
func reason(said string) string {
	found := "no reason given"
	for line := range strings.Lines(said) {
		if strings.HasPrefix(strings.TrimSpace(line), "--- SKIP") {
			continue
		}
		if text := strings.TrimSpace(place.ReplaceAllString(line, "")); text != "" {
			found = text
		}
	}
	return found
}

// outsideData is how package fixtures/outside words a file it does not have.
var outsideData = regexp.MustCompile(`^outside data (\S+) is not here`)

// close prints the closing report and says whether the run passed.
func (r *report) close() bool {
	passed := r.failed == 0 && r.failedPackages == 0
	if len(r.skips) > 0 {
		fmt.Fprintln(r.w, "\nSkipped:")
	}
	for _, s := range r.skips {
		note := ""
		if data := outsideData.FindStringSubmatch(s.reason); data != nil && r.vanished[data[1]] {
			note = "COVERAGE NARROWED, its registry does not give it: "
		} else if r.noSkip {
			note = "FAILURE, nothing may be skipped here: "
			passed = false
		}
		fmt.Fprintf(r.w, "  %s %s: %s%s\n", s.pkg, s.test, note, s.reason)
	}

	slices.SortStableFunc(r.times, func(a, b timed) int { return cmp.Compare(b.seconds, a.seconds) })
	n := min(slowest, len(r.times))
	fmt.Fprintf(r.w, "\nSlowest %d of %d tests:\n", n, len(r.times))
	for _, t := range r.times[:n] {
		fmt.Fprintf(r.w, "  %7.2f s  %s %s\n", t.seconds, t.pkg, t.test)
	}
	if r.passed+r.failed+r.skipped == 0 {
		fmt.Fprintln(r.w, "no test ran")
		passed = false
	}

	fmt.Fprintf(r.w, "\n%d passed, %d failed, %d skipped\n\n", r.passed, r.failed, r.skipped)
	slices.SortStableFunc(r.packages, func(a, b packageLine) int { return cmp.Compare(a.pkg, b.pkg) })
	for _, p := range r.packages {
		fmt.Fprint(r.w, p.line)
	}
	if !passed {
		fmt.Fprintln(r.w, "FAIL")
	}
	return passed
}
