package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strconv"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/protobuf/types/known/timestamppb"

	leadlinev1 "leadline/proto/leadline/v1"
)

type sightingOptions struct {
	reach
	drive, road, area, who, at string
	mistaken                   float64
	asJSON                     bool
}

func sightingCommand() *cobra.Command {
	var o sightingOptions
	c := &cobra.Command{
		Use:   "sighting VEHICLE --road NAME|--area FILE --at ADDR",
		Short: "Tell a server where somebody has seen a vehicle",
		Long: `Sighting enters what somebody says of a vehicle beside what the vehicle sends, as
long as its drive goes on: that it is on a road, or inside an area. It prints what was
known before and what is known then. A sighting of which no doubt is stated rules out
every other place: say with --mistaken how often such a word is wrong.`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			req, err := o.request(c, args[0])
			if err != nil {
				return err
			}
			return asking(&o.reach, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
				r, err := s.AddSighting(ctx, req)
				if err != nil {
					return err
				}
				if o.asJSON {
					if err := printMessage(c.OutOrStdout(), r); err != nil {
						return err
					}
				}
				if f := r.GetRefusal(); f != nil {
					return fmt.Errorf("the server refused it, and nothing has changed: %w", refusalError(f))
				}
				if !o.asJSON {
					printSighting(c.OutOrStdout(), r)
				}
				return nil
			})
		},
	}
	f := c.Flags()
	o.reach.flags(c, "at")
	f.StringVar(&o.road, "road", "", "it is on the road of this name")
	f.StringVar(&o.area, "area", "", "it is inside the polygon of this GeoJSON file")
	f.Float64Var(&o.mistaken, "mistaken", 0, "probability that this is mistaken, such as 0.1, below 1")
	f.StringVar(&o.who, "who", "", "who says so (default: whom the server knows the caller to be)")
	f.StringVar(&o.at, "time", "", "when it held, RFC 3339 (default: the time of the vehicle's latest posterior)")
	f.StringVar(&o.drive, "drive", "", "the drive's name; another one is left alone")
	f.BoolVar(&o.asJSON, "json", false, "print what became of it as JSON")
	return c
}

// request makes the request of the flags.
func (o *sightingOptions) request(c *cobra.Command, vehicle string) (*leadlinev1.AddSightingRequest, error) {
	seen := &leadlinev1.Sighting{Mistaken: o.mistaken, Who: o.who}
	req := &leadlinev1.AddSightingRequest{Vehicle: vehicle, Drive: o.drive, Sighting: seen}
	switch {
	case (o.road == "") == (o.area == ""):
		return nil, errors.New("say where it was seen: give --road or --area, and not both")
	case o.road != "":
		seen.Place = &leadlinev1.Sighting_Road{Road: o.road}
	default:
		area, err := readArea("--area", o.area)
		if err != nil {
			return nil, err
		}
		seen.Place = &leadlinev1.Sighting_Area{Area: area}
	}
	if !(o.mistaken >= 0 && o.mistaken < 1) {
		return nil, fmt.Errorf("--mistaken is %v: give a probability, 0 or more and below 1, such as 0.1", o.mistaken)
	}
	if c.Flags().Changed("time") {
		t, err := time.Parse(time.RFC3339Nano, o.at)
		if err != nil {
			return nil, fmt.Errorf("--time is %q: give a time such as 2030-05-01T12:00:15Z", o.at)
		}
		req.Time = timestamppb.New(t)
	}
	return req, nil
}

// printSighting prints what was known before a sighting and what is known with it.
func printSighting(w io.Writer, r *leadlinev1.AddSightingResponse) {
	fmt.Fprintf(w, "entered for %s\nbefore: ", r.GetMeasurement().GetTime().AsTime().Format(time.RFC3339Nano))
	printPosterior(w, r.GetBefore())
	fmt.Fprint(w, "then: ")
	printPosterior(w, r.GetAfter())
}

func seenCommand() *cobra.Command {
	var to reach
	var who, note string
	var asJSON bool
	c := &cobra.Command{
		Use:   "seen NUMBER --who NAME --at ADDR",
		Short: "Say that somebody has seen an alarm",
		Long: `Seen notes at the server who has seen an alarm, whose number "leadline follow
--alarms" prints. The first one counts. The alarm goes on until its reason is gone.`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			number, err := strconv.ParseUint(args[0], 10, 64)
			if err != nil || number == 0 {
				return fmt.Errorf("%q is no number of an alarm: give one that \"leadline follow --alarms\" prints", args[0])
			}
			if who == "" {
				return errors.New("--who is missing: say who has seen it")
			}
			return asking(&to, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
				r, err := s.SeeAlarm(ctx, &leadlinev1.SeeAlarmRequest{Number: number, Who: who, Note: note})
				if err != nil {
					return err
				}
				if asJSON {
					return printMessage(c.OutOrStdout(), r.GetAlarm())
				}
				fmt.Fprintln(c.OutOrStdout(), oneLine(r.GetAlarm().GetVehicle()+" "+recordText(r.GetAlarm())))
				return nil
			})
		},
	}
	to.flags(c, "at")
	c.Flags().StringVar(&who, "who", "", "who has seen it")
	c.Flags().StringVar(&note, "note", "", "what they say of it")
	c.Flags().BoolVar(&asJSON, "json", false, "print the alarm as JSON")
	return c
}

// recordText words an alarm's record: what it is, and what became of it.
func recordText(a *leadlinev1.AlarmRecord) string {
	what := "it is lost"
	if !a.GetLost() {
		what = alarmText(a.GetAlarm())
	}
	at := func(t *timestamppb.Timestamp) string { return t.AsTime().Format(time.RFC3339) }
	text := fmt.Sprintf("has alarm %d, raised %s: %s", a.GetNumber(), at(a.GetRaisedAt()), what)
	if a.GetSeenAt() != nil {
		text += fmt.Sprintf("; seen %s by %s", at(a.GetSeenAt()), a.GetSeenBy())
		if a.GetNote() != "" {
			text += ": " + a.GetNote()
		}
	}
	if a.GetClearedAt() != nil {
		text += fmt.Sprintf("; cleared %s: %s", at(a.GetClearedAt()), a.GetClearedReason())
	}
	return text
}
