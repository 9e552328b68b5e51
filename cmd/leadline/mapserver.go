package main

import (
	"cmp"
	"context"
	"fmt"
	"io"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
	"leadline/terrain"
	"leadline/terrain/heightfile"
)

func mapListCommand() *cobra.Command {
	var to reach
	var asJSON bool
	c := &cobra.Command{
		Use:   "list [NAME] --at ADDR",
		Short: "List the maps of a server, or say what one of them is",
		Args:  cobra.MaximumNArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			return asking(&to, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
				w := c.OutOrStdout()
				if len(args) == 1 {
					r, err := s.DescribeMap(ctx, &leadlinev1.DescribeMapRequest{Map: args[0]})
					if err != nil {
						return err
					}
					if asJSON {
						return printMessage(w, r.GetMap())
					}
					printMap(w, r.GetMap())
					return nil
				}
				r, err := s.ListMaps(ctx, &leadlinev1.ListMapsRequest{})
				if err != nil {
					return err
				}
				if asJSON {
					return printMessage(w, r)
				}
				for _, m := range r.GetMaps() {
					fmt.Fprintf(w, "%s: %s, %s\n", oneLine(m.GetName()), mapSize(m), vehiclesOn(m))
				}
				return nil
			})
		},
	}
	to.flags(c, "at")
	c.Flags().BoolVar(&asJSON, "json", false, "print the answer as JSON")
	return c
}

// mapSize says in a few words what a map is made of.
func mapSize(m *leadlinev1.MapDescription) string {
	if m.GetKind() == leadlinev1.MapKind_MAP_KIND_ROADS {
		return fmt.Sprintf("%d directed edges, %.1f km", m.GetEdges(), m.GetLengthM()/1e3)
	}
	return fmt.Sprintf("heights, %d × %d, %.4g m apart", m.GetColumns(), m.GetRows(), m.GetSpacingM())
}

func vehiclesOn(m *leadlinev1.MapDescription) string {
	text := count(int(m.GetSessions()), "drive") + " on it"
	if n := m.GetOlderSessions(); n > 0 {
		text += fmt.Sprintf(", %d on an older one", n)
	}
	return text
}

func printMap(w io.Writer, m *leadlinev1.MapDescription) {
	line := func(label, format string, args ...any) {
		fmt.Fprintf(w, "  %-14s %s\n", label, oneLine(fmt.Sprintf(format, args...)))
	}
	fmt.Fprintf(w, "%s: %s\n", oneLine(m.GetName()), mapSize(m))
	line("fingerprint", "%s", m.GetFingerprint())
	line("within", "lon %.6f to %.6f, lat %.6f to %.6f", m.GetSouthWest().GetLon(), m.GetNorthEast().GetLon(), m.GetSouthWest().GetLat(), m.GetNorthEast().GetLat())
	line("frame", "%s", m.GetFrame())
	if d := m.GetVerticalDatum(); d != "" {
		sigma := "sigma unstated"
		if m.GetHeightSigmaM() > 0 {
			sigma = fmt.Sprintf("sigma %.3g m", m.GetHeightSigmaM())
		}
		line("heights", "above %s, %s", d, sigma)
	}
	line("source", "%s", cmp.Or(m.GetSource(), terrain.Unstated))
	line("licence", "%s", cmp.Or(m.GetLicence(), terrain.Unstated))
	line("in use", "%s", vehiclesOn(m))
}

func mapSendCommand() *cobra.Command {
	var to reach
	var name string
	var replace, asJSON bool
	c := &cobra.Command{
		Use:   "send MAP --at ADDR",
		Short: "Upload a compiled map to a server that takes maps",
		Long: `Send uploads a compiled map to a server that was started with --uploads. New
drives can use it at once; those that are open keep the one they have.`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error { return sendMap(c, &to, args[0], name, replace, asJSON) },
	}
	to.flags(c, "at")
	c.Flags().StringVar(&name, "name", "", "name of the map at the server (default: the file's)")
	c.Flags().BoolVar(&replace, "replace", false, "take the place of the map that has the name")
	c.Flags().BoolVar(&asJSON, "json", false, "print the map, as the server now has it, as JSON")
	return c
}

func sendMap(c *cobra.Command, to *reach, path, name string, replace, asJSON bool) error {
	m, err := openMap(path) // what is damaged need not be sent
	if err != nil {
		return err
	}
	m.Close()
	b := &leadlinev1.MapBeginning{Name: name, Kind: leadlinev1.MapKind_MAP_KIND_ROADS, Replace: replace}
	if name == "" {
		b.Name = mapName(path)
	}
	if strings.HasSuffix(path, heightfile.Suffix) {
		b.Kind = leadlinev1.MapKind_MAP_KIND_HEIGHTS
	}
	file, err := os.Open(path)
	if err != nil {
		return err
	}
	defer file.Close()
	conn, err := to.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	ctx, stop := untilSignal()
	defer stop()
	done := "uploaded"
	if before, err := leadlinev1.NewPositionServiceClient(conn).DescribeMap(ctx, &leadlinev1.DescribeMapRequest{Map: b.Name}); err == nil && replace {
		done = "uploaded, in place of the one with the fingerprint " + before.GetMap().GetFingerprint()
	}
	show, end := progress(c.ErrOrStderr(), b.Name)
	sent, err := client.SendMap(ctx, conn, b, file, func(sent, of int64) {
		if show != nil {
			show(int(sent), int(of))
		}
	})
	end()
	if err != nil {
		return fmt.Errorf("%s: %w", path, serverError(err, to.address))
	}
	if asJSON {
		return printMessage(c.OutOrStdout(), sent)
	}
	fmt.Fprintf(c.OutOrStdout(), "%s is %s\n", b.Name, done)
	printMap(c.OutOrStdout(), sent)
	return nil
}
