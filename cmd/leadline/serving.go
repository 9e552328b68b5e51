package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"os"
	"os/signal"
	"syscall"
	"time"

	"leadline/engine/server"
)

// serving is a server that answers.
type serving struct {
	address   string
	maps      []string
	server    *server.Server
	done      chan error // what Serve ends with
	closeMaps func()
	// stopOperator ends what answers operators, after all else.
	stopOperator func()
}

// start opens maps and suites and serves them.
func (o *serveOptions) start(log *slog.Logger) (*serving, error) {
	if err := o.mayListen(o.listen); err != nil {
		return nil, err
	}
	cfg, closeMaps, err := o.config()
	cfg.Log, cfg.Version = log, versionText()
	if err == nil {
		err = errors.Join(o.accessOptions.apply(cfg, log), o.operateOptions.apply(cfg))
	}
	if err != nil {
		closeMaps()
		o.operateOptions.close(log)
		return nil, err
	}
	if cfg.Journal != nil {
		if cfg.Build, err = buildIdentity(); err != nil {
			closeMaps()
			o.operateOptions.close(log)
			return nil, err
		}
	}
	s, err := server.New(*cfg)
	if err != nil {
		closeMaps()
		o.operateOptions.close(log)
		return nil, err
	}
	l, err := net.Listen("tcp", o.listen)
	if err != nil {
		closeMaps()
		o.operateOptions.close(log)
		return nil, fmt.Errorf("--listen %s: %w: give another address or port", o.listen, errors.Unwrap(err))
	}
	out := &serving{address: l.Addr().String(), server: s, done: make(chan error, 1), closeMaps: closeMaps}
	out.maps = s.MapNames()
	if o.encrypts() {
		cfg.Metrics.Gauge("leadline_certificate_end_seconds", "When the server's certificate ends, s since 1970.", nil,
			func() float64 { return float64(o.encryption.Until().Unix()) })
	}
	out.stopOperator = o.serve(s, cfg.Metrics, log)
	go func() { out.done <- s.Serve(l) }()
	return out, nil
}

// stop takes nothing new, answers what was sent, for at most a while, and
// closes the maps. cut says that streams were cut off.
func (s *serving) stop(wait time.Duration) (cut bool, err error) {
	ctx, cancel := context.WithTimeout(context.Background(), wait)
	defer cancel()
	cut = s.server.Shutdown(ctx) != nil
	err = <-s.done
	s.closeMaps()
	s.stopOperator()
	return cut, err
}

// untilSignalled serves until SIGINT or SIGTERM, then stops; a second signal
// stops it at once. The signals are taken from before ready is called.
func (s *serving) untilSignalled(log *slog.Logger, wait time.Duration, ready func()) error {
	signals := make(chan os.Signal, 2)
	signal.Notify(signals, os.Interrupt, syscall.SIGTERM)
	defer signal.Stop(signals)
	ready()
	select {
	case err := <-s.done:
		s.closeMaps()
		s.stopOperator()
		return err
	case got := <-signals:
		log.Info("stopping", "signal", got.String(), "wait", wait)
	}
	type end struct {
		cut bool
		err error
	}
	ended := make(chan end, 1)
	go func() {
		cut, err := s.stop(wait)
		ended <- end{cut, err}
	}()
	select {
	case e := <-ended:
		if e.cut {
			log.Warn("streams were cut off", "after", wait)
		}
		log.Info("stopped")
		return e.err
	case got := <-signals:
		// The maps stay open: sessions may be reading them until the process
		// ends, which is now.
		log.Warn("stopped at once", "signal", got.String())
		return failure{errors.New("a second signal stopped the server at once: vehicles must send again what was not acknowledged")}
	}
}

// The forms and levels of the log.
var (
	logFormats = []string{"text", "json"}
	logLevels  = []string{"debug", "info", "warn", "error"}
)

// logger makes the server's log.
func logger(w io.Writer, format, level string) *slog.Logger {
	var o slog.HandlerOptions
	var l slog.Level
	must(l.UnmarshalText([]byte(level)))
	o.Level = l
	if format == "json" {
		return slog.New(slog.NewJSONHandler(w, &o))
	}
	return slog.New(slog.NewTextHandler(w, &o))
}
