package main

import (
	"fmt"
	"maps"
	"os"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"leadline/cmd/leadline/settings"
)

// An option is a flag that the environment or a file can give, too. What is
// nearest to the command line counts: the flag, then the variable, then the
// file, then the default; a list is taken whole from where it is found.
type option struct {
	key  string // in the file
	flag string
}

// variable names the setting in the environment.
func (s option) variable() string { return variablePrefix + strings.ToUpper(s.key) }

const (
	variablePrefix = "LEADLINE_"
	configVariable = variablePrefix + "CONFIG" // names the file
	optionsOf      = "settings"                // annotation of a command
	fromOf         = "from"                    // annotation of a flag
)

// settable makes flags of a command settings. The key of one is its name with
// _ for -, unless it is given as FLAG=KEY. It may be called several times.
func settable(c *cobra.Command, flags ...string) {
	if c.Annotations == nil {
		c.Annotations = map[string]string{}
	}
	c.Annotations[optionsOf] = strings.TrimSpace(c.Annotations[optionsOf] + " " + strings.Join(flags, " "))
}

// takeSettings makes all commands under a root take their settings.
func takeSettings(root *cobra.Command) {
	root.PersistentFlags().String("config", "", "YAML file of settings; see docs/server.md")
	root.PersistentPreRunE = func(c *cobra.Command, _ []string) error { return configure(c) }
}

func commandOptions(c *cobra.Command) (out []option) {
	for _, flag := range strings.Fields(c.Annotations[optionsOf]) {
		flag, key, ok := strings.Cut(flag, "=")
		if !ok {
			key = strings.ReplaceAll(flag, "-", "_")
		}
		out = append(out, option{key, flag})
	}
	return out
}

// eachOption calls f for the settings of all commands.
func eachOption(root *cobra.Command, f func(*cobra.Command, option)) {
	for _, s := range commandOptions(root) {
		f(root, s)
	}
	for _, sub := range root.Commands() {
		eachOption(sub, f)
	}
}

// configure gives settings that are not on the command line their values from
// the environment and the file, and notes where each came from.
func configure(c *cobra.Command) error {
	flags, options := c.Flags(), commandOptions(c)
	path, err := c.Root().PersistentFlags().GetString("config")
	if err != nil {
		return err
	}
	if path == "" && len(options) > 0 {
		path = os.Getenv(configVariable)
	}
	var file map[string]settings.Value
	if path != "" {
		if file, err = readConfig(path, optionKeys(c.Root())); err != nil {
			return err
		}
	}
	for _, s := range options {
		from := "default"
		text := os.Getenv(s.variable())
		v, inFile := file[s.key]
		switch {
		case flags.Changed(s.flag):
			from = "flag --" + s.flag
		case text != "":
			from = "environment " + s.variable()
			if err := assign(c, s, strings.Split(text, ",")); err != nil {
				return fmt.Errorf("%s: %w", s.variable(), err)
			}
		case inFile:
			from = fmt.Sprintf("file %s:%d", path, v.Line)
			if err := assign(c, s, v.Texts); err != nil {
				return fmt.Errorf("%s:%d: %s: %w", path, v.Line, s.key, err)
			}
		}
		if err := flags.SetAnnotation(s.flag, fromOf, []string{from}); err != nil {
			return err
		}
	}
	return nil
}

func optionKeys(root *cobra.Command) []string {
	keys := map[string]bool{}
	eachOption(root, func(_ *cobra.Command, s option) { keys[s.key] = true })
	return slices.Sorted(maps.Keys(keys))
}

// list is a flag that takes several values.
type list interface {
	Replace(values []string) error
	GetSlice() []string
}

// assign gives a flag the values that the environment or a file has for it.
func assign(c *cobra.Command, s option, texts []string) error {
	value := c.Flags().Lookup(s.flag).Value
	if l, ok := value.(list); ok {
		return l.Replace(texts)
	}
	text := strings.Join(texts, ",") // of a variable, whose commas mean nothing here
	if err := value.Set(text); err != nil {
		want := map[string]string{"int": "a whole number", "duration": "a duration such as 10s", "bool": "true or false"}[value.Type()]
		if want == "" {
			return err
		}
		return fmt.Errorf("it is %q: give %s", text, want)
	}
	return nil
}

// unknownVariables lists variables that begin as settings do and are none:
// often a slip of the pen.
func unknownVariables(root *cobra.Command) (names []string) {
	known := map[string]bool{configVariable: true}
	eachOption(root, func(_ *cobra.Command, s option) { known[s.variable()] = true })
	for _, kv := range os.Environ() {
		if name, _, _ := strings.Cut(kv, "="); strings.HasPrefix(name, variablePrefix) && !known[name] {
			names = append(names, name)
		}
	}
	slices.Sort(names)
	return names
}

// choice is a flag that takes one of some words.
type choice struct {
	word string
	of   []string
}

// String, Set and Type make it a flag's value.
func (v *choice) String() string { return v.word }
func (v *choice) Type() string   { return "word" }
func (v *choice) Set(word string) error {
	if !slices.Contains(v.of, word) {
		return fmt.Errorf("it is %q: give %s", word, strings.Join(v.of, " or "))
	}
	v.word = word
	return nil
}
