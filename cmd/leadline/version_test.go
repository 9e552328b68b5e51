package main

import (
	"runtime"
	"strings"
	"testing"
)

// TestVersion: the command, the flag and scores name one version.
func TestVersion(t *testing.T) {
	t.Parallel()
	var b build
	readJSON(t, good(t, "version", "--json"), &b)
	if b.Version == "" || b.Commit == "" || b.Go != runtime.Version() || b.Platform != runtime.GOOS+"/"+runtime.GOARCH {
		t.Errorf("%+v", b)
	}
	text := good(t, "version")
	for _, want := range []string{b.Version, b.Commit, b.Go, b.Platform} {
		if !strings.Contains(text, want) {
			t.Errorf("version does not say %s: %s", want, text)
		}
	}
	if line := good(t, "--version"); line != "leadline "+b.Version+"\n" { // built without VCS
		t.Errorf("--version says %q", line)
	}
}
