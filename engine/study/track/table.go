package track

import (
	"encoding/csv"
	"io"
	"strconv"

	"leadline/engine/geo"
	"leadline/engine/summary"
)

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
	"alarms",  // that hold, with "; " between two
}

// Table writes track.csv: a header line, and a line for each posterior.
type Table struct {
	out *csv.Writer
	row []string
}

var _ Writer = (*Table)(nil)

// NewTable begins a table.
func NewTable(w io.Writer) (*Table, error) {
	t := &Table{out: csv.NewWriter(w)}
	return t, t.out.Write(columns)
}

// Add writes a line.
func (t *Table) Add(p Step) error {
	row := t.row[:0]
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
	degrees(true, Scored(p.Posterior))
	degrees(true, p.Mean)
	number(true, p.Cov.EE, p.Cov.EN, p.Cov.NN, p.Radius50M, p.Radius95M, p.Radius99M)
	number(p.Protection.Bounded, p.Protection.RadiusM)
	text(strconv.Itoa(p.ModeCount))
	number(len(p.Modes) > 0, bestMass(p.Posterior))
	if len(p.Edges) > 0 {
		text(p.Edges[0].Name, strconv.Itoa(int(p.Edges[0].Chart)))
		number(true, p.Edges[0].Probability)
	} else {
		text("", "", "")
	}
	number(p.Heading.Known, geo.Deg(p.Heading.TrueRad), geo.Deg(p.Heading.SigmaRad))
	number(p.Speed.Known, p.Speed.MPS)
	number(true, p.GapS, p.LogEvidence)
	degrees(p.Known, p.Truth.At)
	number(p.Known, p.ErrorM)
	text(alarmsOf(p.Posterior))
	t.row = row
	return t.out.Write(row)
}

// Close writes what is left.
func (t *Table) Close() error {
	t.out.Flush()
	return t.out.Error()
}

func bestMass(p *summary.Posterior) float64 {
	if len(p.Modes) == 0 {
		return 0
	}
	return p.Modes[0].Mass
}
