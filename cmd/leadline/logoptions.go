package main

import (
	"errors"
	"fmt"
	"os"
	"strconv"
	"strings"

	"github.com/spf13/cobra"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/logfile"
	"leadline/engine/wire"
)

// headerOptions say whose measurements they are, where a log does not.
type headerOptions struct {
	vehicle, mapName, suite, start string
}

// flags adds the flags that only logs need; the names of map and suite have
// flags of their own in each command.
func (o *headerOptions) flags(c *cobra.Command) {
	f := c.Flags()
	f.StringVar(&o.vehicle, "vehicle", "", "name of the vehicle")
	f.StringVar(&o.start, "start", "anywhere", "where it starts: LON,LAT,SIGMA in degrees and metres, a GeoJSON file with a polygon, or anywhere")
}

// header makes the header of a drive.
func (o *headerOptions) header() (h drivefile.Header, err error) {
	h = drivefile.Header{Vehicle: o.vehicle, Map: o.mapName, Suite: o.suite}
	if o.vehicle == "" {
		return h, errors.New("--vehicle is missing: name the vehicle")
	}
	if h.Start, err = parseStart(o.start); err != nil {
		return h, err
	}
	_, err = wire.ToHeader(wire.FromHeader(h)) // its limits
	return h, err
}

func parseStart(text string) (s drivefile.Start, err error) {
	if text == "anywhere" || text == "" {
		return s, nil
	}
	parts := strings.Split(text, ",")
	if len(parts) == 3 {
		var v [3]float64
		for i, p := range parts {
			x, bad := strconv.ParseFloat(strings.TrimSpace(p), 64)
			err = errors.Join(err, bad)
			v[i] = x
		}
		if err == nil {
			s = drivefile.Start{Point: geo.FromDegrees(v[0], v[1]), SigmaM: v[2]}
			if err = s.Point.Check(); err == nil && !(s.SigmaM > 0 && s.SigmaM <= 1e6) {
				err = fmt.Errorf("the standard deviation is %v: give metres, above 0 and up to 1e6", v[2])
			}
			if err != nil {
				return s, fmt.Errorf("--start %s: %w", text, err)
			}
			return s, nil
		}
	}
	if _, missing := os.Stat(text); missing != nil {
		return s, fmt.Errorf("--start %s is neither LON,LAT,SIGMA, such as -30.0,45.0,20, nor anywhere, nor a GeoJSON file", text)
	}
	area, err := readArea("--start", text)
	if err != nil {
		return s, err
	}
	s.Area, err = wire.Polygon(area)
	return s, err
}

// sentenceOptions say what to make of NMEA sentences: a file, and flags for
// what is often needed, which go before it.
type sentenceOptions struct {
	file, satellites, variation string
	reckon                      bool
}

func (o *sentenceOptions) flags(c *cobra.Command) {
	f := c.Flags()
	f.StringVar(&o.file, "sentences", "", "NMEA: file (YAML) that says what to make of the sentences")
	f.StringVar(&o.satellites, "satellites", "", "NMEA: positions are "+logfile.SatellitesFix+" (measurements), "+logfile.SatellitesTruth+" (to compare with) or "+logfile.SatellitesNone+"; the last two leave out speeds of VTG and RMC, too (default "+logfile.SatellitesFix+")")
	f.StringVar(&o.variation, "variation", "", "NMEA: magnetic variation in degrees, east positive, where a sentence brings none")
	f.BoolVar(&o.reckon, "reckon", false, "NMEA: make displacements of speed and heading")
}

// given names a flag of these that was given, or "".
func (o *sentenceOptions) given() string {
	switch {
	case o.file != "":
		return "--sentences"
	case o.satellites != "":
		return "--satellites"
	case o.variation != "":
		return "--variation"
	case o.reckon:
		return "--reckon"
	}
	return ""
}

func (o *sentenceOptions) sentences() (*logfile.Sentences, error) {
	s := &logfile.Sentences{}
	if o.file != "" {
		text, err := readYAML("--sentences", o.file)
		if err != nil {
			return nil, err
		}
		if s, err = logfile.ParseSentences(o.file, text); err != nil {
			return nil, err
		}
	}
	if o.satellites != "" {
		s.Satellites = o.satellites
	}
	if o.variation != "" {
		v, err := strconv.ParseFloat(o.variation, 64)
		if err != nil {
			return nil, fmt.Errorf("--variation %s is no number of degrees, east positive", o.variation)
		}
		s.VariationDeg = &v
	}
	if o.reckon && s.Reckon == nil {
		s.Reckon = &logfile.Reckon{}
	}
	return s, s.Validate()
}

// readYAML reads a file that a flag names.
func readYAML(flag, path string) ([]byte, error) {
	info, err := os.Stat(path)
	switch {
	case os.IsNotExist(err):
		return nil, fmt.Errorf("%s: there is no file %s: check the path", flag, path)
	case err != nil:
		return nil, fmt.Errorf("%s: %w", flag, err)
	case !info.Mode().IsRegular() || info.Size() > maxSuiteFile:
		return nil, fmt.Errorf("%s: %s is no file of at most %d bytes: give a YAML file", flag, path, maxSuiteFile)
	}
	return os.ReadFile(path)
}
