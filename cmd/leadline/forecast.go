package main

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"leadline/engine/sensor"
	"leadline/engine/study/forecast"
	"leadline/engine/study/track"
)

type forecastOptions struct {
	mapPath, suite, geojson, picture, whole string
	rates                                   []string
	speed, startSigma                       float64
	asJSON                                  bool
	forecast.Options
}

func forecastCommand() *cobra.Command {
	var o forecastOptions
	c := &cobra.Command{
		Use:   "forecast ROUTE... --map MAP --suite SUITE",
		Short: "Say beforehand how good positions will be along planned routes",
		Args:  cobra.ArbitraryArgs,
		RunE:  func(c *cobra.Command, args []string) error { return forecastRoutes(c, o, args) },
	}
	f := c.Flags()
	f.StringVar(&o.mapPath, "map", "", "compiled map")
	f.StringVar(&o.suite, "suite", "", "suite file or starter name: the sensors, with their noise")
	f.Float64Var(&o.speed, "speed", 0, "speed along the route, m/s; without it the times of the GPX file")
	f.Float64Var(&o.startSigma, "start-sigma", 10, "how well the start is known, m an axis")
	f.StringArrayVar(&o.rates, "rate", nil, "measurements a second of a sensor, as SENSOR=HZ; 0 leaves it out; repeat. Unless said: 5 of motion on roads and 1 elsewhere, 1 of others, none of satellite fixes")
	f.Float64Var(&o.LimitM, "limit", 0, "radius that is wanted, m; without it the suite's alert limit")
	f.Float64Var(&o.SampleM, "every", 0, "distance between the places that are reported, m; 0: a 400th of the route")
	f.IntVar(&o.Runs, "runs", 0, "simulate and filter this many drives by the suite's own noise")
	f.Uint64Var(&o.Seed, "seed", 1, "seed of the runs")
	f.Float64Var(&o.StretchM, "stretch", 0, "over how much of the way alike places are told apart, m; 0: 500 on roads, thirty posts of a height map")
	f.Float64Var(&o.SearchM, "search", 0, "how well the place is known before such a stretch, m an axis; 0: 1000, or the stretch if that is more")
	f.BoolVar(&o.NoAmbiguity, "no-ambiguity", false, "do not look for alike places, which takes most of the time without --runs")
	f.IntVar(&o.MaxCells, "max-cells", defaultCells, "greatest number of cells of a belief; decides how finely a wide start is searched")
	f.StringVar(&o.geojson, "geojson", "", "write the routes with what is predicted, ambiguity and what would help to this file")
	f.StringVar(&o.picture, "png", "", "write a picture to this file; of several routes, to one each: NAME-ROUTE.png")
	f.StringVar(&o.whole, "whole", "", "in place of routes: what a stretch anywhere on the map tells, and how alike others are, to this file: GeoJSON of a road map's edges, NAME-rms.tif and NAME-ambiguity.tif of a height map for NAME.tif")
	f.BoolVar(&o.asJSON, "json", false, "print the forecasts as JSON, one object a line")
	settable(c, "max-cells")
	return c
}

