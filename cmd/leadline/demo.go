package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"net"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/client"
	"leadline/engine/drivefile"
	"leadline/engine/server"
	"leadline/fixtures/drives"
	"leadline/fixtures/outside"
	"leadline/fixtures/sim"
	leadlinev1 "leadline/proto/leadline/v1"
	"leadline/terrain"
	"leadline/terrain/heightfile"

	"leadline/network/roadfile"
)

type demoOptions struct {
	dir, roads string
	town       string // name of the road map
	seed       uint64
	turns      int
}

func demoCommand() *cobra.Command {
	var o demoOptions
	c := &cobra.Command{
		Use:   "demo",
		Short: "Build a map, drive over it, find the car by its turns, serve it; fly over heights",
		Long: `Demo brings OpenStreetMap's extract of Andorra from a Go module, compiles it,
drives an invented car over an invented error of that map - odometer and gyro
only, nothing known of the start -, replays the drive, feeds it to a server on
this machine and asks where the car is. Then it flies over an invented relief.

It needs Go, for the module, or --roads.`,
		Args: cobra.NoArgs,
		RunE: func(c *cobra.Command, _ []string) error { return demo(c, &o) },
	}
	f := c.Flags()
	f.StringVar(&o.dir, "dir", "", "folder for maps, drives and pictures (default: a new one in the system's folder for temporary files)")
	f.StringVar(&o.roads, "roads", "", "GeoJSON or OpenStreetMap file to use instead of Andorra's, where Go is not installed")
	f.Uint64Var(&o.seed, "seed", 1, "seed of the invented drive and flight")
	f.IntVar(&o.turns, "turns", 12, "turns of 45° or more that the drive has")
	return c
}

// The names of the demo's things.
const (
	demoVan   = "van-7"
	demoPlane = "aircraft-2"
)

func demo(c *cobra.Command, o *demoOptions) error {
	if !(o.turns >= 1 && o.turns <= 200) {
		return fmt.Errorf("--turns is %d: give 1 to 200", o.turns)
	}
	if o.dir == "" {
		dir, err := os.MkdirTemp("", "leadline-demo-")
		if err != nil {
			return err
		}
		o.dir = dir
	} else if err := os.MkdirAll(o.dir, 0o755); err != nil {
		return fmt.Errorf("--dir: %w", err)
	}
	w := c.OutOrStdout()
	if o.roads == "" {
		path, err := outside.Locate("andorra-latest.osm.bz2")
		if err != nil {
			return fmt.Errorf("the extract of Andorra comes with a Go module: %w; install Go, or give a map of your own with --roads", err)
		}
		o.roads, o.town = path, "andorra"
	} else if err := exists(o.roads); err != nil {
		return fmt.Errorf("--roads: %w", err)
	} else {
		o.town, _, _ = strings.Cut(filepath.Base(o.roads), ".")
	}
	fmt.Fprintf(w, "1. A map. %s -> %s\n", o.roads, o.path(o.town+roadfile.Suffix))
	if err := o.buildRoads(w); err != nil {
		return err
	}
	fmt.Fprintf(w, "\n2. A drive, INVENTED: no vehicle or person is meant. The world differs from the map by a\n   smooth error of %g m rms; the car keeps aside, stops, reverses; its odometer is 1 %% off.\n", sim.MapErrorM)
	roads, err := openMap(o.path(o.town + roadfile.Suffix))
	if err != nil {
		return err
	}
	defer roads.Close()
	if err := o.drive(w, roads); err != nil {
		return err
	}
	drivePath := o.path(demoVan + drivefile.Suffix)
	fmt.Fprintf(w, "\n3. The replay: where is it, from odometer and gyro alone, starting anywhere on the map?\n")
	hash, err := o.replay(w, c.ErrOrStderr(), roads.Path, drivePath)
	if err != nil {
		return err
	}
	fmt.Fprintf(w, "\n4. The same drive through a server on this machine.\n")
	if err := o.serve(c, roads, drivePath, hash); err != nil {
		return err
	}
	fmt.Fprintf(w, "\n5. A flight over an INVENTED relief: radar altimeter and drifting odometry, start known to %g km.\n", demoStartSigmaM/1000)
	if err := o.fly(w, c.ErrOrStderr()); err != nil {
		return err
	}
	fmt.Fprintf(w, `
Look at %s and
        %s.
Try     leadline map check %s
        leadline serve --map %s=%s
        leadline feed %s --speed 10     (in another terminal)
        leadline where %s --region 95
        leadline suite truck

Caution: this is an aid and not certified. Defer to charts, controllers, local rules and
licensed navigators; a position is only as good as the map and the sensors behind it.
`,
		o.result(demoVan, "track.png"), o.result(demoPlane, "track.png"),
		roads.Path, o.town, roads.Path, drivePath, demoVan)
	return nil
}

