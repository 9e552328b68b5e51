package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"leadline/engine/server"
)

// limitOptions bound what clients can make a server do, beside the number of
// vehicles.
type limitOptions struct {
	maxCells, allCells, rate, allRate, load, batch, streams, followers, mapMiB int
}

// each lists the limits: their flags, defaults and greatest values.
func (o *limitOptions) each() []limitOption {
	return []limitOption{
		{"max-cells", &o.maxCells, defaultCells, 1 << 30, "greatest number of cells of a belief"},
		{"max-cells-in-all", &o.allCells, 10_000_000, 1 << 40, "number of cells of all beliefs together from which on no new drive is taken"},
		{"max-rate", &o.rate, 10_000, 1 << 30, "measurements a second of one vehicle, beyond which it has to wait"},
		{"max-rate-in-all", &o.allRate, 500_000, 1 << 30, "measurements a second of all vehicles, beyond which they have to wait"},
		{"max-load", &o.load, 4, 1 << 20, "drives at work for each processor from which on fewer posteriors are told; from four times that on no new drive is taken"},
		{"max-batch", &o.batch, 1024, 1 << 20, "greatest number of measurements in a batch"},
		{"max-streams", &o.streams, 2000, 1 << 20, "greatest number of vehicles' streams at once"},
		{"max-followers", &o.followers, 100, 1 << 20, "greatest number of those who follow at once"},
		{"max-map-mib", &o.mapMiB, 4096, 1 << 20, "greatest size of a map that a client sends, MiB"},
	}
}

type limitOption struct {
	flag  string
	v     *int
	or    int
	most  int
	usage string
}

// flags adds the options' flags.
func (o *limitOptions) flags(c *cobra.Command) {
	for _, l := range o.each() {
		c.Flags().IntVar(l.v, l.flag, l.or, l.usage)
		settable(c, l.flag)
	}
}

// checkBounds wants numbers of at least one.
func (o *limitOptions) checkBounds(vehicles int) error {
	if vehicles < 1 {
		return fmt.Errorf("--max-vehicles is %d: give a whole number, 1 or more", vehicles)
	}
	for _, l := range o.each() {
		switch {
		case *l.v < 1:
			return fmt.Errorf("--%s is %d: give a whole number, 1 or more", l.flag, *l.v)
		case *l.v > l.most:
			return fmt.Errorf("--%s is %d: give at most %d", l.flag, *l.v, l.most)
		}
	}
	return nil
}

// limits are those of the server.
func (o *limitOptions) limits(vehicles int) server.Limits {
	return server.Limits{
		Vehicles: vehicles, CellsInAll: o.allCells, Rate: o.rate, RateInAll: o.allRate, Load: o.load,
		BatchMeasurements: o.batch, Streams: o.streams, Followers: o.followers,
	}
}
