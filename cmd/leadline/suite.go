package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"leadline/engine/sensor"
	leadlinev1 "leadline/proto/leadline/v1"
)

func suiteCommand() *cobra.Command {
	var to reach
	var heights bool
	c := &cobra.Command{
		Use:   "suite [NAME]",
		Short: "Print a starter suite to copy and change, or list them",
		Long: `Suite prints a starter suite, or lists them. With --at it prints or lists those
of a server, which are written with their defaults filled in.`,
		Args: cobra.MaximumNArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if to.address != "" {
				return asking(&to, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
					return serverSuite(ctx, c.OutOrStdout(), s, args, heights)
				})
			}
			if heights {
				return errors.New("--heights goes with --at: a starter is printed as it was written")
			}
			if len(args) == 0 {
				fmt.Fprintln(c.OutOrStdout(), strings.Join(sensor.StarterNames(), "\n"))
				return nil
			}
			text, ok := starter(args[0])
			if !ok {
				return fmt.Errorf("there is no starter suite %q: known are %s", args[0], strings.Join(sensor.StarterNames(), ", "))
			}
			_, err := c.OutOrStdout().Write(text)
			return err
		},
	}
	to.addressFlag(c, "at", "", "address of a server whose suites are wanted")
	settable(c, "tls", "ca", "cert", "key", "token-file")
	c.Flags().BoolVar(&heights, "heights", false, "with the defaults for height maps; those for roads otherwise")
	return c
}

// serverSuite prints a suite of a server, or lists them.
func serverSuite(ctx context.Context, w io.Writer, s leadlinev1.PositionServiceClient, args []string, heights bool) error {
	if len(args) == 0 {
		r, err := s.ListSuites(ctx, &leadlinev1.ListSuitesRequest{})
		for _, name := range r.GetSuites() {
			fmt.Fprintln(w, oneLine(name))
		}
		return err
	}
	req := &leadlinev1.DescribeSuiteRequest{Suite: args[0], Kind: leadlinev1.MapKind_MAP_KIND_ROADS}
	if heights {
		req.Kind = leadlinev1.MapKind_MAP_KIND_HEIGHTS
	}
	r, err := s.DescribeSuite(ctx, req)
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(w, "# sha256 %s\n%s", r.GetFingerprint(), r.GetYaml())
	return err
}

// starter returns a starter suite's text.
func starter(name string) ([]byte, bool) {
	if !slices.Contains(sensor.StarterNames(), name) {
		return nil, false
	}
	return sensor.StarterText(name)
}

// maxSuiteFile bounds what is read of a suite file: ParseSuite takes less.
const maxSuiteFile = 1 << 20

// openSuite reads a starter suite by its name, or a suite file.
func openSuite(nameOrFile string) (*sensor.Suite, error) {
	text, err := suiteText(nameOrFile)
	if err != nil {
		return nil, err
	}
	return sensor.ParseSuite(nameOrFile, text)
}

// suiteText is a suite as it is written.
func suiteText(nameOrFile string) ([]byte, error) {
	if text, ok := starter(nameOrFile); ok {
		return text, nil
	}
	info, err := os.Stat(nameOrFile)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil, fmt.Errorf("there is no suite %s: give a file, or one of %s", nameOrFile, strings.Join(sensor.StarterNames(), ", "))
	case err != nil:
		return nil, err
	case !info.Mode().IsRegular() || info.Size() > maxSuiteFile:
		return nil, fmt.Errorf("suite %s is no file of at most %d bytes: give a YAML file", nameOrFile, maxSuiteFile)
	}
	return os.ReadFile(nameOrFile)
}

// suiteName is a suite file's name without folder and suffix.
func suiteName(path string) string {
	name := filepath.Base(path)
	return strings.TrimSuffix(strings.TrimSuffix(name, ".yaml"), ".yml")
}

// driveSuite returns the suite of a drive: that of the flag if it is given,
// otherwise the header's, which is a starter or a file beside the drive; nil
// if there is none.
func driveSuite(flag, header, drivePath string) (*sensor.Suite, error) {
	switch {
	case flag != "":
		return openSuite(flag)
	case header == "":
		return nil, nil
	}
	if _, ok := starter(header); ok {
		return openSuite(header)
	}
	if path, ok := beside(drivePath, header, "", ".yaml", ".yml"); ok {
		return openSuite(path)
	}
	return nil, fmt.Errorf("%s: its header names a suite %q, which is no starter and no file beside the drive: give it with --suite", drivePath, header)
}

// beside finds a file that a drive's header names in the drive's folder, with
// one of the suffixes. Only a plain name is looked for: a drive may come from
// anywhere and chooses no paths.
func beside(drivePath, name string, suffixes ...string) (string, bool) {
	if name != filepath.Base(name) || !filepath.IsLocal(name) {
		return "", false
	}
	for _, s := range suffixes {
		path := filepath.Join(filepath.Dir(drivePath), name+s)
		if info, err := os.Stat(path); err == nil && info.Mode().IsRegular() {
			return path, true
		}
	}
	return "", false
}
