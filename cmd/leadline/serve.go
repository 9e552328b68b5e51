package main

import (
	"errors"
	"fmt"
	"os"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/page"
	"leadline/engine/sensor"
	"leadline/engine/server"
	"leadline/engine/server/operate"
)

// defaultAddress is where serve listens and feed and where ask.
const defaultAddress = "127.0.0.1:7700"

// Defaults that commands share.
const (
	defaultCells    = 200_000 // of a belief
	defaultVehicles = 1000
)

// gatheredBytes is how much garbage may gather before it is collected: at a rate of
// 200 000 measurements a second a second's.
const gatheredBytes = 128 << 20

type serveOptions struct {
	maps, suites []string
	origins      []string
	uploads      string
	results      string
	listen       string
	accessOptions
	operateOptions
	vehicles int
	limitOptions
	drainTimeout        time.Duration
	logFormat, logLevel choice
	printConfig         bool
	keep                keepOptions
}

func serveCommand() *cobra.Command { return new(serveOptions).command() }

func (o *serveOptions) command() *cobra.Command {
	c := &cobra.Command{
		Use:   "serve --map NAME=FILE...",
		Short: "Take vehicles' measurements and say where they are, over gRPC",
		Long: `Serve answers vehicles over gRPC until it is interrupted (SIGINT or SIGTERM):
then it takes nothing new, answers what was sent, and stops. A second signal
stops it at once.

What is not a flag may come from the environment (LEADLINE_MAP for --map) or
from a file (--config); --print-config shows what counts and where it came from.

With --data, or --broker, every measurement is durable before it is
acknowledged, and a server that starts goes on with the drives that it had.
Without either a server that stops forgets its vehicles.`,
		Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error { return serve(c, o) },
	}
	o.logFormat, o.logLevel = choice{"text", logFormats}, choice{"info", logLevels}
	f := c.Flags()
	f.StringArrayVar(&o.maps, "map", nil, "compiled map as NAME=FILE, or FILE alone for its own name; repeat for several")
	f.StringArrayVar(&o.suites, "suite", nil, "suite as NAME=FILE, or FILE alone; repeat for several; the starter suites are always there")
	f.StringVar(&o.uploads, "uploads", "", "folder that keeps maps which clients send; none are taken without it")
	f.StringVar(&o.results, "results", "", "folder of what replays wrote with --out, which analysts may read; none are told without it")
	f.StringVar(&o.listen, "listen", defaultAddress, "address to listen on; port 0 takes a free one")
	o.accessOptions.flags(c)
	o.operateOptions.flags(c)
	f.StringArrayVar(&o.origins, "origin", nil, "origin whose pages may call from a browser, such as https://map.example; repeat for several")
	f.IntVar(&o.vehicles, "max-vehicles", defaultVehicles, "greatest number of vehicles at once")
	o.limitOptions.flags(c)
	f.DurationVar(&o.drainTimeout, "drain-timeout", 10*time.Second, "how long to wait for streams when stopping")
	f.Var(&o.logFormat, "log-format", "form of the log: text or json")
	f.Var(&o.logLevel, "log-level", "least level of what is logged: debug, info, warn or error")
	o.keep.flags(c)
	f.BoolVar(&o.printConfig, "print-config", false, "print the settings that count and where each came from, and end")
	settable(c, "map", "suite", "uploads", "results", "listen", "origin", "max-vehicles", "drain-timeout", "log-format", "log-level")
	return c
}

func serve(c *cobra.Command, o *serveOptions) error {
	if o.printConfig {
		return printConfig(c.OutOrStdout(), c)
	}
	if len(o.maps) == 0 && len(o.suites) == 0 && o.uploads == "" && o.keep.shareAt == "" {
		return errors.New("no map to serve: give --map NAME=FILE, LEADLINE_MAP, or map in the file of settings; see `leadline serve --help`")
	}
	if err := errors.Join(o.checkBounds(o.vehicles), o.check()); err != nil {
		return err
	}
	log := logger(c.ErrOrStderr(), o.logFormat.word, o.logLevel.word)
	if names := unknownVariables(c.Root()); len(names) > 0 {
		log.Warn("variables that name no setting", "variables", names)
	}
	defer operate.LetGarbageGather(gatheredBytes)()
	s, err := o.start(log)
	if err != nil {
		return err
	}
	return s.untilSignalled(log, o.drainTimeout, func() {
		scheme := "http"
		if o.encryption.Certificate != "" {
			scheme = "https"
		}
		fmt.Fprintf(c.OutOrStdout(), "listening on %s, maps: %s\npage for people at %s://%s/\n", s.address, strings.Join(s.maps, ", "), scheme, s.address)
		b := thisBuild()
		log.Info("serving", "address", s.address, "maps", s.maps, "version", b.Version, "commit", b.Commit, "go", b.Go, "platform", b.Platform)
	})
}

// config opens maps and suites.
func (o *serveOptions) config() (cfg *server.Config, closeMaps func(), err error) {
	var opened []*mapFile
	closeMaps = func() {
		for _, m := range opened {
			m.Close()
		}
	}
	cfg = &server.Config{Origins: o.origins, Results: o.results, KeepFor: o.keep.keepFor, Page: page.Handler(), MaxCells: o.maxCells, Suites: map[string]*sensor.Suite{}, Limits: o.limits(o.vehicles)}
	for _, arg := range o.maps {
		name, path := named(arg, mapName)
		m, err := openMap(path)
		if err != nil {
			return cfg, closeMaps, err
		}
		opened = append(opened, m)
		cfg.Maps = append(cfg.Maps, m.served(name))
	}
	if cfg.Journal, err = o.keep.options(); err != nil {
		return cfg, closeMaps, err
	}
	cfg.Share = o.keep.share(o.encrypts())
	if o.uploads != "" {
		cfg.Uploads = uploadsTo(o.uploads)
		cfg.Uploads.MaxBytes = int64(o.mapMiB) << 20
	}
	for _, name := range sensor.StarterNames() {
		if cfg.Suites[name], err = openSuite(name); err != nil {
			return cfg, closeMaps, err
		}
	}
	given := map[string]bool{}
	for _, arg := range o.suites {
		name, path := named(arg, suiteName)
		if given[name] {
			return cfg, closeMaps, fmt.Errorf("two suites are called %q: rename one", name)
		}
		given[name] = true
		if cfg.Suites[name], err = openSuite(path); err != nil {
			return cfg, closeMaps, err
		}
	}
	if err := cfg.Validate(); err != nil {
		return cfg, closeMaps, err
	}
	return cfg, closeMaps, o.folders()
}

// named splits NAME=FILE; a file alone has a name of its own.
func named(arg string, own func(string) string) (name, path string) {
	if name, path, ok := strings.Cut(arg, "="); ok && name != "" && !strings.ContainsRune(name, os.PathSeparator) {
		return name, path
	}
	return own(arg), arg
}
