package main

import (
	"fmt"
	"regexp"
	"strings"

	"github.com/spf13/cobra"
)

// cobra's words for wrong use, which are put into the user's.
var (
	wrongValue   = regexp.MustCompile(`^invalid argument ("(?:[^"\\\\]|\\\\.)*") for "(?:-\w, )?(--[\w-]+)" flag: (.*)$`)
	missingFlags = regexp.MustCompile(`^required flag\(s\) (.*) not set$`)
	wrongNumber  = regexp.MustCompile(`arg\(s\)`)
)

// flagError words what is wrong with a flag.
func flagError(c *cobra.Command, err error) error {
	text := err.Error()
	if args := c.Flags().Args(); c.HasSubCommands() && len(args) > 0 { // what comes before it is no command
		return fmt.Errorf("unknown command %q for %q; see `%s --help`", args[0], c.CommandPath(), c.CommandPath())
	}
	if m := wrongValue.FindStringSubmatch(text); m != nil {
		why := m[3]
		if f := c.Flag(strings.TrimPrefix(m[2], "--")); f != nil && kinds[f.Value.Type()] != "" {
			why = "give " + kinds[f.Value.Type()]
		}
		text = fmt.Sprintf("%s is %s: %s", m[2], m[1], why)
	}
	return fmt.Errorf("%s; see `%s --help`", text, c.CommandPath())
}

// kinds words the values of flags.
var kinds = map[string]string{
	"int": "a whole number", "int64": "a whole number", "uint64": "a whole number, 0 or more",
	"float64": "a number", "float64Slice": "a number, or several with commas between",
	"duration": "a time such as 500ms, 10s or 5m", "bool": "true or false",
}

// usageError words what cobra says of a command line.
func usageError(c *cobra.Command, err error) error {
	m := missingFlags.FindStringSubmatch(err.Error())
	if m == nil {
		return err
	}
	var missing []string
	for _, name := range strings.Split(m[1], ", ") {
		missing = append(missing, "--"+strings.Trim(name, `"`))
	}
	verb := "is"
	if len(missing) > 1 {
		verb = "are"
	}
	return fmt.Errorf("%s %s missing; see `%s --help`", strings.Join(missing, " and "), verb, c.CommandPath())
}

// argsError words what is wrong with the arguments of a command.
func argsError(c *cobra.Command, args []string, err error) error {
	text, _, _ := strings.Cut(err.Error(), "\n")
	wants := wanted(c)
	switch {
	case wrongNumber.MatchString(text) && len(args) == 0:
		text = "give " + wants
	case wrongNumber.MatchString(text):
		text = fmt.Sprintf("give %s, and no more: these are %d, %s", wants, len(args), oneLine(strings.Join(args, " ")))
	case strings.HasPrefix(text, "unknown command") && !c.HasSubCommands():
		text = fmt.Sprintf("%q is too much: it takes flags alone", args[0])
	}
	return fmt.Errorf("%s; see `%s --help`", text, c.CommandPath())
}

// wanted is what a command's use says of its arguments.
func wanted(c *cobra.Command) string {
	var out []string
	for i, w := range strings.Fields(c.Use) {
		if strings.HasPrefix(w, "-") {
			break
		}
		if i > 0 {
			out = append(out, w)
		}
	}
	return strings.Join(out, " ")
}

// helpForWrongArgs words complaints about arguments, of a command and all under
// it.
func helpForWrongArgs(c *cobra.Command) {
	for _, sub := range c.Commands() {
		helpForWrongArgs(sub)
	}
	check := c.Args
	if check == nil {
		check = cobra.NoArgs
	}
	c.Args = func(c *cobra.Command, args []string) error {
		if err := check(c, args); err != nil {
			return argsError(c, args, err)
		}
		return nil
	}
	if c.HasSubCommands() && c.Run == nil && c.RunE == nil {
		c.RunE = func(c *cobra.Command, _ []string) error { return c.Help() }
	}
}
