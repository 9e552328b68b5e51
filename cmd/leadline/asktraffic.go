package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// askTraffic asks a server for a road's traffic.
func askTraffic(c *cobra.Command, o *trafficOptions, road string) error {
	if err := o.check(); err != nil {
		return err
	}
	switch {
	case o.suite != "":
		return errors.New("--suite goes with a file: the server has the road's own")
	case o.everyS > 3600:
		return fmt.Errorf("--every is %v: give at most 3600 with --at", o.everyS)
	}
	say := func(p *leadlinev1.TrafficPicture) error {
		if o.asJSON {
			return printLine(c.OutOrStdout(), p)
		}
		printTraffic(c.OutOrStdout(), p)
		return nil
	}
	req := &leadlinev1.TrafficRequest{Road: road, LeastExistence: proto.Float64(o.least), Parts: uint32(o.parts)}
	if !o.follow {
		return asking(&o.reach, func(ctx context.Context, s leadlinev1.PositionServiceClient) error {
			r, err := s.Traffic(ctx, req)
			if err != nil {
				return err
			}
			return say(r.GetPicture())
		})
	}
	conn, err := o.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	ctx, stop := untilSignal()
	defer stop()
	err = client.FollowTraffic(ctx, conn, &leadlinev1.FollowTrafficRequest{Traffic: req, MinIntervalS: o.everyS}, func(m *leadlinev1.FollowTrafficResponse) error {
		return say(m.GetPicture())
	})
	if err == nil || ctx.Err() != nil {
		return nil
	}
	return serverError(err, o.address)
}

// printTraffic prints a picture that a server told.
func printTraffic(w io.Writer, p *leadlinev1.TrafficPicture) {
	at := "nothing heard yet"
	if p.GetTime() != nil {
		at = p.GetTime().AsTime().Format(time.RFC3339Nano)
	}
	fmt.Fprintf(w, "%s  %d vehicles, %.1f expected\n", at, len(p.GetVehicles()), p.GetExpected())
	for _, v := range p.GetVehicles() {
		way := "forward"
		if v.GetForward() < 0.5 {
			way = "backward"
		}
		fmt.Fprintf(w, "  %6d  at %7.1f ± %.1f m  %5.1f ± %.1f m/s %-8s  exists %.3f  %.6f,%.6f\n",
			v.GetLabel(), v.GetPositionM(), v.GetPositionSigmaM(), math.Abs(v.GetSpeedMps()), v.GetSpeedSigmaMps(), way, v.GetExistence(), v.GetMean().GetLon(), v.GetMean().GetLat())
	}
	for i, x := range p.GetIntensityPerKm() {
		fmt.Fprintf(w, "  part %d: %.2f a kilometre\n", i+1, x)
	}
	for _, l := range p.GetLines() {
		fmt.Fprintf(w, "line %s at %.0f m: %d forward, %d backward", oneLine(l.GetName()), l.GetAtM(), l.GetForward(), l.GetBackward())
		if l.GetFlowS() >= 60 {
			fmt.Fprintf(w, "; %.0f an hour", l.GetForwardPerHour()+l.GetBackwardPerHour())
		}
		fmt.Fprintln(w)
	}
	for _, d := range p.GetDoubts() {
		fmt.Fprintln(w, "note: "+oneLine(d.GetDetail()))
	}
	fmt.Fprintln(w, "sha256 of all that is known", p.GetStateSha256())
}
