package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/livelog"
	"leadline/engine/logfile"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// liveOptions are those of a feed from instruments.
type liveOptions struct {
	sentenceOptions
	drive     string
	leaveOpen bool
	outboxOptions
}

// liveFlags are the flags that only instruments have, recordedFlags those that
// only a recorded drive has.
var (
	liveFlags     = []string{"vehicle", "start", "sentences", "satellites", "variation", "reckon", "drive", "leave-open", "keep", "keep-mib"}
	recordedFlags = []string{"speed"}
)

func (o *liveOptions) flags(c *cobra.Command) {
	o.sentenceOptions.flags(c)
	c.Flags().StringVar(&o.drive, "drive", "", "instruments: name of the drive; one that was left open goes on")
	c.Flags().BoolVar(&o.leaveOpen, "leave-open", false, "instruments: do not end the drive at a signal")
	o.outboxOptions.flags(c)
}

// onlyOf names a flag of a list that was given, or "".
func onlyOf(c *cobra.Command, names []string) string {
	for _, name := range names {
		if c.Flags().Changed(name) {
			return name
		}
	}
	return ""
}

// flushEvery is how long a measurement may wait for others to be sent with it.
const flushEvery = 100 * time.Millisecond

// live feeds what instruments say until a signal comes.
func (o *feedOptions) live(c *cobra.Command, from string) error {
	if flag := onlyOf(c, recordedFlags); flag != "" {
		return fmt.Errorf("--%s is for recorded drives: %s speaks as it does", flag, from)
	}
	if err := checkAddresses("--to", o.address); err != nil {
		return err
	}
	source, err := livelog.Parse(from)
	if err != nil {
		return err
	}
	header, err := o.header()
	if err != nil {
		return err
	}
	sentences, err := o.sentences()
	if err != nil {
		return err
	}
	if sentences.Time.From == "" {
		sentences.Time.From = logfile.FromArrival
	}
	conn, err := o.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	stop, release := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer release()
	context.AfterFunc(stop, release) // a second signal kills

	errs := c.ErrOrStderr()
	stream, err := source.Open(stop, livelog.Options{Report: func(text string) { fmt.Fprintln(errs, oneLine(text)) }})
	if err != nil {
		return err
	}
	var refused refusals
	f, err := o.openSink(errs, conn, client.Drive{
		Header: wire.FromHeader(header), Name: o.drive, Replace: o.replace, Continue: true, Reply: leadlinev1.Reply_REPLY_NONE,
		OnRefusal: refused.add,
	})
	if err != nil && o.keep != "" { // it is of the file: nobody was called yet
		return err
	}
	if err != nil {
		return fmt.Errorf("%s: %w", from, serverError(err, o.address))
	}
	if a := stream.Addr(); a != nil {
		fmt.Fprintf(errs, "listening on %s\n", a)
	}
	fmt.Fprintf(errs, "feeding %s to %s\n", source, o.address)
	n := logfile.NewNMEA(source.String(), sentences, func(r logfile.Record) error {
		if r.Event == nil {
			return nil // a truth: there is nobody to compare with it
		}
		return f.Send(wire.FromEvent(*r.Event))
	})
	if err := pump(n, f, stream.Lines()); err != nil {
		f.Abort()
		return fmt.Errorf("%s: %w", from, o.broken(err, f.Name()))
	}
	untimed := n.End()
	o.told(errs, n.Tally())
	return errors.Join(o.end(c, f, from, header.Vehicle, &refused), untimed)
}

// end ends a feed of a drive, or leaves the drive open.
func (o *feedOptions) end(c *cobra.Command, f sink, from, vehicle string, refused *refusals) error {
	if o.leaveOpen {
		if err := f.Leave(); err != nil {
			return fmt.Errorf("%s: %w", from, o.broken(err, f.Name()))
		}
		fmt.Fprintf(c.OutOrStdout(), "%s is left open: go on with --drive %s\n", f.Name(), f.Name())
		return nil
	}
	closed, err := f.Close()
	if err != nil {
		return fmt.Errorf("%s: %w", from, o.broken(err, f.Name()))
	}
	return o.conclude(c, from, vehicle, closed, refused)
}

// sink is where measurements of instruments go: to a server, or first into a file.
type sink interface {
	Name() string
	Send(m *leadlinev1.SensorMeasurement) error
	Flush() error
	Close() (*leadlinev1.Closed, error)
	Leave() error
	Abort()
}

var _, _ sink = (*client.Feed)(nil), (*keptSink)(nil)

func (o *feedOptions) openSink(errs io.Writer, conn *grpc.ClientConn, d client.Drive) (sink, error) {
	if o.keep != "" {
		s, err := o.openKept(errs, conn, d, o.address)
		if err != nil {
			return nil, err
		}
		if err := s.KeepOpen(o.leaveOpen); err != nil {
			s.Abort()
			return nil, o.keepError(err, false)
		}
		return s, nil
	}
	f, err := client.Open(context.Background(), conn, d)
	if err != nil {
		return nil, err
	}
	o.resumed(errs, f)
	return f, nil
}

// broken words why a feed ended before the instruments did.
func (o *feedOptions) broken(err error, drive string) error {
	if endedElsewhere(err) {
		return o.failed(err)
	}
	if errors.As(err, new(failure)) { // says it itself
		return err
	}
	return sentences(serverError(err, o.address), fmt.Sprintf("The drive was not ended: go on with --drive %s, if the server still has it", drive))
}

// resumed says what became of a drive that was to go on: a server that was
// started again has forgotten it.
func (o *feedOptions) resumed(errs io.Writer, f *client.Feed) {
	switch {
	case o.drive == "":
	case f.Had() > 0:
		fmt.Fprintf(errs, "drive %s goes on after its batch %d\n", o.drive, f.Had())
	default:
		fmt.Fprintf(errs, "drive %s is a new one: the server has nothing of that name, or has forgotten it\n", o.drive)
	}
}

// told prints what became of the lines.
func (o *feedOptions) told(errs io.Writer, t *logfile.Tally) {
	fmt.Fprintf(errs, "%d measurements from %d lines\n", t.Usable(), t.Lines)
	printTally(errs, t)
}

// pump turns lines into measurements until there are no more.
//
// Lines are timed by this computer's clock as it was at the first one, and
// from then on by how much time passed: a clock that is set while the feed
// runs does not tear the increments apart.
func pump(n *logfile.NMEA, f sink, lines <-chan livelog.Line) error {
	tick := time.NewTicker(flushEvery)
	defer tick.Stop()
	var began time.Time
	for {
		select {
		case l, ok := <-lines:
			if !ok {
				return nil
			}
			if began.IsZero() {
				began = l.Arrived
			}
			at := sensor.Time(began.UnixNano() + int64(l.Arrived.Sub(began)))
			if err := n.Line(l.Text, l.Whole, at); err != nil {
				return err
			}
		case <-tick.C:
			if err := f.Flush(); err != nil {
				return err
			}
		}
	}
}
