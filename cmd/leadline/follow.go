package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"
	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

type followOptions struct {
	reach
	area, detail    string
	asJSON, changes bool
	alarms          bool
	interval        time.Duration
	inside          float64
	regions         []float64
	count           int
}

// details are the words of --detail.
var details = map[string]leadlinev1.Detail{
	"summary": leadlinev1.Detail_DETAIL_SUMMARY, "modes": leadlinev1.Detail_DETAIL_MODES,
	"region": leadlinev1.Detail_DETAIL_REGION, "belief": leadlinev1.Detail_DETAIL_BELIEF,
}

func followCommand() *cobra.Command {
	var o followOptions
	c := &cobra.Command{
		Use:   "follow [VEHICLE...] --at ADDR",
		Short: "Watch vehicles as they move on, a line for each update",
		Long: `Follow prints a line each time that the server has news of a vehicle, of all
vehicles if none is named, until it is interrupted. It is told the latest: where
the server or this program is slow, posteriors are skipped, and the line says
how many. A connection that breaks is taken up again where it was.`,
		Args: cobra.ArbitraryArgs,
		RunE: func(c *cobra.Command, args []string) error { return follow(c, &o, args) },
	}
	f := c.Flags()
	o.reach.flags(c, "at")
	f.BoolVar(&o.asJSON, "json", false, "print each update as JSON, one object a line")
	f.DurationVar(&o.interval, "interval", 0, "at least this long between two lines of a vehicle; a change of status comes at once")
	f.BoolVar(&o.changes, "changes", false, "only changes of status")
	f.BoolVar(&o.alarms, "alarms", false, "alarms, too, with their numbers: those on record first, then each when something about it changes")
	f.StringVar(&o.area, "area", "", "GeoJSON file with one polygon: only vehicles inside, and when they have left")
	f.Float64Var(&o.inside, "inside", 5, "percentage from which a vehicle counts as inside --area")
	f.StringVar(&o.detail, "detail", "summary", "how much --json prints: summary, modes, region or belief")
	f.Float64SliceVar(&o.regions, "region", nil, "percentage whose smallest region is wanted with --detail region, such as 95; repeat for several")
	f.IntVar(&o.count, "count", 0, "end after this many updates; 0 does not")
	return c
}

// request makes the request of the flags.
func (o *followOptions) request(c *cobra.Command, vehicles []string) (*leadlinev1.FollowRequest, error) {
	req := &leadlinev1.FollowRequest{Vehicles: vehicles, MinIntervalS: o.interval.Seconds(), StatusChangesOnly: o.changes, Alarms: o.alarms}
	var ok bool
	if req.Detail, ok = details[o.detail]; !ok {
		return nil, fmt.Errorf("--detail is %q: give summary, modes, region or belief", o.detail)
	}
	for _, percent := range o.regions {
		if err := checkRegion(percent); err != nil {
			return nil, err
		}
		req.RegionFractions = append(req.RegionFractions, percent/100)
	}
	if len(o.regions) > 0 && o.detail != "region" {
		return nil, errors.New("--region goes with --detail region")
	}
	if o.count < 0 {
		return nil, fmt.Errorf("--count is %d: give a positive number, or 0 for no end", o.count)
	}
	if c.Flags().Changed("inside") {
		if o.area == "" {
			return nil, errors.New("--inside goes with --area")
		}
		if !(o.inside > 0 && o.inside <= 100) {
			return nil, fmt.Errorf("--inside is %v: give a percentage above 0 and at most 100", o.inside)
		}
		req.AreaProbability = proto.Float64(o.inside / 100)
	}
	if o.area != "" {
		var err error
		if req.Area, err = readArea("--area", o.area); err != nil {
			return nil, err
		}
	}
	return req, nil
}

// errEnough ends a command that has printed what was asked for.
var errEnough = errors.New("enough")

