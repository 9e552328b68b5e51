// Command licences writes THIRD_PARTY.md: the licence of every module that
// go.mod requires, directly or not, as its own licence file reads. It fails on a
// module without a licence file, on one it cannot tell, and on a licence that
// is not on the list of those this project may be linked with.
//
//	go run ./tools/licences          writes THIRD_PARTY.md
//	go run ./tools/licences -check   compares it with go.mod, without a network
package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
)

const page = "THIRD_PARTY.md"

type requirement struct {
	Path, Version string
	Indirect      bool
}

func (r requirement) kind() string {
	if r.Indirect {
		return "indirect"
	}
	return "direct"
}

func main() {
	check := flag.Bool("check", false, "compare "+page+" with go.mod instead of writing it")
	flag.Parse()
	var err error
	if *check {
		err = compare("go.mod", page)
	} else {
		err = write()
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "licences:", err)
		os.Exit(1)
	}
}

// requirements reads the require lines of a go.mod file, direct ones first.
func requirements(file string) ([]requirement, error) {
	out, err := exec.Command("go", "mod", "edit", "-json", file).Output()
	if err != nil {
		return nil, fmt.Errorf("reading %s: %w", file, err)
	}
	var mod struct {
		Require []requirement
		Replace []json.RawMessage
	}
	if err := json.Unmarshal(out, &mod); err != nil {
		return nil, fmt.Errorf("reading %s: %w", file, err)
	}
	if len(mod.Replace) > 0 {
		return nil, fmt.Errorf("%s replaces modules, whose licences this program does not follow", file)
	}
	slices.SortFunc(mod.Require, func(a, b requirement) int {
		if a.Indirect != b.Indirect {
			return strings.Compare(a.kind(), b.kind())
		}
		return strings.Compare(a.Path, b.Path)
	})
	return mod.Require, nil
}

func write() error {
	required, err := requirements("go.mod")
	if err != nil {
		return err
	}
	var out bytes.Buffer
	out.WriteString(`# Third-party software

Go modules that go.mod requires, each with the licence its own licence file
reads; "indirect" ones come with another. The texts lie in the modules
themselves, which ` + "`go mod download`" + ` brings. Written by ` + "`make licences`" + `;
a test compares it with go.mod. Outside data is listed in DATA.md. The tools
pinned in tools/*.mod (generators, linter, formatter, vulnerability check) run as
programs of their own: nothing of them is linked into or handed on with Leadline.

| module | version | required | licence | notice file |
|---|---|---|---|---|
`)
	var problems []error
	for _, r := range required {
		licence, notice, err := licenceOf(r)
		if err != nil {
			problems = append(problems, err)
			continue
		}
		fmt.Fprintf(&out, "| %s | %s | %s | %s | %s |\n", r.Path, r.Version, r.kind(), licence, notice)
	}
	if err := errors.Join(problems...); err != nil {
		return err
	}
	return os.WriteFile(page, out.Bytes(), 0o644)
}

// licenceOf returns the licences that a module's files name and its notice
// file, if it has one.
func licenceOf(r requirement) (licence, notice string, err error) {
	where := r.Path + "@" + r.Version
	out, err := exec.Command("go", "mod", "download", "-json", where).Output()
	if err != nil {
		return "", "", fmt.Errorf("go mod download %s: %w", where, err)
	}
	var module struct{ Dir string }
	if err := json.Unmarshal(out, &module); err != nil {
		return "", "", fmt.Errorf("go mod download %s: %w", where, err)
	}
	entries, err := os.ReadDir(module.Dir)
	if err != nil {
		return "", "", err
	}
	var names []string
	for _, entry := range entries {
		upper := strings.ToUpper(entry.Name())
		if entry.IsDir() {
			continue
		}
		if strings.HasPrefix(upper, "NOTICE") {
			notice = entry.Name()
		}
		if !strings.HasPrefix(upper, "LICENSE") && !strings.HasPrefix(upper, "LICENCE") && !strings.HasPrefix(upper, "COPYING") && !strings.HasPrefix(upper, "UNLICENSE") {
			continue
		}
		text, err := os.ReadFile(filepath.Join(module.Dir, entry.Name()))
		if err != nil {
			return "", "", err
		}
		names = append(names, classify(string(text))...)
	}
	slices.Sort(names)
	names = slices.Compact(names)
	if len(names) == 0 {
		return "", "", fmt.Errorf("%s: no licence file that is known; look at %s and teach tools/licences", where, module.Dir)
	}
	for _, name := range names {
		if !slices.Contains(permitted, name) {
			return "", "", fmt.Errorf("%s is under %s, which this project does not link with", where, name)
		}
	}
	return strings.Join(names, ", "), notice, nil
}

// compare tells whether the page lists exactly what go.mod requires.
func compare(mod, page string) error {
	required, err := requirements(mod)
	if err != nil {
		return err
	}
	text, err := os.ReadFile(page)
	if err != nil {
		return err
	}
	listed := map[string]bool{}
	for line := range strings.Lines(string(text)) {
		cells := strings.Split(line, " | ")
		if len(cells) == 5 && strings.HasPrefix(line, "| ") && cells[0] != "| module" {
			listed[strings.TrimPrefix(cells[0], "| ")+" "+cells[1]+" "+cells[2]] = true
		}
	}
	var problems []error
	for _, r := range required {
		row := r.Path + " " + r.Version + " " + r.kind()
		if !listed[row] {
			problems = append(problems, fmt.Errorf("%s lacks %s: run `make licences`", filepath.Base(page), row))
		}
		delete(listed, row)
	}
	for row := range listed {
		problems = append(problems, fmt.Errorf("%s lists %s, which go.mod does not require: run `make licences`", filepath.Base(page), row))
	}
	slices.SortFunc(problems, func(a, b error) int { return strings.Compare(a.Error(), b.Error()) })
	return errors.Join(problems...)
}
