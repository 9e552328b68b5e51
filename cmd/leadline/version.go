package main

import (
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"os"
	"runtime"
	"runtime/debug"
	"strings"

	"github.com/spf13/cobra"
)

// version is set by the linker; see the Makefile.
var version = ""

// build is what this program was built from and with.
type build struct {
	Version   string `json:"version"` // of the release, or "development"
	Commit    string `json:"commit"`  // in full, or "unknown"
	Committed string `json:"committed,omitempty"`
	Modified  bool   `json:"modified"` // files differed from the commit
	Go        string `json:"go"`
	Platform  string `json:"platform"`
}

func thisBuild() build {
	b := build{Version: version, Commit: "unknown", Go: runtime.Version(), Platform: runtime.GOOS + "/" + runtime.GOARCH}
	info, ok := debug.ReadBuildInfo()
	if ok {
		for _, s := range info.Settings {
			switch s.Key {
			case "vcs.revision":
				b.Commit = s.Value
			case "vcs.time":
				b.Committed = s.Value
			case "vcs.modified":
				b.Modified = s.Value == "true"
			}
		}
		if b.Version == "" && info.Main.Version != "(devel)" {
			b.Version = info.Main.Version // of a module that was asked for by its version
		}
	}
	if b.Version == "" {
		b.Version = "development"
	}
	return b
}

// programSHA256 sums up this program's file; "" if it cannot be read.
func programSHA256() string {
	path, err := os.Executable()
	if err != nil {
		return ""
	}
	f, err := os.Open(path)
	if err != nil {
		return ""
	}
	defer f.Close()
	sum := sha256.New()
	if _, err := io.Copy(sum, f); err != nil {
		return ""
	}
	return hex.EncodeToString(sum.Sum(nil))
}

// versionText names the program's version and commit where that is not part of
// the version, as answers and scores carry it.
func versionText() string {
	b := thisBuild()
	text := b.Version
	const short = 12
	if len(b.Commit) >= short && !strings.Contains(text, b.Commit[:7]) {
		text += " " + b.Commit[:short]
		if b.Modified {
			text += " modified"
		}
	}
	return text
}

func versionCommand() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{
		Use:   "version",
		Short: "Say what was built: version, commit, Go, platform",
		Args:  cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			b := thisBuild()
			if asJSON {
				return printJSON(c.OutOrStdout(), b)
			}
			commit := b.Commit
			if b.Committed != "" {
				commit += " of " + b.Committed
			}
			if b.Modified {
				commit += ", modified"
			}
			_, err := fmt.Fprintf(c.OutOrStdout(), "leadline %s\n  commit    %s\n  go        %s\n  platform  %s\n", b.Version, commit, b.Go, b.Platform)
			return err
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print it as JSON")
	return c
}
