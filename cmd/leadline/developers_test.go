package main

import (
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
)

// TestDevelopersMap: DEVELOPERS.md names every package of ours and every
// module that our code or tests import, and every test that it names exists.
func TestDevelopersMap(t *testing.T) {
	page := readPage(t, "DEVELOPERS.md")
	var modules []string
	for line := range strings.Lines(readPage(t, "go.mod")) {
		if f := strings.Fields(line); len(f) >= 2 && strings.HasPrefix(f[1], "v") && strings.Contains(f[0], ".") {
			modules = append(modules, f[0])
		}
	}
	used, tests := map[string]bool{}, map[string]bool{}
	test := regexp.MustCompile(`(?m)^func (Test[A-Za-z0-9_]+)\(`)
	err := filepath.WalkDir(checkout, func(file string, e fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if e.IsDir() {
			if name := e.Name(); name == "build" || name == "testdata" || name == "node_modules" || len(name) > 2 && strings.HasPrefix(name, ".") {
				return fs.SkipDir
			}
			return nil
		}
		if !strings.HasSuffix(file, ".go") {
			return nil
		}
		below, err := filepath.Rel(checkout, filepath.Dir(file))
		if err != nil {
			return err
		}
		used[filepath.ToSlash(below)] = true
		text, err := os.ReadFile(file)
		if err != nil {
			return err
		}
		for _, m := range test.FindAllSubmatch(text, -1) {
			tests[string(m[1])] = true
		}
		parsed, err := parser.ParseFile(token.NewFileSet(), file, text, parser.ImportsOnly)
		if err != nil {
			return err
		}
		for _, spec := range parsed.Imports {
			imported := strings.Trim(spec.Path.Value, `"`)
			longest := ""
			for _, m := range modules {
				if (imported == m || strings.HasPrefix(imported, m+"/")) && len(m) > len(longest) {
					longest = m
				}
			}
			if longest != "" {
				used[longest] = true
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if len(used) < 30 {
		t.Fatalf("only %d packages and modules were found", len(used))
	}
	for name := range used {
		if name == "." {
			continue
		}
		if !strings.Contains(page, "`"+name+"`") {
			t.Errorf("DEVELOPERS.md does not name `%s`", name)
		}
	}
	for _, m := range regexp.MustCompile("`(Test[A-Za-z0-9_]+)`").FindAllStringSubmatch(page, -1) {
		if !tests[m[1]] {
			t.Errorf("DEVELOPERS.md names %s, which does not exist", m[1])
		}
	}
}

// TestPagesLinks: what a page links to beside itself is there, the heading included.
func TestPagesLinks(t *testing.T) {
	var pages []string
	for _, pattern := range []string{"*.md", "docs/*.md", "docs/*/*.md"} {
		names, err := filepath.Glob(filepath.Join(checkout, filepath.FromSlash(pattern)))
		if err != nil {
			t.Fatal(err)
		}
		pages = append(pages, names...)
	}
	link, heading := regexp.MustCompile(`\]\(([^)\s]+)\)`), regexp.MustCompile("(?m)^#+ (.*)$")
	fenced, dropped := regexp.MustCompile("(?s)\n```.*?\n```"), regexp.MustCompile(`[^\p{L}\p{N} _-]`)
	anchors := func(page string) map[string]bool {
		text, err := os.ReadFile(page)
		if err != nil {
			t.Fatal(err)
		}
		out := map[string]bool{}
		for _, m := range heading.FindAllStringSubmatch(fenced.ReplaceAllString(string(text), ""), -1) {
			out[strings.ReplaceAll(dropped.ReplaceAllString(strings.ToLower(m[1]), ""), " ", "-")] = true
		}
		return out
	}
	checked := 0
	for _, page := range pages {
		text, err := os.ReadFile(page)
		if err != nil {
			t.Fatal(err)
		}
		for _, m := range link.FindAllStringSubmatch(string(text), -1) {
			if strings.Contains(m[1], "://") {
				continue
			}
			name, anchor, _ := strings.Cut(m[1], "#")
			target := page
			if name != "" {
				target = filepath.Join(filepath.Dir(page), filepath.FromSlash(name))
			}
			if _, err := os.Stat(target); err != nil {
				t.Errorf("%s links to %s, which is not there", page, m[1])
			} else if anchor != "" && !anchors(target)[anchor] {
				t.Errorf("%s links to %s, which has no such heading", page, m[1])
			}
			checked++
		}
	}
	if checked < 30 {
		t.Errorf("only %d links were found", checked)
	}
}
