package engine_test

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"io"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"
)

const module = "leadline"

// sourceFile is one non-test file of ours, build tags and target ignored.
type sourceFile struct {
	pkg  string // path below the module
	path string // slash path below the checkout
	ast  *ast.File
}

// sources are the parsed files and where their positions are.
type sources struct {
	files []sourceFile
	fset  *token.FileSet
}

// load returns every non-test file of the module.
func load(t *testing.T) (files []sourceFile, fset *token.FileSet) {
	t.Helper()
	s, err := parseOnce()
	if err != nil {
		t.Fatal(err)
	}
	return s.files, s.fset
}

var parseOnce = sync.OnceValues(parse)

func parse() (sources, error) {
	root, err := filepath.Abs("..")
	if err != nil {
		return sources{}, err
	}
	cmd := exec.Command("go", "list", "-e", "-json=ImportPath,Dir,GoFiles,CgoFiles,IgnoredGoFiles", "./...")
	cmd.Dir = root
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		return sources{}, fmt.Errorf("go list: %w\n%s", err, stderr.String())
	}
	s := sources{fset: token.NewFileSet()}
	for decoder := json.NewDecoder(bytes.NewReader(out)); ; {
		var p struct {
			ImportPath, Dir                   string
			GoFiles, CgoFiles, IgnoredGoFiles []string
		}
		if err := decoder.Decode(&p); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			return sources{}, fmt.Errorf("go list: %w", err)
		}
		pkg := strings.TrimPrefix(strings.TrimPrefix(p.ImportPath, module), "/")
		for _, name := range slices.Concat(p.GoFiles, p.CgoFiles, p.IgnoredGoFiles) {
			if strings.HasSuffix(name, "_test.go") {
				continue
			}
			path := filepath.Join(p.Dir, name)
			file, err := parser.ParseFile(s.fset, path, nil, parser.SkipObjectResolution)
			if err != nil {
				return sources{}, err
			}
			below, err := filepath.Rel(root, path)
			if err != nil {
				return sources{}, err
			}
			s.files = append(s.files, sourceFile{pkg, filepath.ToSlash(below), file})
		}
	}
	if len(s.files) == 0 {
		return sources{}, errors.New("go list named no file of ours")
	}
	return s, nil
}

func imports(f sourceFile) []string {
	var paths []string
	for _, spec := range f.ast.Imports {
		path, err := strconv.Unquote(spec.Path.Value)
		if err != nil {
			panic(fmt.Sprintf("engine_test: import %s of %s: %v", spec.Path.Value, f.path, err))
		}
		paths = append(paths, path)
	}
	return paths
}

// ours cuts the module's name from an import path and says whether it was one
// of ours.
func ours(path string) (string, bool) {
	return strings.CutPrefix(path, module+"/")
}

// matches tells whether pkg is the pattern, or lies at or below it when the
// pattern ends in /... .
func matches(pattern, pkg string) bool {
	if stem, tree := strings.CutSuffix(pattern, "/..."); tree {
		return pkg == stem || strings.HasPrefix(pkg, stem+"/")
	}
	return pattern == pkg
}

func anyMatches(patterns []string, pkg string) bool {
	return slices.ContainsFunc(patterns, func(p string) bool { return matches(p, pkg) })
}
