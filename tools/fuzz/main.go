// Command fuzz runs every fuzz target of the module live, as many at once as there
// are processors, with a share each of one total time. It fails when a target finds something
// or has an empty corpus. A finding is left under testdata/fuzz of its package,
// where the ordinary tests run it from then on.
//
// Building the targets is not counted: they need a build of their own, with
// coverage instrumentation, which the Go build cache keeps. With -part only some
// packages have their turn; their corpora are run by the ordinary tests in any case.
package main

import (
	"bytes"
	"context"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path"
	"path/filepath"
	"regexp"
	"runtime"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"time"
)

// leastShare is the shortest run that still does more than replay the corpus.
const leastShare = 500 * time.Millisecond

// graceTime is what a target may take beyond its share, to start, to replay
// its corpus and to shrink a finding, before it counts as hanging.
const graceTime = 2 * time.Minute

// shrinking is how often an input that reaches new code, or a finding, may be
// tried in a shorter form. By default the engine shrinks for a minute, which
// with a share of seconds would leave no time for new inputs.
const shrinking = "20x"

type target struct {
	pkg, dir, binary, name string
}

func main() {
	total := flag.Duration("total", time.Minute, "time that all targets share")
	part := flag.String("part", "0/1", "which part of the packages, and of how many: 0/3, 1/3 or 2/3 is a third of them")
	flag.Parse()
	var which, of int
	if n, err := fmt.Sscanf(*part, "%d/%d", &which, &of); n != 2 || err != nil || which < 0 || which >= of {
		fmt.Fprintf(os.Stderr, "fuzz: -part is %q: give 0/3 for the first third of the packages\n", *part)
		os.Exit(2)
	}
	patterns := flag.Args()
	if len(patterns) == 0 {
		patterns = []string{"./..."}
	}
	if err := run(*total, patterns, which, of); err != nil {
		fmt.Fprintln(os.Stderr, "fuzz:", err)
		os.Exit(1)
	}
}

func run(total time.Duration, patterns []string, part, of int) error {
	work, err := os.MkdirTemp("", "leadline-fuzz-")
	if err != nil {
		return err
	}
	defer os.RemoveAll(work)
	targets, err := find(patterns, part, of, work)
	if err != nil {
		return err
	}
	if len(targets) == 0 {
		fmt.Println("fuzz: no fuzz targets")
		return nil
	}
	cache, err := output("", "go", "env", "GOCACHE")
	if err != nil {
		return err
	}
	share := max(total/time.Duration(len(targets)), leastShare)
	fmt.Printf("fuzz: %d targets, %.1f s each\n", len(targets), share.Seconds())
	var bad atomic.Int64
	together(len(targets), func(i int) {
		t := targets[i]
		if err := live(t, share, filepath.Join(strings.TrimSpace(cache), "fuzz", t.pkg)); err != nil {
			bad.Add(1)
			fmt.Printf("fuzz: %s %s: %v\n", t.pkg, t.name, err)
		}
	})
	if n := bad.Load(); n > 0 {
		return fmt.Errorf("%d of %d targets failed", n, len(targets))
	}
	return nil
}

// together calls do for 0 to n-1, as many at once as there are processors.
func together(n int, do func(i int)) {
	free := make(chan struct{}, runtime.GOMAXPROCS(0))
	var all sync.WaitGroup
	for i := range n {
		free <- struct{}{}
		all.Go(func() {
			do(i)
			<-free
		})
	}
	all.Wait()
}

// declares finds the packages worth an instrumented build; the test binary
// itself then lists its targets.
var declares = regexp.MustCompile(`(?m)^func Fuzz\w*\(`)

