// Command leadline compiles maps, replays drives over them, serves positions
// and asks for them. See docs/commands.md for its commands.
package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/spf13/cobra"
)

// The exit statuses.
const (
	exitDone    = 0
	exitFailure = 1 // the answer is a failure
	exitBad     = 2 // wrong use or bad input
)

// failure is an answer that is a failure, where everything ran as it should.
type failure struct{ error }

func main() { os.Exit(run(os.Args[1:], os.Stdout, os.Stderr)) }

// run runs a command line. An error is one line on errs.
func run(args []string, out, errs io.Writer) int {
	root := newRoot()
	root.SetArgs(args)
	root.SetOut(out)
	root.SetErr(errs)
	c, err := root.ExecuteC()
	if err == nil {
		return exitDone
	}
	err = usageError(c, err)
	fmt.Fprintln(errs, "leadline: "+oneLine(err.Error()))
	var f failure
	if errors.As(err, &f) {
		return exitFailure
	}
	return exitBad
}

func newRoot() *cobra.Command {
	root := &cobra.Command{
		Use:   "leadline",
		Short: "Where are you, given what the map says you should be measuring?",
		Long: `Leadline positions vehicles on maps - road networks and height rasters - when
satellite fixes fail. A map becomes a grid of cells, a filter carries
probability over the cells, motion moves it and measurements reweight it.

It is an aid and not certified: defer to charts, controllers, local rules and
licensed navigators.

Exit status: 0 done, 1 the answer is a failure, 2 wrong use or bad input.`,
		Version:       versionText(),
		SilenceErrors: true, SilenceUsage: true,
		CompletionOptions: cobra.CompletionOptions{HiddenDefaultCmd: true},
	}
	root.SetVersionTemplate("leadline {{.Version}}\n")
	root.SetFlagErrorFunc(flagError)
	root.AddCommand(mapCommand(), importCommand(), replayCommand(), workCommand(), compareCommand(), reportCommand(), forecastCommand(), tuneCommand(), serveCommand(), feedCommand(), whereCommand(), followCommand(), sightingCommand(), seenCommand(), vehiclesCommand(), endCommand(), eraseCommand(), journalCommand(), trafficCommand(), demoCommand(), suiteCommand(), versionCommand())
	takeSettings(root)
	helpForWrongArgs(root)
	return root
}

// oneLine makes a line of a message, whatever a file brought into it.
func oneLine(s string) string {
	lines := strings.FieldsFunc(s, func(r rune) bool { return r == '\n' || r == '\r' })
	for i, l := range lines {
		lines[i] = strings.TrimSpace(l)
	}
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, strings.Join(lines, "; "))
}
