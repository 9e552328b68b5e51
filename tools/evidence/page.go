package main

import (
	"encoding/json"
	"fmt"
	"io/fs"
	"math"
	"slices"
	"strconv"
	"strings"
)

// Table is what one run has drawn.
type Table struct {
	Kind string `json:"table"`
	Code string `json:"code"`
	On   string `json:"on"`
	Rows []Row  `json:"rows"`
}

// Row is a row of any of the tables: what it does not have is left out.
type Row struct {
	Claim     string   `json:"claim,omitempty"`
	Work      string   `json:"row,omitempty"`
	Check     string   `json:"check,omitempty"`
	Target    string   `json:"target,omitempty"`
	Figure    *float64 `json:"figure,omitempty"`
	Unit      string   `json:"unit,omitempty"`
	Low       *float64 `json:"low,omitempty"`
	High      *float64 `json:"high,omitempty"`
	N         int      `json:"n,omitempty"`
	Seed      uint64   `json:"seed,omitempty"`
	Runs      int      `json:"runs,omitempty"`
	Lost      int      `json:"lost,omitempty"`
	Doubled   int      `json:"doubled,omitempty"`
	HashEqual bool     `json:"hash_equal,omitempty"`
	Seconds   float64  `json:"seconds,omitempty"`
	Met       bool     `json:"met"`
	Missing   int      `json:"missing,omitempty"`
	Reason    string   `json:"reason,omitempty"`
	Note      string   `json:"note,omitempty"`
}

// kind is a table of the page.
type kind struct {
	name, title, made, intro string
	header                   []string
	cells                    func(r Row) []string
}

var claims = []string{"claim", "asked", "figure", "holds it with 95 %", "of", "met"}

var all = []kind{
	{"credibility", "Whether posteriors are true", "make credibility", "Figures of simulated and recorded drives against independent references. A row is met once all its drives are drawn and its figure cannot be told from what is asked, all rows judged together at 99.9 %.", claims, claim},
	{"reach", "Velocity on grids, and traffic past listening posts", "make credibility-reach", "", claims, claim},
	{"study", "Studies of recorded drives", "make study", "", claims, claim},
	{"bench", "Time and memory", "make bench", "Medians, side by side in one run.", []string{"work", "asked", "figure", "met"}, func(r Row) []string {
		return []string{r.Work, r.Target, number(r.Figure) + " " + r.Unit, met(r)}
	}},
	{"survive", "What a service outlives", "make survive", "Nothing lost, nothing doubled, and hashes as of a server to which nothing happened.", []string{"check", "runs", "lost", "doubled", "hashes equal", "seconds", "met"}, func(r Row) []string {
		return []string{r.Check, strconv.Itoa(r.Runs), strconv.Itoa(r.Lost), strconv.Itoa(r.Doubled), yes(r.HashEqual), strconv.FormatFloat(r.Seconds, 'f', 1, 64), met(r)}
	}},
}

func claim(r Row) []string {
	between := ""
	if r.Low != nil && r.High != nil && r.N > 1 {
		between = number(r.Low) + " to " + number(r.High)
	}
	return []string{r.Claim, r.Target, number(r.Figure), between, strconv.Itoa(r.N), met(r)}
}

func kinds() string {
	var names []string
	for _, k := range all {
		names = append(names, k.name)
	}
	return strings.Join(names, ", ")
}

// check refuses a table that the page would not show.
func (t Table) check() error {
	if !slices.ContainsFunc(all, func(k kind) bool { return k.name == t.Kind }) {
		return fmt.Errorf("no table %q: there are %s", t.Kind, kinds())
	}
	if t.Code == "" || t.On == "" || len(t.Rows) == 0 {
		return fmt.Errorf("a table of %s says not what drew it, or where, or has no rows", t.Kind)
	}
	for i, r := range t.Rows {
		if r.Claim+r.Work+r.Check == "" {
			return fmt.Errorf("row %d of a table of %s says not what it is of", i+1, t.Kind)
		}
	}
	return nil
}

// readAll reads the tables of a folder, in the order of their names.
func readAll(dir fs.FS) ([]Table, error) {
	files, err := fs.Glob(dir, "*.json")
	if err != nil {
		return nil, err
	}
	var tables []Table
	for _, name := range files {
		data, err := fs.ReadFile(dir, name)
		if err != nil {
			return nil, err
		}
		var t Table
		if err := json.Unmarshal(data, &t); err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		if err := t.check(); err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		tables = append(tables, t)
	}
	return tables, nil
}

// Page is the page of the tables.
func Page(tables []Table) string {
	var b strings.Builder
	b.WriteString(`# What has been shown

Leadline is an aid and not certified: these are its own makers' figures, on simulated drives
and on recordings that say so, and no promise for another vehicle, map or sensor. Each
table names the code that drew it and can be drawn again from it with the command beside
it; rows that miss what was asked stay, with the reason where it is known. This page is
made of the files in ` + "`docs/evidence`" + ` (` + "`make evidence`" + `).
`)
	for _, k := range all {
		first := true
		for _, t := range tables {
			if t.Kind != k.name {
				continue
			}
			if first {
				fmt.Fprintf(&b, "\n## %s\n\n`%s`", k.title, k.made)
				if k.intro != "" {
					b.WriteString(". " + k.intro)
				}
				b.WriteString("\n")
				first = false
			}
			t.write(&b, k)
		}
	}
	return b.String()
}

func (t Table) write(b *strings.Builder, k kind) {
	fmt.Fprintf(b, "\nCode of %s, on %s:\n\n", t.Code, t.On)
	line := func(cells []string) {
		for i, c := range cells {
			cells[i] = strings.ReplaceAll(c, "|", `\|`)
		}
		b.WriteString("| " + strings.Join(cells, " | ") + " |\n")
	}
	line(slices.Clone(k.header))
	b.WriteString(strings.Repeat("|---", len(k.header)) + "|\n")
	var remarks []string
	for _, r := range t.Rows {
		cells := k.cells(r)
		if why := r.Reason + r.Note; why != "" {
			remarks = append(remarks, why)
			cells[0] += fmt.Sprintf(" (%d)", len(remarks))
		}
		line(cells)
	}
	if len(remarks) > 0 {
		b.WriteString("\n")
	}
	for i, why := range remarks {
		fmt.Fprintf(b, "%d. %s\n", i+1, why)
	}
}

// met is what a row came to, in a word or a few.
func met(r Row) string {
	switch {
	case r.Missing > 0:
		return fmt.Sprintf("%d to be drawn", r.Missing)
	case r.Met:
		return "yes"
	}
	return "**no**"
}

func yes(x bool) string {
	if x {
		return "yes"
	}
	return "no"
}

// number is a figure with four digits that mean something.
func number(x *float64) string {
	if x == nil {
		return "–"
	}
	if a := math.Abs(*x); a >= 1e4 && a < 1e15 {
		return strconv.FormatFloat(math.Round(*x), 'f', -1, 64)
	}
	return strconv.FormatFloat(*x, 'g', 4, 64)
}
