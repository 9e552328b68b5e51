package main

import (
	"encoding/json"
	"fmt"
	"io"
	"regexp"
	"slices"
	"strings"

	"github.com/spf13/cobra"
)

// printConfig prints a command's settings as they count, and where each came
// from, as a file of settings that gives the same.
func printConfig(w io.Writer, c *cobra.Command) error {
	var b strings.Builder
	put := func(text, from string) { fmt.Fprintf(&b, "%-36s # %s\n", text, from) }
	for _, s := range commandOptions(c) {
		f := c.Flags().Lookup(s.flag)
		from := strings.Join(f.Annotations[fromOf], "")
		l, ok := f.Value.(list)
		if !ok {
			put(s.key+": "+yamlText(f.Value.String()), from)
			continue
		}
		if len(l.GetSlice()) == 0 {
			put(s.key+": []", from)
			continue
		}
		put(s.key+":", from)
		for _, v := range l.GetSlice() {
			fmt.Fprintf(&b, "  - %s\n", yamlText(v))
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}

// yamlText quotes a text where YAML might take it for something else; JSON's
// quotes are YAML's.
func yamlText(s string) string {
	if regexp.MustCompile(`^[A-Za-z0-9/.][A-Za-z0-9/._=+-]*(:[A-Za-z0-9/._=+-]+)*$`).MatchString(s) {
		return s
	}
	b, err := json.Marshal(s)
	must(err)
	return string(b)
}

// optionsTable is the table of all settings in docs/server.md.
func optionsTable(root *cobra.Command) string {
	type row struct{ flags, def, meaning string }
	rows := map[string]*row{}
	var keys []string
	eachOption(root, func(c *cobra.Command, s option) {
		f := c.Flags().Lookup(s.flag)
		r := rows[s.key]
		if r == nil {
			r = &row{}
			if r.def, r.meaning = f.DefValue, f.Usage; r.def == "[]" || r.def == "" {
				r.def = "none"
			}
			rows[s.key] = r
			keys = append(keys, s.key)
		} else {
			r.flags += ", "
		}
		r.flags += fmt.Sprintf("`%s --%s`", strings.TrimPrefix(c.CommandPath(), root.Name()+" "), s.flag)
	})
	slices.Sort(keys)
	b := &strings.Builder{}
	b.WriteString("| key in the file | variable | flag | meaning | default |\n|---|---|---|---|---|\n")
	for _, k := range keys {
		r := rows[k]
		fmt.Fprintf(b, "| `%s` | `%s` | %s | %s | %s |\n", k, option{key: k}.variable(), r.flags, r.meaning, r.def)
	}
	return b.String()
}