func follow(c *cobra.Command, o *followOptions, vehicles []string) error {
	req, err := o.request(c, vehicles)
	if err != nil {
		return err
	}
	conn, err := o.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	ctx, stop := untilSignal()
	defer stop()
	w, n := c.OutOrStdout(), 0
	await(ctx, c.ErrOrStderr(), conn, o.address, vehicles)
	silence := &silence{errs: c.ErrOrStderr(), at: o.address, now: time.Now}
	err = client.Follow(ctx, conn, client.Following{
		Request: req,
		OnUpdate: func(m *leadlinev1.FollowResponse) error {
			silence.over()
			if m.GetAlarm() != nil && len(vehicles) > 0 && !slices.Contains(vehicles, m.GetVehicle()) {
				return nil // the server tells of the alarms of all vehicles
			}
			if err := o.print(w, m); err != nil {
				return err
			}
			if n++; n == o.count {
				return errEnough
			}
			return nil
		},
		OnBreak: silence.onBreak,
	})
	if errors.Is(err, errEnough) || ctx.Err() != nil {
		return nil
	}
	return serverError(err, o.address)
}

// await says which of the vehicles the server does not know yet. What else is wrong,
// following them tells.
func await(ctx context.Context, errs io.Writer, conn *grpc.ClientConn, address string, vehicles []string) {
	if len(vehicles) == 0 {
		return
	}
	ctx, cancel := context.WithTimeout(ctx, patient)
	defer cancel()
	resp, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{Vehicles: vehicles})
	if err != nil {
		return
	}
	for _, a := range resp.GetAnswers() {
		switch a.GetFailure().GetReason() {
		case leadlinev1.Reason_REASON_UNKNOWN_VEHICLE:
			fmt.Fprintf(errs, "note: no vehicle %q is known at %s yet: waiting for it (control-C ends that)\n", a.GetVehicle(), address)
		case leadlinev1.Reason_REASON_NO_POSTERIOR:
			fmt.Fprintf(errs, "note: vehicle %q has no posterior yet: waiting for the first\n", a.GetVehicle())
		}
	}
}

// print prints an update.
func (o *followOptions) print(w io.Writer, m *leadlinev1.FollowResponse) error {
	if o.asJSON {
		return printLine(w, m)
	}
	skipped := ""
	if n := m.GetSkipped(); n > 0 {
		skipped = fmt.Sprintf("; %d skipped", n)
	}
	var text string
	switch {
	case m.GetPosterior() != nil:
		p := m.GetPosterior()
		text = fmt.Sprintf("is %s at %s (%s): %slon %.6f, lat %.6f; 95 %% within %.1f m",
			words(p.GetStatus().String(), "STATUS_"), p.GetTime().AsTime().Format(time.RFC3339Nano), age(p.GetAgeS()),
			warning(p), p.GetMean().GetLon(), p.GetMean().GetLat(), p.GetRadii().GetRadius95M())
		if p.AreaProbability != nil {
			text += fmt.Sprintf("; %.4g %% inside", 100*p.GetAreaProbability())
		}
	case m.GetWithdrawn() != nil:
		ts := m.GetWithdrawn().GetTimes()
		said := make([]string, len(ts))
		for i, t := range ts {
			said[i] = t.AsTime().Format(time.RFC3339Nano)
		}
		text = "was not as said at " + strings.Join(said, ", ")
	case m.GetAlarm() != nil:
		text = recordText(m.GetAlarm())
	case m.GetFarewell().GetEnded():
		text = fmt.Sprintf("has ended its drive %s; sha256 %s", m.GetDrive(), m.GetFarewell().GetPosteriorSha256())
	default:
		text = fmt.Sprintf("is no longer on its drive %s: %s", m.GetDrive(), m.GetFarewell().GetReason())
	}
	_, err := fmt.Fprintln(w, oneLine(m.GetVehicle()+" "+text+skipped))
	return err
}

// warning is what a line says before its figures: the probability of being lost,
// and the alarms.
func warning(p *leadlinev1.Posterior) string {
	var said []string
	if isLost(p) {
		said = append(said, fmt.Sprintf("%.1f %% lost, where no figure holds; ", 100*p.GetLost()))
	}
	for _, a := range p.GetAlarms() {
		said = append(said, "alarm: "+alarmText(a)+"; ")
	}
	return strings.Join(said, "")
}

// printLine prints a message of the API as JSON, on a line of its own.
func printLine(w io.Writer, m proto.Message) error {
	b, err := protojson.MarshalOptions{UseProtoNames: true, EmitUnpopulated: true}.Marshal(m)
	if err != nil {
		return err
	}
	var out bytes.Buffer
	if err := json.Compact(&out, b); err != nil { // its spacing is varied on purpose
		return err
	}
	out.WriteByte('\n')
	_, err = out.WriteTo(w)
	return err
}
