package logfile

import (
	"encoding/xml"
	"errors"
	"fmt"
	"io"
	"math"
	"strconv"
	"strings"
	"time"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// trackSigmaM is the standard deviation, along each axis, of a recorded position
// that does not say how good it is: that of a GGA at a HDOP of 2. Practice.
const trackSigmaM = 8

// track makes records of positions.
type track struct {
	truth bool
	emit  Emit
	tally *Tally
	n     uint64
}

// spot is one recorded position.
type spot struct {
	place     place
	at        sensor.Time
	lon, lat  float64 // degrees
	heightM   float64
	hasHeight bool
	sigmaM    float64
}

// take hands a position on, as a truth or a fix, or refuses it.
func (t *track) take(s spot) error {
	t.n++
	rec := Record{}
	position := geo.FromDegrees(s.lon, s.lat)
	err := position.Check()
	if err == nil && (s.at < 0 || s.at > lastTime) {
		err = errTime
	}
	if t.truth {
		rec.Truth = &Truth{Time: s.at, Position: position, HasHeight: s.hasHeight, HeightM: s.heightM, SigmaM: s.sigmaM}
	} else {
		m := sensor.Fix{Position: position, SigmaM: s.sigmaM}
		rec.Event = &sensor.Event{Time: s.at, Sensor: m.Kind(), Number: t.n, Measurement: m}
		if err == nil {
			err = m.Check(s.at)
		}
	}
	if err != nil {
		t.tally.refuse(s.place, "unusable position", err.Error())
		return nil
	}
	t.tally.took(rec)
	return t.emit(rec)
}

// maxGPXBytes bounds a GPX text, and with it what one of its texts may hold.
const maxGPXBytes = 256 << 20

// ReadGPX reads the points of the tracks of a GPX text (1.0 and 1.1; routes and
// waypoints have been nowhere), as fixes or as truths. Each needs a time with a
// zone; ele is a height, and hdop makes a standard deviation of 4 m each along an
// axis. What comes after a place where the text is no XML is lost, and counts as
// one refusal. Names and whatever else it holds are not kept.
func ReadGPX(r io.Reader, name string, truth bool, emit Emit) (*Tally, error) {
	t := &track{truth: truth, emit: emit, tally: newTally(name)}
	limited := &io.LimitedReader{R: r, N: maxGPXBytes + 1}
	d := xml.NewDecoder(limited)
	where := func() place {
		line, column := d.InputPos()
		t.tally.Lines = line
		return place{line, column}
	}
	var path []string
	var p gpxPoint
	var text strings.Builder
	inPoint := func() bool { return len(path) == 4 && path[3] == "trkpt" || len(path) == 5 && path[3] == "trkpt" }
	for {
		token, err := d.Token()
		at := where()
		if limited.N <= 0 {
			return t.tally.Sum(), fmt.Errorf("%s: it has over %d bytes: split it", name, maxGPXBytes)
		}
		if errors.Is(err, io.EOF) && len(path) == 0 {
			return t.tally.Sum(), nil
		}
		if err != nil {
			if !broken(err) {
				return t.tally.Sum(), fmt.Errorf("%s:%d: %w", name, at.line, err)
			}
			t.tally.refuse(at, "no XML from here on", err.Error())
			return t.tally.Sum(), nil
		}
		switch e := token.(type) {
		case xml.StartElement:
			if len(path) == 0 && e.Name.Local != "gpx" {
				return t.tally.Sum(), fmt.Errorf("%s:%d: its outermost element is %.40q, not gpx: it is no GPX file", name, at.line, e.Name.Local)
			}
			path = append(path, e.Name.Local)
			text.Reset()
			switch {
			case len(path) == 4 && strings.Join(path, "/") == "gpx/trk/trkseg/trkpt":
				p = gpxPoint{place: at, attr: e.Attr}
			case inPoint() || len(path) < 4 && (e.Name.Local == "gpx" || e.Name.Local == "trk" || e.Name.Local == "trkseg"):
			default: // with all that is in it
				if len(path) <= 3 {
					t.tally.pass(printable(e.Name.Local))
				}
				if err := d.Skip(); err != nil && !broken(err) {
					return t.tally.Sum(), fmt.Errorf("%s:%d: %w", name, at.line, err)
				} else if err != nil {
					t.tally.refuse(where(), "no XML from here on", err.Error())
					return t.tally.Sum(), nil
				}
				path = path[:len(path)-1]
			}
		case xml.CharData:
			if len(path) == 5 && inPoint() {
				text.Write(e)
			}
		case xml.EndElement:
			switch {
			case len(path) == 5:
				p.child(e.Name.Local, strings.TrimSpace(text.String()))
			case len(path) == 4:
				s, reason, detail := p.spot()
				if reason != "" {
					t.tally.refuse(p.place, reason, detail)
				} else if err := t.take(s); err != nil {
					return t.tally.Sum(), err
				}
			}
			path = path[:len(path)-1]
		}
	}
}

// broken says that a text is no XML, or ends within it, and not that it could not
// be read.
func broken(err error) bool {
	var syntax *xml.SyntaxError
	return errors.As(err, &syntax) || errors.Is(err, io.EOF)
}

// gpxPoint is a trkpt under way.
type gpxPoint struct {
	place           place
	attr            []xml.Attr
	when, ele, hdop string
}

func (p *gpxPoint) child(name, text string) {
	switch name {
	case "time":
		p.when = text
	case "ele":
		p.ele = text
	case "hdop":
		p.hdop = text
	}
}

// spot makes a position of a point, or says why not.
func (p *gpxPoint) spot() (s spot, reason, detail string) {
	s = spot{place: p.place, sigmaM: trackSigmaM, lon: math.NaN(), lat: math.NaN()}
	for _, a := range p.attr {
		v, err := strconv.ParseFloat(strings.TrimSpace(a.Value), 64)
		switch {
		case a.Name.Space != "":
		case a.Name.Local == "lon" && err == nil:
			s.lon = v
		case a.Name.Local == "lat" && err == nil:
			s.lat = v
		}
	}
	if math.IsNaN(s.lon) || math.IsNaN(s.lat) {
		return s, "no lat and lon", fmt.Sprintf("%.80q", fmt.Sprint(p.attr))
	}
	if p.when == "" {
		return s, "a point without a time", fmt.Sprintf("lon %v, lat %v", s.lon, s.lat)
	}
	at, err := time.Parse(time.RFC3339Nano, p.when)
	if err != nil {
		return s, "a time that is none, or has no zone", fmt.Sprintf("%.40q", p.when)
	}
	if y := at.Year(); y < 1970 || y > 2261 {
		return s, "unusable position", errTime.Error()
	}
	s.at = sensor.Time(at.UnixNano())
	if v, err := strconv.ParseFloat(p.ele, 64); err == nil && geo.Finite(v) {
		s.heightM, s.hasHeight = v, true
	}
	if v, err := strconv.ParseFloat(p.hdop, 64); err == nil && v > 0 && v <= 1000 {
		s.sigmaM = math.Max(4*v, 0.01)
	}
	return s, "", ""
}
