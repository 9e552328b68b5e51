package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/server"
	"leadline/engine/server/operate"
)

// operateOptions say what an operator sees of the server, and where.
type operateOptions struct {
	listenOperator string
	traceTo        string
	traceShare     float64

	listener net.Listener
	traces   *operate.Traces
}

func (o *operateOptions) flags(c *cobra.Command) {
	f := c.Flags()
	f.StringVar(&o.listenOperator, "operator-listen", "", "address for operators: metrics, readiness, and to this machine alone profiles; such as 127.0.0.1:7701; none without it")
	f.StringVar(&o.traceTo, "trace-to", "", "collector that gets traces by OTLP over gRPC, such as http://127.0.0.1:4317; none without it")
	f.Float64Var(&o.traceShare, "trace-share", 0.01, "share of the calls that are traced, of those that do not come with a trace")
	settable(c, "operator-listen", "trace-to", "trace-share")
}

// apply makes what the server counts in, listens for operators, and begins to
// trace. What it opens, close closes.
func (o *operateOptions) apply(cfg *server.Config) error {
	cfg.Metrics = operate.NewMetrics(cfg.Version)
	if o.listenOperator != "" {
		if err := checkAddress("--operator-listen", o.listenOperator); err != nil {
			return err
		}
		var err error
		if o.listener, err = net.Listen("tcp", o.listenOperator); err != nil {
			return fmt.Errorf("--operator-listen %s: %w: give another address or port", o.listenOperator, errors.Unwrap(err))
		}
	}
	if o.traceTo != "" {
		var err error
		if o.traces, err = operate.NewTraces(context.Background(), o.traceTo, cfg.Version, o.traceShare); err != nil {
			return fmt.Errorf("--trace-to or --trace-share: %s", strings.TrimPrefix(err.Error(), "operate: "))
		}
		cfg.Traces = o.traces.Handler()
	}
	return nil
}

// serve answers operators until the stop that it returns.
func (o *operateOptions) serve(s *server.Server, m *operate.Metrics, log *slog.Logger) (stop func()) {
	stops := func() {}
	if o.listener != nil {
		stops = operate.Serve(o.listener, m.Handler(s.Ready))
		o.listener = nil // its own now
	}
	return func() {
		stops()
		o.close(log)
	}
}

// close ends what is open.
func (o *operateOptions) close(log *slog.Logger) {
	if o.listener != nil {
		_ = o.listener.Close()
	}
	if o.traces != nil {
		ctx, cancel := context.WithTimeout(context.Background(), 2*time.Second)
		defer cancel()
		if err := o.traces.Close(ctx); err != nil {
			log.Warn("traces were not sent", "error", err)
		}
	}
}
