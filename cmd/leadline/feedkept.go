package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"sync/atomic"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/client/outbox"
	leadlinev1 "leadline/proto/leadline/v1"
)

// outboxOptions are those of a feed whose measurements go into a file first.
type outboxOptions struct {
	keep    string
	keepMiB int64
}

func (o *outboxOptions) flags(c *cobra.Command) {
	c.Flags().StringVar(&o.keep, "keep", "", "instruments: a file that keeps what is heard until the server has it; alone, without a source, sends what it holds")
	c.Flags().Int64Var(&o.keepMiB, "keep-mib", 1024, "instruments: MiB that the file may hold")
}

// lastTry is how long a feed that is ended waits for a server that takes nothing.
const lastTry = 10 * time.Second

// keptSink puts measurements into a file, from which they go to a server.
type keptSink struct {
	*outbox.Outbox
	errs          io.Writer
	file, address string
	dropped       int  // measurements, since the file was full
	said          bool // that it is
}

func (o *outboxOptions) openKept(errs io.Writer, conn grpc.ClientConnInterface, d client.Drive, address string) (*keptSink, error) {
	if o.keepMiB < 1 {
		return nil, fmt.Errorf("--keep-mib is %d: give a positive number", o.keepMiB)
	}
	s := &keptSink{errs: errs, file: o.keep, address: address}
	var away atomic.Bool
	d.OnLost = func(err error) {
		if !away.Swap(true) {
			fmt.Fprintf(errs, "%s: what is heard is kept in %s until it can be sent\n", oneLine(serverError(err, address).Error()), o.keep)
		}
	}
	d.OnOpened = func() {
		if away.Swap(false) {
			fmt.Fprintf(errs, "the server at %s takes measurements again: %d wait\n", address, s.Waiting())
		}
	}
	var err error
	s.Outbox, err = outbox.Open(o.keep, outbox.Options{
		Drive: d, MaxBytes: o.keepMiB << 20, MaxWait: flushEvery,
		OnForgotten: func(name string) {
			fmt.Fprintf(errs, "the server has forgotten the drive: what comes now is drive %s\n", name)
		},
	})
	if err != nil {
		return nil, o.keepError(err, d.Header == nil)
	}
	if n := s.Waiting(); n > 0 {
		fmt.Fprintf(errs, "%s holds %d measurements of drive %s that are sent first\n", o.keep, n, s.Name())
	}
	s.Start(context.Background(), conn)
	return s, nil
}

// Send takes a measurement; of a file that is full, the newest are dropped.
func (s *keptSink) Send(m *leadlinev1.SensorMeasurement) error {
	switch err := s.Add(m); {
	case errors.Is(err, outbox.ErrFull):
		s.dropped++
		if !s.said {
			s.said = true
			fmt.Fprintf(s.errs, "%s is full: what is heard is dropped until the server has taken some of it\n", s.file)
		}
	case err != nil:
		return err
	default:
		s.said = false
	}
	return nil
}

// Flush says why nothing is carried any more. Time has the outbox write.
func (s *keptSink) Flush() error {
	select {
	case <-s.Done():
		return s.Outbox.Leave(context.Background())
	default:
		return nil
	}
}

// whileTaken is a context that ends when the server has taken nothing for lastTry.
func (s *keptSink) whileTaken() (context.Context, context.CancelFunc) {
	ctx, cancel := context.WithCancel(context.Background())
	go func() {
		defer cancel()
		for n, since := s.Waiting(), time.Now(); time.Since(since) < lastTry; {
			select {
			case <-time.After(lastTry / 100):
			case <-ctx.Done():
				return
			}
			if now := s.Waiting(); now < n {
				n, since = now, time.Now()
			}
		}
	}()
	return ctx, cancel
}

func (s *keptSink) Close() (*leadlinev1.Closed, error) {
	ctx, cancel := s.whileTaken()
	defer cancel()
	closed, err := s.Outbox.Close(ctx)
	return closed, s.left(err)
}

func (s *keptSink) Leave() error {
	ctx, cancel := s.whileTaken()
	defer cancel()
	return s.left(s.Outbox.Leave(ctx))
}

// left says what did not come to the server.
func (s *keptSink) left(err error) error {
	if errors.Is(err, context.Canceled) {
		err = failure{fmt.Errorf("%d measurements are still in %s: the server at %s took none for %v. Send them with: leadline feed --keep %s --to %s",
			s.Waiting(), s.file, s.address, lastTry, s.file, s.address)}
	}
	if s.dropped > 0 {
		err = errors.Join(err, failure{fmt.Errorf("%d measurements were dropped: %s was full; see --keep-mib", s.dropped, s.file)})
	}
	return err
}

// Abort leaves what is in the file.
func (s *keptSink) Abort() { _ = s.Outbox.Abort() } // the file says at its next opening what is wrong with it

// sendKept sends what a file holds.
func (o *feedOptions) sendKept(c *cobra.Command) error {
	for _, flag := range append(recordedFlags, "vehicle", "start", "sentences", "satellites", "variation", "reckon", "map", "suite") {
		if c.Flags().Changed(flag) {
			return fmt.Errorf("--%s is for a source or a drive: %s says it itself", flag, o.keep)
		}
	}
	if err := checkAddresses("--to", o.address); err != nil {
		return err
	}
	conn, err := o.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	var refused refusals
	s, err := o.openKept(c.ErrOrStderr(), conn, client.Drive{
		Name: o.drive, Replace: o.replace, Reply: leadlinev1.Reply_REPLY_NONE,
		OnRefusal: refused.add,
	}, o.address)
	if err != nil {
		return err
	}
	if !c.Flags().Changed("leave-open") {
		o.leaveOpen = s.KeptOpen()
	}
	return o.end(c, s, o.keep, s.Name(), &refused)
}
