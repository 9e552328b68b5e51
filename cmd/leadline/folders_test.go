package main

import (
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// closed is a folder in which nobody can make a file, whoever runs the tests.
func closed(t *testing.T) string {
	t.Helper()
	const folder = "/proc/self"
	if _, err := os.Stat(folder); err != nil {
		t.Skip("there is no folder that refuses every user")
	}
	return folder
}

// TestNotWritten: what cannot be written is refused before anything is done, by the
// name of the flag and never by that of a file nobody asked for.
func TestNotWritten(t *testing.T) {
	t.Parallel()
	dir, ro := t.TempDir(), closed(t)
	town, drive := compiledTown(t, dir, 20)
	for name, c := range map[string]struct {
		args  []string
		words []string
	}{
		"uploads":      {[]string{"serve", "--map", town, "--uploads", ro}, []string{"--uploads " + ro, "may write"}},
		"data":         {[]string{"serve", "--map", town, "--data", ro + "/x"}, []string{"--data " + ro + "/x", "may write"}},
		"data itself":  {[]string{"serve", "--map", town, "--data", ro}, []string{"--data " + ro, "may write"}},
		"keep":         {[]string{"feed", "udp:127.0.0.1:0", "--vehicle", "v", "--to", freeAddress(t), "--keep", drive + "/z.keep"}, []string{"leadline: --keep " + drive + "/z.keep"}},
		"keep, nobody": {[]string{"feed", "udp:127.0.0.1:0", "--vehicle", "v", "--to", freeAddress(t), "--keep", filepath.Join(dir, "none", "z.keep")}, []string{"leadline: --keep ", "there is no folder", "make it first"}},
		"kept nothing": {[]string{"feed", "--keep", filepath.Join(dir, "none.keep")}, []string{"leadline: --keep ", "none.keep: there is no such file", "path"}},
		"roads":        {[]string{"map", "roads", filepath.Join(dir, "town.json"), "-o", ro + "/t.roads.arrow"}, []string{"-o " + ro + "/t.roads.arrow", "may write"}},
	} {
		t.Run(name, func(t *testing.T) {
			bad(t, c.words, c.args...)
			if _, errs, _ := leadline(t, c.args...); strings.Contains(errs, "outbox:") || strings.Contains(errs, "journal:") || strings.Contains(errs, "/.t.") {
				t.Error(errs)
			}
		})
	}
	if hidden, _ := filepath.Glob(filepath.Join(dir, ".*")); len(hidden) > 0 {
		t.Errorf("left behind: %q", hidden)
	}
}

// TestWrongUse: what is wrong is named, with what to do.
func TestWrongUse(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	bad(t, []string{`unknown command "frobnicate"`, "leadline --help"}, "frobnicate", "--all")
	bad(t, []string{`unknown command "frobnicate"`, "leadline map --help"}, "map", "frobnicate", "--all")
	bad(t, []string{"unknown flag: --all"}, "--all")
	bad(t, []string{"--timeout is 0s", "10s"}, "where", "van", "--timeout", "0s")
	bad(t, []string{"--timeout is -1s", "10s"}, "erase", "van", "--yes", "--timeout", "-1s")
	bad(t, []string{dir + " is a folder", "drive file"}, "replay", dir)
	bad(t, []string{dir + " is a folder"}, "map", "roads", dir, "-o", filepath.Join(dir, "t.roads.arrow"))

	// A server that takes the call and never answers.
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	silent := l.Addr().String()
	began := time.Now()
	bad(t, []string{"no answer", silent, "within 300ms", "--timeout"}, "where", "van", "--at", silent, "--timeout", "300ms")
	if time.Since(began) > 20*time.Second {
		t.Error("it waited for longer than it was told to")
	}
}