func (o *demoOptions) path(name string) string { return filepath.Join(o.dir, name) }

func (o *demoOptions) result(drive, name string) string {
	return o.path(filepath.Join(setting, drive, name))
}

// buildRoads compiles the road map and draws it.
func (o *demoOptions) buildRoads(w io.Writer) error {
	m, notes, err := roadfile.Read(o.roads, roadfile.Options{})
	if err != nil {
		return err
	}
	path := o.path(o.town + roadfile.Suffix)
	if err := roadfile.Write(path, m); err != nil {
		return err
	}
	fmt.Fprintf(w, "   %s\n   %s\n", notes, m.Data().Licence)
	built := &mapFile{Path: path, Roads: m}
	picture := o.path(o.town + ".png")
	fmt.Fprintf(w, "   picture: %s\n", picture)
	return writeFile(picture, built.picture)
}

// drive simulates a car over the map's world and writes the drive file.
func (o *demoOptions) drive(w io.Writer, m *mapFile) error {
	world, err := sim.FromMap(m.Roads)
	if err != nil {
		return err
	}
	d, err := sim.Course(world, o.seed, o.turns)
	if err != nil {
		return err
	}
	d.Vehicle = demoVan
	fmt.Fprintf(w, "   %.1f km in %.0f min, %d turns of 45° or more, %d measurements\n",
		d.DistanceM/1000, float64(d.EndNs-d.StartNs)/60e9, len(d.Turns), len(d.Records))
	return o.writeDrive(w, demoVan, drives.Convert(d, o.town, ""))
}

func (o *demoOptions) writeDrive(w io.Writer, name string, d *drivefile.Drive) error {
	d.Header.Vehicle = name
	for i := range d.Truths {
		d.Truths[i].Vehicle = name
	}
	path := o.path(name + drivefile.Suffix)
	fmt.Fprintf(w, "   drive file: %s\n", path)
	return writeFile(path, func(f io.Writer) error { return writeRecords(f, d) })
}

// writeRecords writes a drive.
func writeRecords(f io.Writer, d *drivefile.Drive) error {
	out := drivefile.NewWriter(f)
	if err := out.Write(&drivefile.Record{Time: d.Time, Header: &d.Header}); err != nil {
		return err
	}
	for _, ev := range d.Events {
		if err := out.WriteEvent(ev); err != nil {
			return err
		}
	}
	for _, t := range d.Truths {
		if err := out.Write(&drivefile.Record{Time: t.Time, Truth: &t.Truth}); err != nil {
			return err
		}
	}
	return nil
}

// replay replays a drive, writes and prints its results and returns its hash.
func (o *demoOptions) replay(w, errs io.Writer, mapPath, drivePath string) (string, error) {
	maps := map[string]*mapFile{}
	r := replayOptions{mapPath: mapPath}
	run, err := r.replay(errs, maps, drivePath)
	for _, m := range maps {
		defer m.Close()
	}
	if err != nil {
		return "", err
	}
	if err := run.write(o.path(filepath.Join(setting, driveName(drivePath)))); err != nil {
		return "", err
	}
	return run.score.PosteriorSHA256, printScore(w, run.score, run.result)
}