func forecastRoutes(c *cobra.Command, o forecastOptions, paths []string) error {
	if o.mapPath == "" || o.suite == "" {
		return errors.New("forecast needs --map and --suite: a compiled map, and the sensors with their noise (`leadline suite` lists starters)")
	}
	if (o.whole == "") == (len(paths) == 0) {
		return errors.New("forecast needs routes, or --whole for the whole map: give one of the two")
	}
	if o.MaxCells < 1 {
		return fmt.Errorf("--max-cells is %d: give a whole number, 1 or more", o.MaxCells)
	}
	if given := c.Flags().Changed("speed"); given && !(o.speed > 0 && o.speed <= math.MaxFloat64) {
		return fmt.Errorf("--speed is %v: give metres a second, a number above 0", o.speed)
	}
	rates, err := parseRates(o.rates)
	if err != nil {
		return err
	}
	m, err := openMap(o.mapPath)
	if err != nil {
		return err
	}
	defer m.Close()
	suite, err := openSuite(o.suite)
	if err != nil {
		return err
	}
	ctx, stop := untilSignal()
	defer stop()
	o.Stop = ctx.Err
	if o.whole != "" {
		err := o.wholeMap(c.OutOrStdout(), m, suite, rates)
		if ctx.Err() != nil && errors.Is(err, ctx.Err()) {
			return failure{errors.New("interrupted: nothing was written")}
		}
		return err
	}
	var all []*forecast.Forecast
	var failed []error
	for _, path := range paths {
		f, err := o.route(c, m, suite, rates, path)
		if err != nil && ctx.Err() != nil {
			break
		}
		if err != nil { // of this route: the others are forecast all the same
			failed = append(failed, err)
			continue
		}
		if err := o.show(c.OutOrStdout(), m, f, pictureName(o.picture, path, len(paths))); err != nil {
			return err
		}
		all = append(all, f)
	}
	if !o.asJSON && len(all) > 1 {
		if err := printRoutes(c.OutOrStdout(), all); err != nil {
			return err
		}
	}
	if o.geojson != "" && len(all) > 0 {
		if err := writeFile(o.geojson, func(w io.Writer) error { return forecast.WriteGeoJSON(w, all) }); err != nil {
			return err
		}
	}
	if ctx.Err() != nil && len(all)+len(failed) < len(paths) {
		kept := "nothing was kept"
		if len(all) > 0 {
			kept = "what was done is printed"
		}
		failed = append(failed, fmt.Errorf("interrupted after %d of %d routes: %s", len(all)+len(failed), len(paths), kept))
		return failure{errors.Join(failed...)}
	}
	if len(failed) > 0 && len(paths) > 1 {
		failed = append(failed, fmt.Errorf("%d of %d routes were forecast", len(all), len(paths)))
	}
	return errors.Join(failed...)
}

// route forecasts one.
func (o forecastOptions) route(c *cobra.Command, m *mapFile, suite *sensor.Suite, rates map[string]float64, path string) (*forecast.Forecast, error) {
	route, err := readRoute(path)
	if err != nil {
		return nil, err
	}
	laid, err := forecast.NewPath(m.Space, route, o.speed)
	if err != nil {
		return nil, err
	}
	plan, err := forecast.NewPlan(laid, suite, rates, o.startSigma)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	show, end := progress(c.ErrOrStderr(), route.Name)
	defer end()
	o.Progress = show
	f, err := forecast.Of(plan, o.Options)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	f.Route = route.Name
	return f, nil
}

// show prints a forecast, and draws it if that is asked for.
func (o *forecastOptions) show(w io.Writer, m *mapFile, f *forecast.Forecast, picture string) error {
	if o.picture != "" {
		if err := writeFile(picture, func(w io.Writer) error {
			return f.Picture(w, track.Ground{Frame: m.Space.Frame(), Roads: m.lines(), Relief: m.field()})
		}); err != nil {
			return err
		}
	}
	if o.asJSON {
		return printJSONLine(w, f)
	}
	return printForecast(w, f)
}

// pictureName tells the pictures of several routes apart.
func pictureName(name, route string, n int) string {
	if n == 1 {
		return name
	}
	ext := filepath.Ext(name)
	base := strings.TrimSuffix(filepath.Base(route), filepath.Ext(route))
	return strings.TrimSuffix(name, ext) + "-" + base + ext
}

// parseRates reads SENSOR=HZ.
func parseRates(of []string) (map[string]float64, error) {
	out := map[string]float64{}
	for _, s := range of {
		name, text, ok := strings.Cut(s, "=")
		hz, err := strconv.ParseFloat(text, 64)
		if !ok || err != nil || name == "" {
			return nil, fmt.Errorf("--rate is %q: give SENSOR=HZ, such as sounder=0.2", s)
		}
		out[name] = hz
	}
	return out, nil
}

// readRoute reads a route file.
func readRoute(path string) (*forecast.Route, error) {
	f, err := os.Open(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, fmt.Errorf("there is no route file %s: give a GeoJSON file with a LineString, or a GPX file", path)
	}
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return forecast.ReadRoute(filepath.Base(path), f)
}
