// Command evidence makes docs/evidence.md of the tables in docs/evidence: rows
// as `make credibility`, `credibility-reach`, `study`, `bench` and `survive` write
// them, each file with what they were drawn from. Without arguments it writes
// the page; add FILE adds a table that was just drawn.
package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"path/filepath"
)

// folder holds the tables, page is made of them; both from the module's root.
const (
	folder = "docs/evidence"
	page   = "docs/evidence.md"
)

func main() {
	if err := run(os.Args[1:]); err != nil {
		fmt.Fprintln(os.Stderr, "evidence:", err)
		os.Exit(2)
	}
}

func run(args []string) error {
	set := flag.NewFlagSet("evidence", flag.ContinueOnError)
	add := set.String("add", "", "rows that were drawn, a file such as build/study.json, to keep")
	kind := set.String("table", "", "with -add: "+kinds())
	code := set.String("code", "", "with -add: the commit whose program drew them")
	on := set.String("on", "", "with -add: the machine, and what else it did")
	as := set.String("as", "", "with -add: name of the file that keeps them")
	if err := set.Parse(args); err != nil {
		return err
	}
	if set.NArg() > 0 {
		return fmt.Errorf("unexpected %q: all is said by flags", set.Arg(0))
	}
	if *add != "" {
		if *kind == "" || *code == "" || *on == "" || *as == "" {
			return errors.New("-add needs -table, -code, -on and -as")
		}
		rows, err := os.ReadFile(*add)
		if err != nil {
			return err
		}
		if err := keep(filepath.Join(folder, *as+".json"), Table{Kind: *kind, Code: *code, On: *on}, rows); err != nil {
			return err
		}
	}
	tables, err := readAll(os.DirFS(folder))
	if err != nil {
		return err
	}
	return os.WriteFile(page, []byte(Page(tables)), 0o644) //nolint:gosec // a page for everyone
}

// keep writes rows with where they are from, if they are rows.
func keep(path string, t Table, rows []byte) error {
	if err := json.Unmarshal(rows, &t.Rows); err != nil {
		return fmt.Errorf("rows: %w", err)
	}
	if err := t.check(); err != nil {
		return err
	}
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	e.SetIndent("", " ")
	if err := e.Encode(t); err != nil {
		return err
	}
	return os.WriteFile(path, b.Bytes(), 0o644) //nolint:gosec // as the page
}
