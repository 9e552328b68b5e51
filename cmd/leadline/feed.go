package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"net"
	"os"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"leadline/engine/client"
	"leadline/engine/drivefile"
	"leadline/engine/livelog"
	"leadline/engine/sensor"
	"leadline/engine/study/replay"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

type feedOptions struct {
	headerOptions
	reach
	speed        float64
	replace      bool
	asJSON       bool
	allowRefused bool
	liveOptions
}

func feedCommand() *cobra.Command {
	var o feedOptions
	c := &cobra.Command{
		Use:   "feed DRIVE|SOURCE --to ADDR",
		Short: "Send a recorded drive, or instruments as they speak, to a server",
		Long: `Feed sends a drive file to a server, or NMEA 0183 sentences as they come from a
source:

  serial:/dev/ttyUSB0?baud=38400   a serial port, 4800 baud unless said
  tcp:HOST:PORT                    a server of sentences that is connected to
  udp:HOST:PORT, udp::PORT         datagrams that are listened for

A source that is lost is opened again. SIGINT or SIGTERM ends the feed: what was
heard is sent, and the drive is ended. A second signal stops at once.

With --keep what is heard goes into a file first: nothing of it is lost while the
server or the network is away, or if this program ends. Without a source, --keep
sends what such a file holds.`,
		Args: cobra.MaximumNArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if len(args) == 0 {
				if o.keep == "" {
					return errors.New("there is nothing to feed: give a drive file, a source, or --keep with a file of an earlier feed")
				}
				return o.sendKept(c)
			}
			if err := knownSource(args[0]); err != nil {
				return err
			}
			if livelog.Is(args[0]) {
				return o.live(c, args[0])
			}
			return feed(c, &o, args[0])
		},
	}
	f := c.Flags()
	o.reach.flags(c, "to")
	f.StringVar(&o.mapName, "map", "", "name of the map at the server, in place of the one in the drive's header")
	f.StringVar(&o.suite, "suite", "", "name of the suite at the server, in place of the one in the drive's header")
	f.Float64Var(&o.speed, "speed", 0, "send at this many times real time; 0 is as fast as possible")
	f.BoolVar(&o.replace, "replace", false, "give up another drive that the vehicle has not finished")
	f.BoolVar(&o.asJSON, "json", false, "print what the server says at the end as JSON")
	f.BoolVar(&o.allowRefused, "allow-refused", false, "exit with status 0 although measurements were refused")
	o.headerOptions.flags(c)
	o.liveOptions.flags(c)
	return c
}

// knownSource refuses what looks like a source of instruments and is none.
func knownSource(text string) error {
	kind, _, ok := strings.Cut(text, ":")
	if !ok || livelog.Is(text) || strings.ContainsAny(kind, `/\.`) || len(kind) < 2 {
		return nil
	}
	if _, err := os.Stat(text); err == nil {
		return nil
	}
	return fmt.Errorf("%s: %q is no kind of source: give serial:DEVICE, tcp:HOST:PORT, udp:HOST:PORT, or the path of a drive file", text, kind)
}

func feed(c *cobra.Command, o *feedOptions, path string) error {
	if !(o.speed >= 0) || math.IsInf(o.speed, 0) {
		return fmt.Errorf("--speed is %v: give a positive number, or 0 for as fast as possible", o.speed)
	}
	if flag := onlyOf(c, liveFlags); flag != "" {
		return fmt.Errorf("--%s is for instruments: %s is a recorded drive, whose header says it", flag, path)
	}
	if err := checkAddresses("--to", o.address); err != nil {
		return err
	}
	d, err := readDrive(path)
	if err != nil {
		return err
	}
	if o.mapName != "" {
		d.Header.Map = o.mapName
	}
	if o.suite != "" {
		d.Header.Suite = o.suite
	}
	if len(d.Events) == 0 {
		return fmt.Errorf("%s: %w", path, replay.ErrNoMeasurements)
	}
	var refused refusals
	closed, err := o.send(c.ErrOrStderr(), d, driveName(path), &refused)
	if err != nil {
		return fmt.Errorf("%s: %w", path, o.failed(err))
	}
	return o.conclude(c, path, driveName(path), closed, &refused)
}

