package main

import (
	"reflect"
	"regexp"
	"strings"
	"testing"

	"leadline/engine/logfile"
)

// TestPagesLogs: the chapter on logs names every key of both files, and its
// examples, units and formats of times are taken.
func TestPagesLogs(t *testing.T) {
	chapter := chapter(t, readPage(t, "docs/drives.md"), "Logs of your own")
	wantWords(t, chapter, "key of a column file", keys(reflect.TypeFor[logfile.Columns](), "yaml"))
	wantWords(t, chapter, "key of a field", keys(reflect.TypeFor[logfile.Field](), "yaml"))
	wantWords(t, chapter, "key of a sentences file", keys(reflect.TypeFor[logfile.Sentences](), "yaml"))

	blocks := regexp.MustCompile("(?s)\n```yaml\n(.*?)```").FindAllStringSubmatch(chapter, -1)
	if len(blocks) != 2 {
		t.Fatalf("%d examples", len(blocks))
	}
	if _, err := logfile.ParseColumns("docs/drives.md", []byte(blocks[0][1])); err != nil {
		t.Error(err)
	}
	if _, err := logfile.ParseSentences("docs/drives.md", []byte(blocks[1][1])); err != nil {
		t.Error(err)
	}

	ticked := regexp.MustCompile("`([^`]+)`")
	between := func(from, to string) (names []string) {
		_, text, _ := strings.Cut(chapter, from)
		text, _, ok := strings.Cut(text, to)
		if !ok {
			t.Fatalf("docs/drives.md has no %q followed by %q", from, to)
		}
		for _, m := range ticked.FindAllStringSubmatch(text, -1) {
			names = append(names, m[1])
		}
		return names
	}
	// A unit that is none is told apart from one of another dimension.
	units := between(" Units: ", ". A sigma")
	for _, u := range units {
		text := "time: {column: t, format: unix_s}\nsensors: [{kind: travel, fields: {distance_m: {column: d, unit: " + u + "}}}]\n"
		if _, err := logfile.ParseColumns("x", []byte(text)); err != nil && strings.Contains(err.Error(), "is no unit") {
			t.Error(err)
		}
	}
	if len(units) < 25 {
		t.Errorf("%d units", len(units))
	}
	for _, f := range []string{"rfc3339", "unix_s", "unix_ms", "unix_us", "unix_ns", "since_s", "since_ms", "layout"} {
		if !strings.Contains(strings.Join(between("**Times.**", "**A sensor**"), " "), f) {
			t.Errorf("docs/drives.md does not name the format %s", f)
		}
	}
	for _, s := range []string{"DPT", "DBT", "HDT", "HDG", "HDM", "VHW", "ROT", "VBW", "VTG", "RMC", "GGA", "GLL", "ZDA"} {
		if !strings.Contains(chapter, s) {
			t.Errorf("docs/drives.md does not name %s", s)
		}
	}
}
