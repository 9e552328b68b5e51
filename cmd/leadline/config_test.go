package main

import (
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"github.com/spf13/cobra"

	"leadline/cmd/leadline/settings"
)

// withEnv runs a command to its end with variables beside those of the test.
func withEnv(t *testing.T, env []string, args ...string) (stdout, stderr string, status int) {
	t.Helper()
	for _, kv := range env {
		name, value, _ := strings.Cut(kv, "=")
		t.Setenv(name, value)
	}
	return leadline(t, args...)
}

// TestPrecedence: flag before variable before file before default, a list as a
// whole; and --print-config says which, as a file that gives the same again.
func TestPrecedence(t *testing.T) {
	file := writeText(t, filepath.Join(t.TempDir(), "leadline.yaml"), `# settings
map: [file=a.roads.arrow, other=b.roads.arrow]
listen: 127.0.0.1:1111
max_vehicles: 11
max_cells: 111
log_format: json
suite: "my van.yaml"
`)
	out, errs, status := withEnv(t, []string{
		"LEADLINE_CONFIG=" + file, "LEADLINE_LISTEN=127.0.0.1:2222", "LEADLINE_MAX_VEHICLES=22",
		"LEADLINE_MAP=one=c.roads.arrow,two=d.roads.arrow", "LEADLINE_DRAIN_TIMEOUT=",
	}, "serve", "--print-config", "--listen", "127.0.0.1:3333")
	if status != 0 || errs != "" {
		t.Fatalf("status %d: %s", status, errs)
	}
	for _, want := range []string{
		"listen: 127.0.0.1:3333 # flag --listen",
		"max_vehicles: 22 # environment LEADLINE_MAX_VEHICLES",
		"max_cells: 111 # file " + file + ":5",
		"log_format: json # file " + file + ":6",
		"drain_timeout: 10s # default",
		"map: # environment LEADLINE_MAP - one=c.roads.arrow - two=d.roads.arrow",
		"suite: # file " + file + ":7 - \"my van.yaml\"",
		"plain_text_beyond_loopback: false # default",
	} {
		if !strings.Contains(strings.Join(strings.Fields(out), " "), want) {
			t.Errorf("--print-config does not say %q:\n%s", want, out)
		}
	}
	again := writeText(t, filepath.Join(t.TempDir(), "again.yaml"), out)
	same, errs, _ := withEnv(t, []string{"LEADLINE_CONFIG=", "LEADLINE_LISTEN=", "LEADLINE_MAX_VEHICLES=", "LEADLINE_MAP="},
		"serve", "--print-config", "--config", again)
	values := func(text string) string {
		var b strings.Builder
		for line := range strings.Lines(text) {
			before, _, _ := strings.Cut(line, " #")
			b.WriteString(strings.TrimSpace(before) + "\n")
		}
		return b.String()
	}
	if errs != "" || values(same) != values(out) {
		t.Errorf("as a file it gives\n%s%s instead of\n%s", errs, same, out)
	}
}

// TestSettingsReach: variables and files reach the commands that share
// settings, and what they say wrong is named with its place.
func TestSettingsReach(t *testing.T) {
	dir := t.TempDir()
	drive := writeText(t, filepath.Join(dir, "d.drive.jsonl"), head+travel)
	address := freeAddress(t)
	t.Setenv("LEADLINE_SERVER", address)
	bad(t, []string{address, "no answer"}, "where", "van")
	bad(t, []string{address, "no answer"}, "feed", drive)
	t.Setenv("LEADLINE_SERVER", "")
	file := func(text string) string { return writeText(t, filepath.Join(dir, "s.yaml"), text) }
	bad(t, []string{address, "no answer"}, "where", "van", "--config", file("server: "+address+"\n"))
	bad(t, []string{"s.yaml:2", "max_vehicles", `"many"`, "whole number"}, "serve", "--config", file("\nmax_vehicles: many\n"))
	bad(t, []string{"s.yaml:1", "drain_timeout", `"10"`, "10s"}, "serve", "--config", file("drain_timeout: 10\n"))
	bad(t, []string{"s.yaml:1", "log_level", `"loud"`, "debug"}, "serve", "--config", file("log_level: loud\n"))
	bad(t, []string{"none.yaml", "check the path"}, "serve", "--config", filepath.Join(dir, "none.yaml"))
	bad(t, []string{"no map", "LEADLINE_MAP"}, "serve")
	bad(t, []string{"--log-format", `"xml"`, "text or json"}, "serve", "--log-format", "xml")
	t.Setenv("LEADLINE_MAX_CELLS", "1e6")
	bad(t, []string{"LEADLINE_MAX_CELLS", `"1e6"`, "whole number"}, "replay", drive)
}

// TestServersAddress: every command that asks a server takes its address from
// the settings.
func TestServersAddress(t *testing.T) {
	commands(newRoot(), func(c *cobra.Command) {
		for _, name := range []string{"at", "to"} {
			f := c.Flags().Lookup(name)
			if f == nil || f.DefValue != defaultAddress {
				continue
			}
			if !slices.Contains(commandOptions(c), option{"server", name}) {
				t.Errorf("`%s --%s` is no setting: call settable(c, %q)", c.CommandPath(), name, name+"=server")
			}
		}
	})
}

// TestEveryFlagOfServe: whatever serve can be told on the command line it can
// be told by the environment and a file.
func TestEveryFlagOfServe(t *testing.T) {
	c, _, err := newRoot().Find([]string{"serve"})
	if err != nil {
		t.Fatal(err)
	}
	var options []string
	for _, o := range commandOptions(c) {
		options = append(options, o.flag)
	}
	for _, name := range flagNames(c) {
		if !slices.Contains([]string{"help", "print-config"}, name) && !slices.Contains(options, name) {
			t.Errorf("--%s is no setting: add it to settable", name)
		}
	}
}

// TestUnknownVariables: a variable that names no setting is said in the log.
func TestUnknownVariables(t *testing.T) {
	t.Setenv("LEADLINE_LISTN", "x")
	if names := unknownVariables(newRoot()); !slices.Contains(names, "LEADLINE_LISTN") || slices.Contains(names, "LEADLINE_LISTEN") {
		t.Errorf("%q", names)
	}
}

// TestPagesSettings: docs/server.md has the table of all settings as the code has
// them, and its example of a file is one.
func TestPagesSettings(t *testing.T) {
	page := readPage(t, "docs/server.md")
	if table := optionsTable(newRoot()); !strings.Contains(page, "\n"+table) {
		t.Errorf("docs/server.md does not hold this table of settings:\n%s", table)
	}
	_, example, found := strings.Cut(page, "\n```yml\n")
	example, _, _ = strings.Cut(example, "```")
	if values, err := settings.Parse("docs/server.md", []byte(example), optionKeys(newRoot())); !found || err != nil || len(values) < 3 {
		t.Errorf("docs/server.md's file of settings: %v, %v", values, err)
	}
}