// serve feeds the drive to a server and compares the posteriors' hash.
func (o *demoOptions) serve(c *cobra.Command, m *mapFile, drivePath, hash string) (err error) {
	w := c.OutOrStdout()
	s, err := server.New(server.Config{Maps: []server.Map{{Name: o.town, Space: m.Space, Names: m.Names}}})
	if err != nil {
		return err
	}
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return err
	}
	done := make(chan error, 1)
	go func() { done <- s.Serve(l) }()
	defer func() {
		ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
		defer cancel()
		err = errors.Join(err, s.Shutdown(ctx), <-done)
	}()
	address := l.Addr().String()
	d, err := readDrive(drivePath)
	if err != nil {
		return err
	}
	f := feedOptions{to: address}
	began := time.Now()
	closed, _, err := f.send(c.ErrOrStderr(), d, driveName(drivePath))
	if err != nil {
		return serverError(err, address)
	}
	fmt.Fprintf(w, "   served at %s; fed %d measurements in %.1f s\n", address, closed.GetAccepted()+closed.GetRefused(), time.Since(began).Seconds())
	conn, err := client.Dial(address)
	if err != nil {
		return err
	}
	defer conn.Close()
	ctx, cancel := context.WithTimeout(context.Background(), 10*time.Second)
	defer cancel()
	answer, err := leadlinev1.NewPositionServiceClient(conn).Where(ctx, &leadlinev1.WhereRequest{Vehicles: []string{demoVan}})
	if err != nil {
		return serverError(err, address)
	}
	printPosterior(w, answer.GetAnswers()[0].GetPosterior())
	if got := closed.GetPosteriorSha256(); got != hash {
		return failure{fmt.Errorf("the server's posteriors have the hash %s, the replay's %s: they must be equal; report this with the drive file", got, hash)}
	}
	fmt.Fprintf(w, "   Replay and server agree on every posterior, bit for bit: %s\n", hash)
	return nil
}

// demoStartSigmaM is what is known of the flight's start, an axis.
const demoStartSigmaM = 1500.0

// fly flies over an invented relief and replays the flight.
func (o *demoOptions) fly(w, errs io.Writer) error {
	relief, err := inventRelief(o.seed)
	if err != nil {
		return err
	}
	mapPath := o.path("invented" + heightfile.Suffix)
	if err := heightfile.Write(mapPath, relief); err != nil {
		return err
	}
	fo := sim.StandardFlight()
	fo.StartSigmaM, fo.MarginM, fo.DurationS = demoStartSigmaM, 3*demoStartSigmaM, 300
	d, err := sim.Flight(o.seed, relief, fo)
	if err != nil {
		return err
	}
	if err := o.writeDrive(w, demoPlane, drives.Convert(d, "invented", "")); err != nil {
		return err
	}
	_, err = o.replay(w, errs, mapPath, o.path(demoPlane+drivefile.Suffix))
	return err
}

// inventRelief makes hills of 60 waves, 1.5 to 8 km long, on 801 × 801 samples
// about 30 m apart, in the open Atlantic. No place is meant.
//
// Draws: for each wave, direction and phase uniform, length log-uniform.
func inventRelief(seed uint64) (*terrain.Raster, error) {
	const n, step = 801, 1.0 / 3600
	rng := rand.New(rand.NewPCG(seed, 0x7265_6c69_6566)) // "relief"
	type wave struct{ e, n, phase, amplitudeM float64 }
	waves := make([]wave, 60)
	for i := range waves {
		dir, phase := 2*math.Pi*rng.Float64(), 2*math.Pi*rng.Float64()
		lengthM := 1500 * math.Pow(8000.0/1500, rng.Float64())
		k := 2 * math.Pi / lengthM
		waves[i] = wave{k * math.Sin(dir), k * math.Cos(dir), phase, 40 * lengthM / 8000}
	}
	heights := make([]float32, n*n)
	const eastM, northM = 21.9, 30.9 // a second of arc at 45° north
	for r := range n {
		for c := range n {
			h := 600.0
			for _, v := range waves {
				h += v.amplitudeM * math.Sin(v.e*float64(c)*eastM-v.n*float64(r)*northM+v.phase)
			}
			heights[r*n+c] = float32(h)
		}
	}
	crs, err := terrain.FromEPSG(4326)
	if err != nil {
		return nil, err
	}
	return terrain.New(
		terrain.Grid{CRS: crs, Cols: n, Rows: n, FirstX: -30, FirstY: 45, StepX: step, StepY: -step}, heights,
		terrain.Meta{VerticalDatum: "invented", SigmaM: 1, Source: "INVENTED relief: no place is meant", Licence: "Apache-2.0"})
}