func find(patterns []string, part, of int, work string) ([]target, error) {
	const format = `{{.ImportPath}}{{"\t"}}{{.Dir}}{{range .TestGoFiles}}{{"\t"}}{{.}}{{end}}{{range .XTestGoFiles}}{{"\t"}}{{.}}{{end}}`
	list, err := output("", "go", append([]string{"list", "-f", format}, patterns...)...)
	if err != nil {
		return nil, err
	}
	var with [][2]string // package and folder
	for line := range strings.Lines(list) {
		fields := strings.Split(strings.TrimSpace(line), "\t")
		pkg, dir, files := fields[0], fields[1], fields[2:]
		has := false
		for _, file := range files {
			text, err := os.ReadFile(filepath.Join(dir, file))
			if err != nil {
				return nil, err
			}
			has = has || declares.Match(text)
		}
		if has {
			with = append(with, [2]string{pkg, dir})
		}
	}
	kept := with[:0]
	for i := part; i < len(with); i += of {
		kept = append(kept, with[i])
	}
	with = kept
	// Linking keeps one processor busy: so several at once.
	in, errs := make([][]target, len(with)), make([]error, len(with))
	together(len(with), func(i int) { in[i], errs[i] = targetsOf(with[i][0], with[i][1], work) })
	return slices.Concat(in...), errors.Join(errs...)
}

// targetsOf builds a package's targets.
func targetsOf(pkg, dir, work string) (targets []target, err error) {
	binary := filepath.Join(work, strings.ReplaceAll(path.Clean(pkg), "/", "-")+".test")
	if _, err := output("", "go", "test", "-c", "-fuzz=.", "-o", binary, pkg); err != nil {
		return nil, err
	}
	names, err := output(dir, binary, "-test.list=^Fuzz")
	if err != nil {
		return nil, err
	}
	for _, name := range strings.Fields(names) {
		targets = append(targets, target{pkg, dir, binary, name})
	}
	return targets, nil
}

var (
	runs     = regexp.MustCompile(`(?m)^=== RUN +Fuzz\w+/`)
	progress = regexp.MustCompile(`execs: (\d+)`)
)

// live replays the corpus of one target and then fuzzes it for the time given.
func live(t target, share time.Duration, cache string) error {
	exact := "^" + t.name + "$"
	seeds, err := output(t.dir, t.binary, "-test.v", "-test.run="+exact)
	if err != nil {
		return fmt.Errorf("its corpus fails: %w", err)
	}
	n := len(runs.FindAllString(seeds, -1))
	if n == 0 {
		return errors.New("its corpus is empty: add seeds with f.Add or under testdata/fuzz")
	}

	ctx, cancel := context.WithTimeout(context.Background(), share+graceTime)
	defer cancel()
	cmd := exec.CommandContext(ctx, t.binary, "-test.run=^$", "-test.fuzz="+exact, "-test.parallel=1",
		"-test.fuzztime="+share.String(), "-test.fuzzminimizetime="+shrinking, "-test.fuzzcachedir="+cache)
	cmd.Dir = t.dir
	var said bytes.Buffer
	cmd.Stdout, cmd.Stderr = &said, &said
	start := time.Now()
	err = cmd.Run()
	if ctx.Err() != nil {
		return fmt.Errorf("still running %v after its time:\n%s", graceTime, said.String())
	}
	// The fuzzing engine may report its own deadline, which is the end of the
	// time given, as the failure of a slow call; a finding always comes with
	// an input.
	timeUp := strings.Contains(said.String(), "context deadline exceeded") &&
		!strings.Contains(said.String(), "Failing input written to")
	if err != nil && !timeUp {
		return fmt.Errorf("%w\n%s", err, said.String())
	}
	execs := "0"
	if all := progress.FindAllStringSubmatch(said.String(), -1); len(all) > 0 {
		execs = all[len(all)-1][1]
	}
	fmt.Printf("fuzz: %s %s: %d seeds, %s inputs in %.1f s, no finding\n", t.pkg, t.name, n, execs, time.Since(start).Seconds())
	return nil
}

// output runs a command and returns what it prints; its error carries the rest.
func output(dir, name string, args ...string) (string, error) {
	cmd := exec.Command(name, args...)
	cmd.Dir = dir
	var stdout, stderr bytes.Buffer
	cmd.Stdout, cmd.Stderr = &stdout, &stderr
	if err := cmd.Run(); err != nil {
		return "", fmt.Errorf("%s %s: %w\n%s%s", filepath.Base(name), strings.Join(args, " "), err, stdout.String(), stderr.String())
	}
	return stdout.String(), nil
}
