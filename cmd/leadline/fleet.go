package main

import (
	"context"
	"fmt"
	"io"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	leadlinev1 "leadline/proto/leadline/v1"
)

// patient is how long commands wait for a server's answer.
const patient = 10 * time.Second

func vehiclesCommand() *cobra.Command {
	var to reach
	var onMap string
	var asJSON bool
	c := &cobra.Command{
		Use:   "vehicles --at ADDR",
		Short: "List the vehicles of a server",
		Args:  cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			return asking(&to, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
				return listVehicles(ctx, c.OutOrStdout(), s, onMap, asJSON)
			})
		},
	}
	to.flags(c, "at")
	c.Flags().StringVar(&onMap, "map", "", "only those on this map")
	c.Flags().BoolVar(&asJSON, "json", false, "print each vehicle as JSON, one object a line")
	return c
}

func listVehicles(ctx context.Context, w io.Writer, s leadlinev1.PositionServiceClient, onMap string, asJSON bool) error {
	table := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	none := true
	for req := (&leadlinev1.ListVehiclesRequest{Map: onMap, PageSize: 1000}); ; {
		r, err := s.ListVehicles(ctx, req)
		if err != nil {
			return err
		}
		for _, v := range r.GetVehicles() {
			if asJSON {
				if err := printLine(w, v); err != nil {
					return err
				}
				continue
			}
			if none {
				fmt.Fprintln(table, "vehicle\tstatus\tof\tdrive\tmap\tsuite\t")
				none = false
			}
			status, of := "no posterior yet", "–"
			if v.GetTime() != nil {
				status, of = words(v.GetStatus().String(), "STATUS_"), age(v.GetAgeS())
			}
			fmt.Fprintln(table, oneLine(v.GetVehicle())+"\t"+status+"\t"+of+"\t"+oneLine(v.GetDrive())+", "+stage(v)+"\t"+
				oneLine(v.GetMap())+newer(v)+"\t"+oneLine(v.GetSuite())+"\t")
		}
		if req.PageToken = r.GetNextPageToken(); req.PageToken == "" {
			break
		}
	}
	if none && !asJSON {
		fmt.Fprintln(table, "no vehicles")
	}
	return table.Flush()
}

// stage is how a vehicle's drive stands.
func stage(v *leadlinev1.Vehicle) string {
	switch {
	case v.GetEnded():
		return "ended"
	case v.GetConnected():
		return "fed"
	}
	return "not fed now"
}

func newer(v *leadlinev1.Vehicle) string {
	if v.GetNewerMapFingerprint() != "" {
		return " (there is a newer one)"
	}
	return ""
}

func endCommand() *cobra.Command {
	var to reach
	var drive string
	var asJSON bool
	c := &cobra.Command{
		Use:   "end VEHICLE --at ADDR",
		Short: "End a drive that its vehicle will not end",
		Long: `End has the server end a vehicle's drive as if the vehicle had: what was held
back for late measurements is filtered, and whoever feeds it is sent away. The
vehicle can still be asked for.`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			return asking(&to, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
				r, err := s.EndDrive(ctx, &leadlinev1.EndDriveRequest{Vehicle: args[0], Drive: drive})
				if err != nil {
					return err
				}
				if asJSON {
					return printMessage(c.OutOrStdout(), r.GetClosed())
				}
				printClosed(c.OutOrStdout(), args[0], r.GetClosed())
				return nil
			})
		},
	}
	to.flags(c, "at")
	c.Flags().StringVar(&drive, "drive", "", "the drive's name; another one is left alone")
	c.Flags().BoolVar(&asJSON, "json", false, "print the server's last word as JSON")
	return c
}

// printClosed prints how a drive has ended.
func printClosed(w io.Writer, name string, c *leadlinev1.Closed) {
	if t := c.GetTraffic(); t != nil {
		printTraffic(w, t)
		return
	}
	fmt.Fprintf(w, "%s: %d posteriors from %d measurements, %d refused\nsha256 %s\n",
		oneLine(name), c.GetPosteriors(), c.GetAccepted()+c.GetRefused(), c.GetRefused(), c.GetPosteriorSha256())
	printPosterior(w, c.GetPosterior())
}
