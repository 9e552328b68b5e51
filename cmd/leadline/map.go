package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"leadline/network"
	"leadline/terrain/heightfile"
)

func mapCommand() *cobra.Command {
	c := &cobra.Command{Use: "map", Short: "Compile, check and send maps"}
	c.AddCommand(mapRoadsCommand(), mapHeightsCommand(), mapCheckCommand(), mapListCommand(), mapSendCommand())
	return c
}

func mapCheckCommand() *cobra.Command {
	var asJSON bool
	var png string
	c := &cobra.Command{
		Use:   "check MAP",
		Short: "Say what is in a compiled map and what may be wrong with it",
		Args:  cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			m, err := openMap(args[0])
			if err != nil {
				return err
			}
			defer m.Close()
			if png != "" && !strings.EqualFold(filepath.Ext(png), ".png") {
				return fmt.Errorf("--png %s: the picture is a PNG: give a name that ends in .png", png)
			}
			if png != "" {
				if err := writeFile(png, m.picture); err != nil {
					return err
				}
			}
			return m.check(c.OutOrStdout(), asJSON)
		},
	}
	c.Flags().BoolVar(&asJSON, "json", false, "print the report as JSON")
	c.Flags().StringVar(&png, "png", "", "write a picture of the map to this file")
	return c
}

// check prints a report.
func (m *mapFile) check(w io.Writer, asJSON bool) error {
	if m.Roads != nil {
		r := network.Check(m.Roads)
		if asJSON {
			return printJSON(w, r)
		}
		_, err := io.WriteString(w, r.String())
		return err
	}
	r := heightfile.Check(m.Heights)
	if asJSON {
		return printJSON(w, r)
	}
	return r.WriteText(w)
}

// picture draws the map.
func (m *mapFile) picture(w io.Writer) error {
	if m.Roads != nil {
		return network.Picture(w, m.Roads)
	}
	return heightfile.Picture(w, m.Heights)
}

// printJSON prints a value, indented.
func printJSON(w io.Writer, v any) error {
	b, err := json.MarshalIndent(v, "", "  ")
	if err != nil {
		return err
	}
	_, err = fmt.Fprintf(w, "%s\n", b)
	return err
}

// writeFile writes a file beside its place and renames it, so that it is there
// whole or not at all.
func writeFile(path string, write func(io.Writer) error) (err error) {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*")
	if err != nil {
		return fmt.Errorf("writing %s: %w", path, plainPath(err))
	}
	defer func() {
		if err != nil {
			f.Close()
			os.Remove(f.Name())
			err = fmt.Errorf("writing %s: %w", path, err)
		}
	}()
	if err := write(f); err != nil {
		return err
	}
	if err := f.Chmod(0o644); err != nil {
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}

// plainPath drops the temporary name from an error of the file system.
func plainPath(err error) error {
	var p *fs.PathError
	if errors.As(err, &p) {
		return p.Err
	}
	return err
}

// needSuffix checks the name of a file to write.
func needSuffix(path, suffix string) error {
	if !strings.HasSuffix(path, suffix) {
		return fmt.Errorf("-o %s: the name of this kind of file must end in %s", path, suffix)
	}
	if info, err := os.Stat(filepath.Dir(path)); err != nil || !info.IsDir() {
		return fmt.Errorf("-o %s: there is no folder %s: make it first", path, filepath.Dir(path))
	}
	return writable("-o", path, filepath.Dir(path), "."+filepath.Base(path)+".")
}
