package main

import (
	"fmt"
	"os"
	"slices"
	"strings"
	"testing"
	"time"
)

// The test binary stands in for a fuzz target's binary: with scriptVariable
// set it answers as that script says, the way a real one was seen to.
const scriptVariable = "LEADLINE_FUZZ_TEST_SCRIPT"

func TestMain(m *testing.M) {
	script := os.Getenv(scriptVariable)
	if script == "" {
		os.Exit(m.Run())
	}
	replaying := slices.Contains(os.Args, "-test.v")
	switch {
	case replaying && script == "empty corpus":
		fmt.Println("=== RUN   FuzzX\n--- PASS: FuzzX (0.00s)\nPASS")
	case replaying && script == "corpus fails":
		fmt.Println("=== RUN   FuzzX\n=== RUN   FuzzX/seed#0\n--- FAIL: FuzzX (0.00s)")
		os.Exit(1)
	case replaying:
		fmt.Println("=== RUN   FuzzX\n=== RUN   FuzzX/seed#0\n=== RUN   FuzzX/seed#1\n--- PASS: FuzzX (0.00s)\nPASS")
	case script == "finding":
		fmt.Println("fuzz: elapsed: 1s, minimizing\n--- FAIL: FuzzX (0.74s)\n    Failing input written to testdata/fuzz/FuzzX/45d2\nFAIL")
		os.Exit(1)
	case script == "finding as time ran out":
		fmt.Println("--- FAIL: FuzzX (0.74s)\n    context deadline exceeded\n    Failing input written to testdata/fuzz/FuzzX/45d2\nFAIL")
		os.Exit(1)
	case script == "time ran out":
		fmt.Println("fuzz: elapsed: 1s, execs: 12 (11/sec)\n--- FAIL: FuzzX (1.00s)\n    context deadline exceeded\nFAIL")
		os.Exit(1)
	default:
		fmt.Println("fuzz: elapsed: 1s, execs: 85392 (41484/sec), new interesting: 0 (total: 1)\nPASS")
	}
	os.Exit(0)
}

func TestLiveTellsFindingsFromTheEndOfTime(t *testing.T) {
	for script, want := range map[string]string{
		"nothing found":           "",
		"time ran out":            "",
		"finding":                 "Failing input written to",
		"finding as time ran out": "Failing input written to",
		"empty corpus":            "its corpus is empty",
		"corpus fails":            "its corpus fails",
	} {
		t.Setenv(scriptVariable, script)
		err := live(target{pkg: "p", dir: t.TempDir(), binary: os.Args[0], name: "FuzzX"}, time.Second, t.TempDir())
		if want == "" && err != nil || want != "" && (err == nil || !strings.Contains(err.Error(), want)) {
			t.Errorf("%s: got %v, want %q", script, err, want)
		}
	}
}

func TestTargetsAreRecognised(t *testing.T) {
	for source, want := range map[string]bool{
		"package p\n\nfunc FuzzRead(f *testing.F) {":   true,
		"package p\n\n// func FuzzRead(f *testing.F) ": false,
		"package p\n\nfunc TestFuzzRead(t *testing.T)": false,
	} {
		if got := declares.MatchString(source); got != want {
			t.Errorf("%q: got %v, want %v", source, got, want)
		}
	}
}