// conclude prints what the server says at the end, and judges it.
func (o *feedOptions) conclude(c *cobra.Command, path, name string, closed *leadlinev1.Closed, refused *refusals) error {
	if o.asJSON {
		if err := printMessage(c.OutOrStdout(), closed); err != nil {
			return err
		}
	} else if t := closed.GetTraffic(); t != nil {
		fmt.Fprintf(c.OutOrStdout(), "%s: %d measurements, %d refused\n", name, closed.GetAccepted()+closed.GetRefused(), closed.GetRefused())
		printTraffic(c.OutOrStdout(), t)
	} else {
		fmt.Fprintf(c.OutOrStdout(), "%s: %d posteriors from %d measurements, %d refused\nsha256 %s\n",
			name, closed.GetPosteriors(), closed.GetAccepted()+closed.GetRefused(), closed.GetRefused(), closed.GetPosteriorSha256())
		printPosterior(c.OutOrStdout(), closed.GetPosterior())
	}
	own, first := refused.own()
	if others := closed.GetRefused() - min(own, closed.GetRefused()); others > 0 {
		fmt.Fprintf(c.ErrOrStderr(), "note: the server refused %s of this drive that this feed was not told of: an earlier feed's, or sightings that people entered\n", count(int(others), "more measurement"))
	}
	if own > 0 && !o.allowRefused {
		return fmt.Errorf("%s: %d of %d measurements were refused, first %w; with --allow-refused this is no error",
			path, own, closed.GetRefused()+closed.GetAccepted(), first)
	}
	return nil
}

// send carries a drive to the server, in the order of events.
func (o *feedOptions) send(errs io.Writer, d *drivefile.Drive, name string, refused *refusals) (*leadlinev1.Closed, error) {
	conn, err := o.dial()
	if err != nil {
		return nil, err
	}
	defer conn.Close()
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	f, err := client.Open(ctx, conn, client.Drive{
		Header: wire.FromHeader(d.Header), Replace: o.replace, Reply: leadlinev1.Reply_REPLY_NONE,
		OnRefusal: refused.add,
	})
	if err != nil {
		return nil, err
	}
	show, end := progress(errs, name)
	defer end()
	events := replay.Ordered(d.Events)
	began := time.Now()
	for i, ev := range events {
		if o.speed > 0 {
			if wait := due(events[0].Time, ev.Time, o.speed) - time.Since(began); wait > 0 {
				if err := f.Flush(); err != nil {
					f.Abort()
					return nil, err
				}
				time.Sleep(wait)
			}
		}
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			f.Abort()
			return nil, err
		}
		if show != nil && i%32 == 0 {
			show(i, len(events))
		}
	}
	return f.Close()
}

// due is how long after the first event of a drive another one is sent.
func due(first, at sensor.Time, speed float64) time.Duration {
	return time.Duration(math.Min(at.Seconds(first)/speed*1e9, 1<<62))
}

// failed words why a feed ended before its drive did.
func (o *feedOptions) failed(err error) error {
	worded := serverError(err, o.address)
	switch {
	case endedElsewhere(err):
		return failure{worded} // the feed was good, and what came of it is not
	case status.Code(err) == codes.Unavailable:
		return sentences(worded, "The drive was not fed to its end: feed it again")
	}
	return worded
}

// endedElsewhere reports whether somebody ended the drive that a feed was
// feeding.
func endedElsewhere(err error) bool {
	why, ok := client.WhyOf(err)
	return ok && why.Reason == leadlinev1.Reason_REASON_DRIVE_ENDED
}

// sentences is an error with another sentence after it.
func sentences(err error, next string) error {
	if strings.HasSuffix(err.Error(), "?") {
		return fmt.Errorf("%w %s", err, next)
	}
	return fmt.Errorf("%w. %s", err, next)
}

// checkAddress wants HOST:PORT: without a port another one would be tried.
func checkAddress(flag, address string) error {
	if _, port, err := net.SplitHostPort(address); err != nil || port == "" {
		return fmt.Errorf("%s %s is no address: give HOST:PORT, such as %s", flag, address, defaultAddress)
	}
	return nil
}

// checkAddresses wants one of those, or several with commas.
func checkAddresses(flag, addresses string) error {
	for _, a := range strings.Split(addresses, ",") {
		if err := checkAddress(flag, strings.TrimSpace(a)); err != nil {
			return err
		}
	}
	return nil
}

// serverError words what a call ended with: what the server said, or that it
// could not be reached.
func serverError(err error, address string) error {
	if why, ok := client.WhyOf(err); ok {
		// What a program sets in a request, a person says by a flag.
		message := strings.ReplaceAll(oneLine(why.Message), "set replace", "give --replace")
		return fmt.Errorf("%s (%s)", message, reasonName(why.Reason))
	}
	st, ok := status.FromError(err)
	if !ok {
		return err
	}
	switch st.Code() {
	case codes.Unavailable:
		return fmt.Errorf("no answer from the server at %s (%s): is it running there?", address, oneLine(st.Message()))
	case codes.DeadlineExceeded:
		return fmt.Errorf("no answer from the server at %s in time (%s): is it running there, or very busy?", address, oneLine(st.Message()))
	case codes.Unimplemented:
		return fmt.Errorf("the server at %s does not do that (%s): is it a Leadline server of this version?", address, oneLine(st.Message()))
	}
	return errors.New(oneLine(st.Message()))
}
