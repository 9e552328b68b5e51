// Command vulncheck looks for known vulnerabilities that the module's code
// calls. The database is built on this machine from the Go project's own
// database module, brought through the Go module proxy, because its public web
// address is not reachable everywhere; it is kept in build/vulndb by version.
//
// A vulnerability of a third-party module that is called is a failure. One of
// the standard library is listed only: it goes with the next Go release. One
// that a module has but nothing here calls is counted.
package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
)

const (
	databaseModule = "golang.org/x/vulndb"
	databaseDir    = "build/vulndb"
)

func main() {
	patterns := os.Args[1:]
	if len(patterns) == 0 {
		patterns = []string{"./..."}
	}
	failed, err := run(patterns)
	if err != nil {
		fmt.Fprintln(os.Stderr, "vulncheck:", err)
		os.Exit(2)
	}
	if failed {
		os.Exit(1)
	}
}

func run(patterns []string) (failed bool, err error) {
	database, err := buildDatabase()
	if err != nil {
		return false, err
	}
	fmt.Println("vulncheck: database", filepath.Base(database))
	out, err := output("go", append([]string{
		"tool", "-modfile=tools/vuln.mod", "govulncheck",
		"-db", "file://" + filepath.ToSlash(database), "-format", "json",
	}, patterns...)...)
	if err != nil {
		return false, err
	}
	found, err := read(bytes.NewReader(out))
	if err != nil {
		return false, err
	}
	return found.print(os.Stdout), nil
}

// buildDatabase returns the folder of the newest database. Without a network
// the newest that was built here before serves, and that is said.
func buildDatabase() (string, error) {
	root, err := filepath.Abs(databaseDir)
	if err != nil {
		return "", err
	}
	if err := os.MkdirAll(root, 0o755); err != nil {
		return "", err
	}
	out, err := output("go", "list", "-m", "-f", "{{.Version}}", databaseModule+"@latest")
	if err != nil {
		old, _ := filepath.Glob(filepath.Join(root, "v*"))
		if len(old) == 0 {
			return "", fmt.Errorf("asking for the newest database: %w", err)
		}
		newest := slices.Max(old) // pseudo-versions order by date
		fmt.Printf("vulncheck: the newest database cannot be asked for, using %s\n", filepath.Base(newest))
		return newest, nil
	}
	version := strings.TrimSpace(string(out))
	database := filepath.Join(root, version)
	if _, err := os.Stat(database); err == nil {
		return database, nil
	}
	out, err = output("go", "mod", "download", "-json", databaseModule+"@"+version)
	if err != nil {
		return "", err
	}
	var source struct{ Dir string }
	if err := json.Unmarshal(out, &source); err != nil {
		return "", fmt.Errorf("go mod download: %w", err)
	}
	partial := filepath.Join(root, "partial")
	if err := os.RemoveAll(partial); err != nil {
		return "", err
	}
	if _, err := output("go", "tool", "-modfile=tools/vulndb.mod", "indexdb",
		"-vulns", filepath.Join(source.Dir, "data", "osv"), "-out", partial); err != nil {
		return "", err
	}
	// Renamed when whole; one made by another run meanwhile is as good.
	if err := os.Rename(partial, database); err != nil && !errors.Is(err, os.ErrExist) {
		return "", err
	}
	return database, nil
}

func output(name string, args ...string) ([]byte, error) {
	cmd := exec.Command(name, args...)
	var stdout, stderr bytes.Buffer
	cmd.Stdout, cmd.Stderr = &stdout, &stderr
	if err := cmd.Run(); err != nil {
		return nil, fmt.Errorf("%s %s: %w\n%s", name, strings.Join(args, " "), err, strings.TrimSpace(stderr.String()))
	}
	return stdout.Bytes(), nil
}
