// Command testreport runs `go test` with the arguments it is given, or without
// any runs every test of the module afresh, and adds what a reader asks next:
// which tests were skipped and why, and which were slowest. It closes with go
// test's own line for each package.
//
// With LEADLINE_NO_SKIP=1 a skipped test counts as a failure, except where it
// lacks an outside file that the last `make fetch` found to have vanished from
// its registry; that is printed as narrowed coverage.
package main

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
)

// everything are the arguments when none are given.
var everything = []string{"-count=1", "-timeout=15m", "./..."}

func main() {
	status, err := run(os.Args[1:])
	if err != nil {
		fmt.Fprintln(os.Stderr, "testreport:", err)
		status = 2
	}
	os.Exit(status)
}

func run(args []string) (int, error) {
	if len(args) == 0 {
		args = everything
	}
	vanished, err := readVanished()
	if err != nil {
		return 0, err
	}
	// The linter vets (make vet, make lint).
	cmd := exec.Command("go", append([]string{"test", "-json", "-vet=off"}, args...)...)
	cmd.Stderr = os.Stderr
	events, err := cmd.StdoutPipe()
	if err != nil {
		return 0, err
	}
	if err := cmd.Start(); err != nil {
		return 0, err
	}
	r := newReport(os.Stdout, os.Getenv("LEADLINE_NO_SKIP") == "1", vanished)
	readErr := r.read(events)
	waitErr := cmd.Wait()
	if readErr != nil {
		return 0, readErr
	}
	passed := r.close()
	var exit *exec.ExitError
	if errors.As(waitErr, &exit) {
		passed = false
	} else if waitErr != nil {
		return 0, waitErr
	}
	if !passed {
		return 1, nil
	}
	return 0, nil
}

// readVanished returns the outside files that the last fetch could not get.
// Without a fetch there are none.
func readVanished() (map[string]bool, error) {
	dir := os.Getenv("LEADLINE_OUTSIDE")
	if dir == "" {
		dir = filepath.Join("build", "outside")
	}
	list, err := os.ReadFile(filepath.Join(dir, "vanished.txt"))
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		return nil, err
	}
	vanished := map[string]bool{}
	for line := range bytes.Lines(list) {
		vanished[strings.TrimSpace(string(line))] = true
	}
	return vanished, nil
}
