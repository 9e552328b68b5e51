package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

type whereOptions struct {
	reach
	area    string
	asJSON  bool
	now     bool
	ago     time.Duration
	regions []float64
	risk    float64
	timeout time.Duration
}

func whereCommand() *cobra.Command {
	var o whereOptions
	c := &cobra.Command{
		Use:   "where VEHICLE... --at ADDR",
		Short: "Ask a server where vehicles are",
		Args:  cobra.MinimumNArgs(1),
		RunE:  func(c *cobra.Command, args []string) error { return where(c, &o, args) },
	}
	f := c.Flags()
	o.reach.flags(c, "at")
	f.BoolVar(&o.asJSON, "json", false, "print each answer as JSON, regions as polygons")
	f.BoolVar(&o.now, "now", false, "carry the belief on to the present, instead of the last measurement; not of a drive that has ended")
	f.DurationVar(&o.ago, "ago", 0, "ask what is known of so long ago, given all since; at most the suite's look_back_s")
	f.Float64SliceVar(&o.regions, "region", nil, "percentage whose smallest region is wanted, such as 95; repeat for several")
	f.Float64Var(&o.risk, "risk", 0, "integrity risk of the protection radius (default: the suite's)")
	f.StringVar(&o.area, "area", "", "GeoJSON file with one polygon whose probability is wanted")
	f.DurationVar(&o.timeout, "timeout", 10*time.Second, "how long to wait for an answer")
	return c
}

// checkTimeout wants a time to wait.
func checkTimeout(wait time.Duration) error {
	if wait <= 0 {
		return fmt.Errorf("--timeout is %v: give how long to wait, such as 10s", wait)
	}
	return nil
}

// checkRegion wants a percentage; below 1 a fraction was meant.
func checkRegion(percent float64) error {
	switch {
	case percent > 0 && percent < 1:
		return fmt.Errorf("--region is %v: it is a percentage, 1 or more and below 100: for the fraction %v give %v", percent, percent, 100*percent)
	case !(percent > 0 && percent < 100):
		return fmt.Errorf("--region is %v: give a percentage, 1 or more and below 100", percent)
	}
	return nil
}

func where(c *cobra.Command, o *whereOptions, vehicles []string) error {
	if o.ago < 0 || c.Flags().Changed("ago") && o.ago == 0 {
		return fmt.Errorf("--ago is %v: give how long ago, such as 10s", o.ago)
	}
	if err := checkTimeout(o.timeout); err != nil {
		return err
	}
	req := &leadlinev1.WhereRequest{Vehicles: vehicles, PredictToNow: o.now, AgoS: o.ago.Seconds()}
	for _, percent := range o.regions {
		if err := checkRegion(percent); err != nil {
			return err
		}
		req.RegionFractions = append(req.RegionFractions, percent/100)
	}
	if c.Flags().Changed("risk") {
		req.IntegrityRisk = proto.Float64(o.risk)
	}
	if o.area != "" {
		var err error
		if req.Area, err = readArea("--area", o.area); err != nil {
			return err
		}
	}
	conn, err := o.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	ctx, cancel := context.WithTimeout(context.Background(), o.timeout)
	defer cancel()
	resp, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, req)
	if errors.Is(ctx.Err(), context.DeadlineExceeded) && err != nil {
		return fmt.Errorf("no answer from the server at %s within %v: give a longer --timeout, or see whether it runs there", o.address, o.timeout)
	}
	if err != nil {
		return serverError(err, o.address)
	}
	var failed error
	missing := 0
	for _, answer := range resp.GetAnswers() {
		if f := answer.GetFailure(); f != nil {
			if missing++; missing == 1 {
				failed = fmt.Errorf("%s (%s)", oneLine(f.GetMessage()), reasonName(f.GetReason()))
			}
		}
		if why := o.notCarried(answer); why != "" && o.asJSON {
			fmt.Fprintf(c.ErrOrStderr(), "note: %s: %s\n", oneLine(answer.GetVehicle()), why)
		}
		switch {
		case o.asJSON:
			err = printMessage(c.OutOrStdout(), answer)
		case answer.GetFailure() == nil:
			o.print(c.OutOrStdout(), answer)
		}
		if err != nil {
			return err
		}
	}
	if missing > 0 && len(vehicles) > 1 {
		return fmt.Errorf("%d of %d vehicles have no answer, first: %w", missing, len(vehicles), failed)
	}
	return failed
}

// notCarried says why an answer was not carried on to the present, though that was
// asked for; "" if it was, or was not asked for.
func (o *whereOptions) notCarried(answer *leadlinev1.WhereAnswer) string {
	p := answer.GetPosterior()
	switch {
	case !o.now || p == nil || p.GetPredictedS() > 0:
		return ""
	case answer.GetEnded():
		return "not carried on to the present: its drive has ended, and this is of its last measurement"
	case p.GetAgeS() < 0:
		return "not carried on to the present: its last measurement is " + age(p.GetAgeS())
	}
	return "" // it is of the present
}

// print prints the answer for one vehicle.
func (o *whereOptions) print(w io.Writer, answer *leadlinev1.WhereAnswer) {
	p := answer.GetPosterior()
	var first []string
	if why := o.notCarried(answer); why != "" {
		first = []string{why}
	}
	printPosterior(w, p, first...)
	if s := p.GetPredictedS(); s > 0 {
		fmt.Fprintf(w, "  %-14s %.1f s beyond the last measurement, by how the vehicle may move\n", "carried on", s)
	}
	if s := p.GetHindsightS(); s > 0 {
		fmt.Fprintf(w, "  %-14s %.1f s that were measured since are in it\n", "looked back", s)
	}
	for _, r := range p.GetRegions() {
		fmt.Fprintf(w, "  %-14s %.4g %% within %.0f m² in %s (polygons with --json)\n", "region", 100*r.GetProbability(), r.GetAreaM2(), count(len(r.GetPolygons()), "piece"))
	}
	if p.AreaProbability != nil {
		fmt.Fprintf(w, "  %-14s %.4g %% inside %s\n", "area", 100*p.GetAreaProbability(), o.area)
	}
	state := "goes on"
	if answer.GetEnded() {
		state = "has ended"
	}
	fmt.Fprintf(w, "  %-14s %s, %s; sha256 of what is final %s\n", "drive", state, strings.ToLower(durability(p)), answer.GetPosteriorSha256())
}
