package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"os"
	"os/signal"
	"strings"
	"syscall"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/sensor"
	"leadline/engine/server"
)

// defaultAddress is where serve listens and feed and where ask.
const defaultAddress = "127.0.0.1:7700"

type serveOptions struct {
	maps, suites        []string
	origins             []string
	uploads             string
	listen              string
	plainBeyondLoopback bool
	maxCells, vehicles  int
	drainTimeout        time.Duration
}

func serveCommand() *cobra.Command {
	var o serveOptions
	c := &cobra.Command{
		Use:   "serve --map NAME=FILE...",
		Short: "Take vehicles' measurements and say where they are, over gRPC",
		Long: `Serve answers vehicles over gRPC until it is interrupted (SIGINT or SIGTERM):
then it takes nothing new, answers what was sent, and stops. A second signal
stops it at once.

Nothing is durable yet: a server that stops forgets its vehicles.`,
		Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error { return serve(c, &o) },
	}
	f := c.Flags()
	f.StringArrayVar(&o.maps, "map", nil, "compiled map as NAME=FILE, or FILE alone for its own name; repeat for several")
	f.StringArrayVar(&o.suites, "suite", nil, "suite as NAME=FILE, or FILE alone; repeat for several; the starter suites are always there")
	f.StringVar(&o.uploads, "uploads", "", "folder that keeps maps which clients send; none are taken without it")
	f.StringVar(&o.listen, "listen", defaultAddress, "address to listen on; port 0 takes a free one")
	f.BoolVar(&o.plainBeyondLoopback, "plain-text-beyond-loopback", false, "listen without encryption or login on an address that other machines reach")
	f.StringArrayVar(&o.origins, "origin", nil, "origin whose pages may call from a browser, such as https://map.example; repeat for several")
	f.IntVar(&o.vehicles, "max-vehicles", 0, "greatest number of vehicles at once (0: the server's default)")
	f.IntVar(&o.maxCells, "max-cells", 0, "greatest number of cells of a belief (0: the session's default)")
	f.DurationVar(&o.drainTimeout, "drain-timeout", 10*time.Second, "how long to wait for streams when stopping")
	return c
}

func serve(c *cobra.Command, o *serveOptions) error {
	if !o.plainBeyondLoopback {
		if err := loopback(o.listen); err != nil {
			return err
		}
	}
	cfg, closeMaps, err := o.config()
	defer closeMaps()
	if err != nil {
		return err
	}
	cfg.Log = slog.New(slog.NewTextHandler(c.ErrOrStderr(), nil))
	s, err := server.New(*cfg)
	if err != nil {
		return err
	}
	l, err := net.Listen("tcp", o.listen)
	if err != nil {
		return fmt.Errorf("--listen %s: %w: give another address or port", o.listen, errors.Unwrap(err))
	}
	stop, release := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer release()
	fmt.Fprintf(c.OutOrStdout(), "listening on %s, maps: %s\n", l.Addr(), strings.Join(s.MapNames(), ", "))
	done := make(chan error, 1)
	go func() { done <- s.Serve(l) }()
	select {
	case err := <-done:
		return err
	case <-stop.Done():
	}
	release() // a second signal kills
	cfg.Log.Info("stopping", "wait", o.drainTimeout)
	ctx, cancel := context.WithTimeout(context.Background(), o.drainTimeout)
	defer cancel()
	if err := s.Shutdown(ctx); err != nil {
		cfg.Log.Warn("streams were cut off", "after", o.drainTimeout)
	}
	return <-done
}

// config opens maps and suites.
func (o *serveOptions) config() (cfg *server.Config, closeMaps func(), err error) {
	var opened []*mapFile
	closeMaps = func() {
		for _, m := range opened {
			m.Close()
		}
	}
	cfg = &server.Config{Origins: o.origins, MaxCells: o.maxCells, Suites: map[string]*sensor.Suite{}, Limits: server.Limits{Vehicles: o.vehicles}}
	for _, arg := range o.maps {
		name, path := named(arg, mapName)
		m, err := openMap(path)
		if err != nil {
			return nil, closeMaps, err
		}
		opened = append(opened, m)
		cfg.Maps = append(cfg.Maps, m.served(name))
	}
	if o.uploads != "" {
		cfg.Uploads = uploadsTo(o.uploads)
	}
	for _, name := range sensor.StarterNames() {
		if cfg.Suites[name], err = openSuite(name); err != nil {
			return nil, closeMaps, err
		}
	}
	given := map[string]bool{}
	for _, arg := range o.suites {
		name, path := named(arg, suiteName)
		if given[name] {
			return nil, closeMaps, fmt.Errorf("two suites are called %q: rename one", name)
		}
		given[name] = true
		if cfg.Suites[name], err = openSuite(path); err != nil {
			return nil, closeMaps, err
		}
	}
	return cfg, closeMaps, cfg.Validate()
}

// named splits NAME=FILE; a file alone has a name of its own.
func named(arg string, own func(string) string) (name, path string) {
	if name, path, ok := strings.Cut(arg, "="); ok && name != "" && !strings.ContainsRune(name, os.PathSeparator) {
		return name, path
	}
	return own(arg), arg
}

// loopback refuses an address that other machines can reach.
func loopback(address string) error {
	host, _, err := net.SplitHostPort(address)
	if err != nil {
		return fmt.Errorf("--listen %s is no address: give HOST:PORT, such as %s", address, defaultAddress)
	}
	if host == "localhost" {
		return nil
	}
	if ip := net.ParseIP(host); ip == nil || !ip.IsLoopback() {
		return fmt.Errorf("--listen %s can be reached from other machines, and traffic is neither encrypted nor authenticated: listen on 127.0.0.1, or say --plain-text-beyond-loopback", address)
	}
	return nil
}
