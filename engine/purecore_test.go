package engine_test

import (
	"go/ast"
	"go/token"
	"os"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// raceVariable is the list of packages that the Makefile runs under the race
// detector.
const raceVariable = "RACE_PACKAGES"

func racePackages(t *testing.T) []string {
	t.Helper()
	text, err := os.ReadFile("../Makefile")
	if err != nil {
		t.Fatal(err)
	}
	joined := strings.ReplaceAll(string(text), "\\\n", " ")
	for line := range strings.Lines(joined) {
		name, value, ok := strings.Cut(line, "=")
		if ok && strings.Trim(name, " :?") == raceVariable {
			var packages []string
			for _, p := range strings.Fields(value) {
				packages = append(packages, strings.TrimPrefix(p, "./"))
			}
			return packages
		}
	}
	t.Fatalf("the Makefile sets no %s", raceVariable)
	return nil
}

// startsGoroutine finds go statements and the calls that hide one.
func startsGoroutine(file *ast.File) (at token.Pos, found bool) {
	ast.Inspect(file, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.GoStmt:
			at, found = n.Pos(), true
		case *ast.CallExpr:
			// sync.WaitGroup.Go, errgroup.Group.Go, time.AfterFunc.
			if s, ok := n.Fun.(*ast.SelectorExpr); ok && (s.Sel.Name == "Go" || s.Sel.Name == "AfterFunc") {
				at, found = n.Pos(), true
			}
		}
		return !found
	})
	return at, found
}

// Who starts goroutines is run under the race detector. Fixtures and tools only
// share out independent work; what they run takes too long with it.
func TestConcurrentPackagesAreRaceTested(t *testing.T) {
	files, fset := load(t)
	raced := racePackages(t)
	for _, f := range files {
		if matches("tools/...", f.pkg) || matches("fixtures/...", f.pkg) || anyMatches(raced, f.pkg) {
			continue
		}
		if at, found := startsGoroutine(f.ast); found {
			t.Errorf("%s starts a goroutine, but %s is not in %s of the Makefile", fset.Position(at), f.pkg, raceVariable)
		}
	}
}

// pure are the packages that a posterior is computed in. The same set of events
// gives the same posterior, bit for bit, so nothing in them may depend on a
// clock, on scheduling or on a hidden random source; time and random sources
// come in as values. Functions from outside these packages, such as a codec's,
// are not looked into.
var pure = []string{
	"engine/geo", kernel, "engine/filter", "engine/monitor", "engine/plane", "engine/sensor", "engine/summary",
	"engine/session", "engine/traffic", "network", "terrain",
}

// noIO are those of them that must not reach a file or a socket either. Maps
// may: they are files in memory.
var noIO = []string{
	"engine/geo", kernel, "engine/filter", "engine/monitor", "engine/plane", "engine/sensor", "engine/summary",
	"engine/session", "engine/traffic",
}

var ioPackages = []string{"os/...", "net/...", "syscall", "io/ioutil", "golang.org/x/sys/unix"}

var randomPackages = []string{"math/rand/...", "crypto/rand"}

// clock are the functions of package time that read or wait for one.
var clock = map[string]bool{
	"Now": true, "Since": true, "Until": true, "Sleep": true, "After": true, "AfterFunc": true,
	"Tick": true, "NewTimer": true, "NewTicker": true,
}

// transcendental are the functions of package math whose last bits depend on
// the CPU or the compiler's choice; kernel has them in a form that does not.
var transcendental = map[string]bool{
	"Acos": true, "Acosh": true, "Asin": true, "Asinh": true, "Atan": true, "Atan2": true, "Atanh": true,
	"Cbrt": true, "Cos": true, "Cosh": true, "Erf": true, "Erfc": true, "Erfcinv": true, "Erfinv": true,
	"Exp": true, "Exp2": true, "Expm1": true, "Gamma": true, "J0": true, "J1": true, "Jn": true,
	"Lgamma": true, "Log": true, "Log10": true, "Log1p": true, "Log2": true, "Pow": true, "Sin": true,
	"Sincos": true, "Sinh": true, "Tan": true, "Tanh": true, "Y0": true, "Y1": true, "Yn": true,
}

// usesOf returns where a file names one of the functions of a package.
func usesOf(f sourceFile, path string, names map[string]bool) []*ast.SelectorExpr {
	local := ""
	for _, spec := range f.ast.Imports {
		if spec.Path.Value == strconv.Quote(path) {
			local = path
			if spec.Name != nil {
				local = spec.Name.Name
			}
		}
	}
	if local == "" {
		return nil
	}
	var uses []*ast.SelectorExpr
	ast.Inspect(f.ast, func(n ast.Node) bool {
		if s, ok := n.(*ast.SelectorExpr); ok && names[s.Sel.Name] {
			if x, ok := s.X.(*ast.Ident); ok && x.Name == local {
				uses = append(uses, s)
			}
		}
		return true
	})
	return uses
}

func TestFilteringIsPure(t *testing.T) {
	files, fset := load(t)
	for _, f := range files {
		if !slices.Contains(pure, f.pkg) {
			continue
		}
		if at, found := startsGoroutine(f.ast); found {
			t.Errorf("%s starts a goroutine in a package that must not", fset.Position(at))
		}
		for _, use := range usesOf(f, "time", clock) {
			t.Errorf("%s uses time.%s: time arrives on events", fset.Position(use.Pos()), use.Sel.Name)
		}
		for _, path := range imports(f) {
			if anyMatches(randomPackages, path) {
				t.Errorf("%s imports %s: random sources are handed in", f.path, path)
			}
			if slices.Contains(noIO, f.pkg) && anyMatches(ioPackages, path) {
				t.Errorf("%s imports %s: this package does no I/O", f.path, path)
			}
		}
	}
}

// A posterior's bits depend on these functions, so they come from kernel.
func TestTranscendentalsComeFromKernel(t *testing.T) {
	files, fset := load(t)
	for _, f := range files {
		if !slices.Contains(pure, f.pkg) {
			continue
		}
		for _, use := range usesOf(f, "math", transcendental) {
			t.Errorf("%s uses math.%s, whose last bits depend on the CPU: use %s", fset.Position(use.Pos()), use.Sel.Name, kernel)
		}
	}
}
