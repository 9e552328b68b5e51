package main

import (
	"context"
	"fmt"
	"log/slog"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/protobuf/reflect/protoreflect"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/client"
	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/study/replay"
	"leadline/engine/wire"
)

// start starts a server that offers all scenes.
func (r *rehearsal) start(listen string) (*serving, error) {
	var o serveOptions
	c := o.command()
	root := &cobra.Command{}
	root.AddCommand(c)
	takeSettings(root)
	if err := c.ParseFlags(append(r.serveArgs()[1:], "--listen", listen)); err != nil {
		return nil, err
	}
	if err := configure(c); err != nil {
		return nil, err
	}
	return o.start(slog.New(slog.DiscardHandler))
}

// stay keeps a server with its page, and has all scenes move there at their own
// pace, again and again, as if it were now, until a signal comes: then it says so,
// within some seconds whoever is connected, and that is no failure.
func (r *rehearsal) stay(listen string) error {
	files := []string{}
	for _, s := range r.Scenes {
		files = append(files, s.DriveFile)
	}
	if r.Traffic != nil {
		files = append(files, r.Traffic.DriveFile)
	}
	drives := make([]*drivefile.Drive, len(files))
	for i, f := range files {
		d, err := readDrive(f)
		if err != nil {
			return err
		}
		drives[i] = d
	}
	srv, err := r.start(listen)
	if err != nil {
		return err
	}
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	r.say("\nLook at http://%s/ where everything moves now; control-C ends it.\n", srv.address)
	err = srv.untilSignalled(slog.New(slog.DiscardHandler), time.Second, func() {
		for _, d := range drives {
			go func() {
				for n := 1; ctx.Err() == nil; n++ {
					if err := feedAsNow(ctx, srv.address, d, fmt.Sprintf("round-%d", n)); err != nil {
						return // it stops, or somebody has ended the drive
					}
				}
			}()
		}
	})
	if err == nil {
		r.say("\nThe server has stopped; maps, drives and pictures are in %s.\n", r.Dir)
	}
	return err
}

// feedAsNow feeds a drive at its own pace, its times moved to now.
func feedAsNow(ctx context.Context, address string, d *drivefile.Drive, name string) error {
	conn, err := client.Dial(address)
	if err != nil {
		return err
	}
	defer conn.Close()
	f, err := client.Open(ctx, conn, client.Drive{Header: wire.FromHeader(d.Header), Name: name})
	if err != nil {
		return err
	}
	defer f.Abort()
	began := time.Now()
	events := replay.Ordered(d.Events)
	later := began.Sub(time.Unix(0, int64(events[0].Time)))
	var flushed sensor.Time
	for _, ev := range events {
		if ev.Time > flushed { // at most ten times a second
			if err := f.Flush(); err != nil {
				return err
			}
			flushed = ev.Time + 1e8
			select {
			case <-ctx.Done():
				return ctx.Err()
			case <-time.After(due(events[0].Time, ev.Time, 1) - time.Since(began)):
			}
		}
		m := wire.FromEvent(ev)
		moveTimes(m.ProtoReflect(), later)
		if err := f.Send(m); err != nil {
			return err
		}
	}
	_, err = f.Close()
	return err
}

// moveTimes moves every time in a message.
func moveTimes(m protoreflect.Message, by time.Duration) {
	m.Range(func(f protoreflect.FieldDescriptor, v protoreflect.Value) bool {
		if f.Message() == nil || f.IsMap() || f.IsList() {
			return true
		}
		if t, ok := v.Message().Interface().(*timestamppb.Timestamp); ok {
			m.Set(f, protoreflect.ValueOfMessage(timestamppb.New(t.AsTime().Add(by)).ProtoReflect()))
			return true
		}
		moveTimes(v.Message(), by)
		return true
	})
}
