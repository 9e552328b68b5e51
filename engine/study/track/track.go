// Package track writes where a drive went: as a table, as GeoJSON, and as a
// picture over the map.
package track

import (
	"bufio"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"strconv"
	"time"

	"github.com/paulmach/orb"

	"leadline/engine/geo"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// Track is a drive's posteriors, by time, with the truth where it is known.
type Track struct {
	Drive      string
	Posteriors []*summary.Posterior
	Truth      []score.Truth
}

// place is the scored position: the mean while located, otherwise the middle
// of the most probable cell.
func place(p *summary.Posterior) geo.LonLat {
	if p.Status == summary.Located {
		return p.Mean
	}
	return p.MostProbable.Position
}

// columns of track.csv, in order. Positions are WGS 84 degrees, east and north
// positive; lengths are metres; what is not known is empty.
var columns = []string{
	"time",               // RFC 3339, UTC
	"status",             //
	"lon_deg", "lat_deg", // the scored position
	"mean_lon_deg", "mean_lat_deg", // of the posterior
	"cov_ee_m2", "cov_en_m2", "cov_nn_m2", // true east and north
	"radius50_m", "radius95_m", "radius99_m", // around the mean
	"protection_m",            // empty: unbounded
	"modes", "best_mode_mass", //
	"road", "edge", "probability", // of the most probable directed edge
	"heading_deg", "heading_sigma_deg", // clockwise from true north
	"speed_mps",    //
	"gap_s",        // without motion measurements before
	"log_evidence", // since the start, nats
	"truth_lon_deg", "truth_lat_deg",
	"error_m", // from the truth to the scored position
}

// WriteCSV writes a table with a header line, a line for each posterior.
func (t *Track) WriteCSV(w io.Writer) error {
	out := csv.NewWriter(w)
	if err := out.Write(columns); err != nil {
		return err
	}
	row := make([]string, 0, len(columns))
	for _, p := range t.Posteriors {
		row = row[:0]
		text := func(s ...string) { row = append(row, s...) }
		number := func(known bool, xs ...float64) {
			for _, x := range xs {
				if known {
					text(strconv.FormatFloat(x, 'g', 10, 64))
				} else {
					text("")
				}
			}
		}
		degrees := func(known bool, at geo.LonLat) {
			for _, x := range []float64{geo.Deg(at.Lon), geo.Deg(at.Lat)} {
				if known {
					text(strconv.FormatFloat(x, 'f', 8, 64)) // about a millimetre
				} else {
					text("")
				}
			}
		}
		text(stamp(p.TimeNS), p.Status.String())
		degrees(true, place(p))
		degrees(true, p.Mean)
		number(true, p.Cov.EE, p.Cov.EN, p.Cov.NN, p.Radius50M, p.Radius95M, p.Radius99M)
		number(p.Protection.Bounded, p.Protection.RadiusM)
		text(strconv.Itoa(p.ModeCount))
		number(len(p.Modes) > 0, bestMass(p))
		if len(p.Edges) > 0 {
			text(p.Edges[0].Name, strconv.Itoa(int(p.Edges[0].Chart)))
			number(true, p.Edges[0].Probability)
		} else {
			text("", "", "")
		}
		number(p.Heading.Known, geo.Deg(p.Heading.TrueRad), geo.Deg(p.Heading.SigmaRad))
		number(p.Speed.Known, p.Speed.MPS)
		number(true, p.GapS, p.LogEvidence)
		truth, ok := score.Interpolate(t.Truth, p.TimeNS)
		degrees(ok, truth.At)
		errM := 0.0
		if ok {
			var err error
			if errM, _, err = geo.WGS84.Distance(place(p), truth.At); err != nil {
				return fmt.Errorf("the truth at %s: %w", stamp(p.TimeNS), err)
			}
		}
		number(ok, errM)
		if err := out.Write(row); err != nil {
			return err
		}
	}
	out.Flush()
	return out.Error()
}

func bestMass(p *summary.Posterior) float64 {
	if len(p.Modes) == 0 {
		return 0
	}
	return p.Modes[0].Mass
}

func stamp(ns int64) string { return time.Unix(0, ns).UTC().Format(time.RFC3339Nano) }

func lonLat(p geo.LonLat) orb.Point {
	round := func(rad float64) float64 { // 8 decimals: about a millimetre
		x, err := strconv.ParseFloat(strconv.FormatFloat(geo.Deg(rad), 'f', 8, 64), 64)
		if err != nil {
			panic("track: " + err.Error()) // of what FormatFloat made
		}
		return x
	}
	return orb.Point{round(p.Lon), round(p.Lat)}
}

type geometry struct {
	Type        string       `json:"type"`
	Coordinates orb.Geometry `json:"coordinates"`
}

type feature struct {
	Type       string         `json:"type"`
	Properties map[string]any `json:"properties"`
	Geometry   geometry       `json:"geometry"`
}

// WriteGeoJSON writes a FeatureCollection (RFC 7946): the truth as a line, the
// scored positions as a line for each stretch of one status, and a point for
// each posterior with time, status and 95 % radius.
func (t *Track) WriteGeoJSON(w io.Writer) error {
	b := bufio.NewWriter(w)
	// Errors of the buffer come back from Flush.
	_, _ = b.WriteString(`{"type":"FeatureCollection","features":[`)
	enc, first := json.NewEncoder(b), true
	put := func(g orb.Geometry, properties map[string]any) error {
		if !first {
			_ = b.WriteByte(',')
		}
		first = false
		return enc.Encode(feature{"Feature", properties, geometry{g.GeoJSONType(), g}})
	}
	if len(t.Truth) > 1 {
		line := make(orb.LineString, len(t.Truth))
		for i, at := range t.Truth {
			line[i] = lonLat(at.At)
		}
		if err := put(line, map[string]any{"drive": t.Drive, "what": "truth"}); err != nil {
			return err
		}
	}
	for i := 0; i < len(t.Posteriors); {
		j := i
		var line orb.LineString
		for ; j < len(t.Posteriors) && t.Posteriors[j].Status == t.Posteriors[i].Status; j++ {
			line = append(line, lonLat(place(t.Posteriors[j])))
		}
		if len(line) > 1 {
			if err := put(line, map[string]any{"drive": t.Drive, "what": "estimate", "status": t.Posteriors[i].Status.String()}); err != nil {
				return err
			}
		}
		i = j
	}
	for _, p := range t.Posteriors {
		props := map[string]any{"time": stamp(p.TimeNS), "status": p.Status.String(), "radius95_m": p.Radius95M}
		if err := put(lonLat(place(p)), props); err != nil {
			return err
		}
	}
	_, _ = b.WriteString("]}\n")
	return b.Flush()
}
