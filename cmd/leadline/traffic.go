package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/spf13/cobra"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/traffic"
)

type trafficOptions struct {
	reach
	follow bool
	suite  string
	everyS float64
	least  float64
	parts  int
	asJSON bool
}

func trafficCommand() *cobra.Command {
	var o trafficOptions
	c := &cobra.Command{
		Use:   "traffic DRIVE|ROAD --suite SUITE|--at ADDR",
		Short: "Follow unnamed vehicles past listening posts, in a recorded file of bearings or at a server",
		Long: `Traffic reads a file of acoustic bearings and follows the vehicles that the posts
hear, of which nothing else is known: how many there are, where each is, how fast
and which way, and how many pass the lines of the suite. The suite describes the
road, the posts and what is to be expected.

With --at it asks a server for a road by its name; its bearings are fed there.`,
		Args: cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if o.address != "" {
				return askTraffic(c, &o, args[0])
			}
			return followTraffic(c, &o, args[0])
		},
	}
	f := c.Flags()
	o.addressFlag(c, "at", "", "ask the server at this address for a road's traffic, in place of reading a file")
	settable(c, "tls", "ca", "cert", "key", "token-file")
	f.BoolVar(&o.follow, "follow", false, "with --at: print each picture as it comes, --every seconds or more apart")
	f.StringVar(&o.suite, "suite", "", "suite file or starter that describes road and posts (default: the one that the header names)")
	f.Float64Var(&o.everyS, "every", 10, "seconds between two pictures; 0 prints the last one alone")
	f.Float64Var(&o.least, "least", 0.5, "least probability with which a vehicle that is printed exists")
	f.IntVar(&o.parts, "parts", 0, "print the intensity, too, in so many even parts of the road, at most 1000")
	f.BoolVar(&o.asJSON, "json", false, "print each picture as JSON, one object a line")
	return c
}

func (o *trafficOptions) check() error {
	switch {
	case !(o.everyS == 0 || o.everyS >= 0.01 && o.everyS <= 1e6):
		return fmt.Errorf("--every is %v: give 0, or seconds from 0.01 to 1e6", o.everyS)
	case !(o.least >= 0 && o.least <= 1):
		return fmt.Errorf("--least is %v: give a probability, 0 to 1", o.least)
	case o.parts < 0 || o.parts > 1000:
		return fmt.Errorf("--parts is %d: give 0 to 1000", o.parts)
	}
	return nil
}

func followTraffic(c *cobra.Command, o *trafficOptions, path string) error {
	if err := o.check(); err != nil {
		return err
	}
	if o.follow {
		return errors.New("--follow goes with --at: a file is read to its end")
	}
	file, b, err := openDrive(path)
	if err != nil {
		return err
	}
	defer file.Close()
	r := drivefile.NewReader(b, path)
	header, err := r.Read()
	if err == nil {
		err = roads(*header.Header, path)
	}
	if err != nil {
		return err
	}
	suite, err := driveSuite(o.suite, header.Header.Suite, path)
	if err != nil {
		return err
	}
	if suite == nil {
		return errors.New("no suite describes the road: give --suite, or name one in the file's header")
	}
	w, err := traffic.Open(suite)
	if err != nil {
		return fmt.Errorf("suite: %w", err)
	}
	p := trafficPrinter{options: o, suite: suite, watch: w, out: c.OutOrStdout()}
	refused, first := 0, error(nil)
	for {
		rec, err := r.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return err
		}
		if rec.Event == nil {
			continue
		}
		if err := w.Take(*rec.Event); err != nil {
			if refused++; first == nil {
				first = fmt.Errorf("%s:%d: %w", path, rec.Line, err)
			}
			continue
		}
		if err := p.due(); err != nil {
			return err
		}
	}
	if err := w.Flush(); err != nil {
		return err
	}
	if err := p.last(); err != nil {
		return err
	}
	if !o.asJSON {
		fmt.Fprintln(c.OutOrStdout(), "sha256 of all that is known", w.Hash())
	}
	for _, d := range w.Doubts() {
		fmt.Fprintln(c.ErrOrStderr(), "note: "+oneLine(d.Words))
	}
	if n := w.Dropped(); n > 0 && first == nil {
		first = fmt.Errorf("%s: of a post whose clock is more than a minute ahead of all others", path)
		refused += n
	}
	if first != nil {
		return fmt.Errorf("%d measurements could not be used; the first: %w", refused, first)
	}
	return nil
}

// trafficPrinter prints pictures as time goes on.
type trafficPrinter struct {
	options *trafficOptions
	suite   *sensor.Suite
	watch   *traffic.Watch
	out     io.Writer
	began   sensor.Time
	next    sensor.Time
}

// due prints a picture if it is time.
func (p *trafficPrinter) due() error {
	now := p.watch.Filter().Now()
	if now == 0 {
		return nil
	}
	if p.began == 0 {
		p.began, p.next = now, now
	}
	if p.options.everyS == 0 || now < p.next {
		return nil
	}
	every := sensor.Time(math.Round(p.options.everyS * 1e9))
	p.next += ((now-p.next)/every + 1) * every
	return p.picture()
}

// last prints the last picture and what passed.
func (p *trafficPrinter) last() error {
	if p.began == 0 {
		p.began = p.watch.Filter().Now()
	}
	if err := p.picture(); err != nil || p.options.asJSON {
		return err
	}
	f := p.watch.Filter()
	hours := float64(f.Now()-p.began) / 3600e9
	for i, l := range f.Picture(1).Lines {
		fmt.Fprintf(p.out, "line %s at %.0f m: %d forward, %d backward", oneLine(p.suite.Traffic.Lines[i].Name), l.AtM, l.Forward, l.Backward)
		if hours > 0 {
			fmt.Fprintf(p.out, "; %.0f an hour", float64(l.Forward+l.Backward)/hours)
		}
		fmt.Fprintln(p.out)
	}
	return nil
}

func (p *trafficPrinter) picture() error {
	f := p.watch.Filter()
	m := fromPicture(f, p.suite, p.options.least, p.options.parts)
	if p.options.asJSON {
		text, err := json.Marshal(m)
		if err != nil {
			return err
		}
		_, err = fmt.Fprintln(p.out, string(text))
		return err
	}
	fmt.Fprintf(p.out, "%s  %d vehicles, %.1f expected\n", m.Time, len(m.Vehicles), m.Expected)
	for _, v := range m.Vehicles {
		way := "forward"
		if v.Forward < 0.5 {
			way = "backward"
		}
		fmt.Fprintf(p.out, "  %6d  at %7.1f ± %.1f m  %5.1f ± %.1f m/s %-8s  exists %.3f  %.6f,%.6f\n",
			v.Label, v.PositionM, v.PositionSigmaM, math.Abs(v.SpeedMPS), v.SpeedSigmaMPS, way, v.Existence, v.Lon, v.Lat)
	}
	for i, x := range m.Intensity {
		fmt.Fprintf(p.out, "  part %d: %.2f a kilometre\n", i+1, x)
	}
	return nil
}
