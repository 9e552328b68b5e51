package main

import (
	"cmp"
	"context"
	"fmt"
	"io"
	"strings"
	"time"

	"github.com/spf13/cobra"

	leadlinev1 "leadline/proto/leadline/v1"
)

func eraseCommand() *cobra.Command {
	var to reach
	var yes, asJSON bool
	var wait time.Duration
	c := &cobra.Command{
		Use:   "erase VEHICLE --yes --at ADDR",
		Short: "Erase what a server keeps of a vehicle",
		Long: `Erase has the server give up a vehicle's drive and overwrite all records of the
vehicle in its journal. It cannot be undone. A drive that the vehicle opens later
is kept as any other.`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if !yes {
				return fmt.Errorf("erasing vehicle %q cannot be undone: say --yes if that is what you want", args[0])
			}
			if err := checkTimeout(wait); err != nil {
				return err
			}
			return askingFor(wait, &to, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
				r, err := s.EraseVehicle(ctx, &leadlinev1.EraseVehicleRequest{Vehicle: args[0]})
				if err != nil {
					return err
				}
				if asJSON {
					return printMessage(c.OutOrStdout(), r)
				}
				if r.GetDrives() == 0 {
					fmt.Fprintf(c.OutOrStdout(), "nothing was kept of vehicle %q\n", args[0])
					return nil
				}
				fmt.Fprintf(c.OutOrStdout(), "%s is erased: %d drives, %d records of the journal\n", oneLine(args[0]), r.GetDrives(), r.GetRecords())
				return nil
			})
		},
	}
	to.flags(c, "at")
	c.Flags().BoolVar(&yes, "yes", false, "it is to be erased; without it nothing is done")
	c.Flags().DurationVar(&wait, "timeout", 10*time.Minute, "how long to wait; the server goes on with it")
	c.Flags().BoolVar(&asJSON, "json", false, "print what was erased as JSON")
	return c
}

func journalCommand() *cobra.Command {
	var to reach
	var asJSON bool
	c := &cobra.Command{
		Use:   "journal --at ADDR",
		Short: "Say how a server's journal is doing",
		Args:  cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error {
			return asking(&to, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
				r, err := s.DescribeJournal(ctx, &leadlinev1.DescribeJournalRequest{})
				if err != nil {
					return err
				}
				if asJSON {
					return printMessage(c.OutOrStdout(), r)
				}
				printJournal(c.OutOrStdout(), r)
				return nil
			})
		},
	}
	to.flags(c, "at")
	c.Flags().BoolVar(&asJSON, "json", false, "print it as JSON")
	return c
}

// printJournal prints how a journal is doing.
func printJournal(w io.Writer, j *leadlinev1.DescribeJournalResponse) {
	fmt.Fprintf(w, "%s, opened %d times, %d partitions\n", oneLine(j.GetWhere()), j.GetEpoch(), j.GetPartitions())
	if others := j.GetOtherServers(); len(others) > 0 || j.GetOwnPartitions() < j.GetPartitions() {
		fmt.Fprintf(w, "this server serves %d of them; others: %s\n", j.GetOwnPartitions(), cmp.Or(oneLine(strings.Join(others, ", ")), "none"))
	}
	fmt.Fprintf(w, "%d of %d MiB", j.GetBytes()>>20, j.GetMostBytes()>>20)
	if j.FreeBytes != nil {
		fmt.Fprintf(w, "; %d MiB free on its disk, of which %d are left free", j.GetFreeBytes()>>20, j.GetLeaveBytes()>>20)
	}
	fmt.Fprintf(w, "\n%d records since it was opened, %d refused, %d waiting\n", j.GetRecords(), j.GetRefused(), j.GetWaiting())
	if j.GetOldest() != nil {
		fmt.Fprintf(w, "oldest record %s", j.GetOldest().AsTime().Format(time.RFC3339))
	} else {
		fmt.Fprint(w, "no records")
	}
	if s := j.GetKeepForS(); s > 0 {
		fmt.Fprintf(w, "; records are kept for %v at most\n", time.Duration(s*1e9))
	} else {
		fmt.Fprintln(w, "; records are kept while there is room")
	}
	if f := j.GetFailure(); f != "" {
		fmt.Fprintf(w, "it takes no measurements: %s\n", oneLine(f))
	}
}
