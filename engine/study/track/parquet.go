package track

import (
	"fmt"
	"io"

	"github.com/parquet-go/parquet-go"

	"leadline/engine/geo"
)

// record is a row of track.parquet: the columns of track.csv by the same names and
// in the same units. What is not known is null.
type record struct {
	Time         int64    `parquet:"time,timestamp(nanosecond)"`
	Status       string   `parquet:"status,dict"`
	Lon          float64  `parquet:"lon_deg"`
	Lat          float64  `parquet:"lat_deg"`
	MeanLon      float64  `parquet:"mean_lon_deg"`
	MeanLat      float64  `parquet:"mean_lat_deg"`
	CovEE        float64  `parquet:"cov_ee_m2"`
	CovEN        float64  `parquet:"cov_en_m2"`
	CovNN        float64  `parquet:"cov_nn_m2"`
	Radius50     float64  `parquet:"radius50_m"`
	Radius95     float64  `parquet:"radius95_m"`
	Radius99     float64  `parquet:"radius99_m"`
	Protection   *float64 `parquet:"protection_m,optional"`
	Modes        int32    `parquet:"modes"`
	BestMode     *float64 `parquet:"best_mode_mass,optional"`
	Road         *string  `parquet:"road,optional,dict"`
	Edge         *int32   `parquet:"edge,optional"`
	Probability  *float64 `parquet:"probability,optional"`
	Heading      *float64 `parquet:"heading_deg,optional"`
	HeadingSigma *float64 `parquet:"heading_sigma_deg,optional"`
	Speed        *float64 `parquet:"speed_mps,optional"`
	Gap          float64  `parquet:"gap_s"`
	LogEvidence  float64  `parquet:"log_evidence"`
	TruthLon     *float64 `parquet:"truth_lon_deg,optional"`
	TruthLat     *float64 `parquet:"truth_lat_deg,optional"`
	Error        *float64 `parquet:"error_m,optional"`
	Alarms       *string  `parquet:"alarms,optional,dict"`
}

// rowGroup is how many rows are held before they are written: some 15 MB.
const rowGroup = 1 << 16

// Parquet writes track.parquet, a row for each posterior.
type Parquet struct {
	out *parquet.GenericWriter[record]
	row [1]record
}

var _ Writer = (*Parquet)(nil)

// NewParquet begins a table of a drive.
func NewParquet(w io.Writer, drive, version string) *Parquet {
	return &Parquet{out: parquet.NewGenericWriter[record](w,
		parquet.Compression(&parquet.Snappy), parquet.MaxRowsPerRowGroup(rowGroup),
		parquet.CreatedBy("leadline", version, ""), parquet.KeyValueMetadata("drive", drive))}
}

// Add takes a row.
func (t *Parquet) Add(p Step) error {
	known := func(is bool, x float64) *float64 {
		if !is {
			return nil
		}
		return &x
	}
	at := Scored(p.Posterior)
	r := record{
		Time: p.TimeNS, Status: p.Status.String(), Lon: geo.Deg(at.Lon), Lat: geo.Deg(at.Lat),
		MeanLon: geo.Deg(p.Mean.Lon), MeanLat: geo.Deg(p.Mean.Lat), CovEE: p.Cov.EE, CovEN: p.Cov.EN, CovNN: p.Cov.NN,
		Radius50: p.Radius50M, Radius95: p.Radius95M, Radius99: p.Radius99M,
		Protection: known(p.Protection.Bounded, p.Protection.RadiusM),
		Modes:      int32(p.ModeCount), BestMode: known(len(p.Modes) > 0, bestMass(p.Posterior)),
		Heading: known(p.Heading.Known, geo.Deg(p.Heading.TrueRad)), HeadingSigma: known(p.Heading.Known, geo.Deg(p.Heading.SigmaRad)),
		Speed: known(p.Speed.Known, p.Speed.MPS), Gap: p.GapS, LogEvidence: p.LogEvidence,
		TruthLon: known(p.Known, geo.Deg(p.Truth.At.Lon)), TruthLat: known(p.Known, geo.Deg(p.Truth.At.Lat)), Error: known(p.Known, p.ErrorM),
	}
	if len(p.Edges) > 0 {
		e := &p.Edges[0]
		r.Road, r.Edge, r.Probability = &e.Name, &e.Chart, &e.Probability
	}
	if words := alarmsOf(p.Posterior); words != "" {
		r.Alarms = &words
	}
	t.row[0] = r
	_, err := t.out.Write(t.row[:])
	return err
}

// Close writes what is left.
func (t *Parquet) Close() error {
	if err := t.out.Close(); err != nil {
		return fmt.Errorf("track.parquet: %w", err)
	}
	return nil
}
