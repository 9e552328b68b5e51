package belief

import (
	"errors"
	"fmt"
	"io"

	"github.com/parquet-go/parquet-go"

	"leadline/engine/filter"
)

// record is a cell of a road.
type record struct {
	Time        int64   `parquet:"time,timestamp(nanosecond)"`
	Edge        int32   `parquet:"edge"`
	FromM       float64 `parquet:"from_m"`
	ToM         float64 `parquet:"to_m"`
	FromLon     float64 `parquet:"from_lon_deg"`
	FromLat     float64 `parquet:"from_lat_deg"`
	ToLon       float64 `parquet:"to_lon_deg"`
	ToLat       float64 `parquet:"to_lat_deg"`
	Probability float64 `parquet:"probability"`
}

// ErrPlane is returned by WriteParquet for a belief on a plane, which is a GeoTIFF.
var ErrPlane = errors.New("a belief on a plane is written as GeoTIFF alone")

// WriteParquet writes a belief on roads as a table: a row for each cell, the heaviest
// first. What is left out is probability_left_out in the file's metadata.
func (b *Belief) WriteParquet(w io.Writer, version string) error {
	lines, ok := b.Space.(filter.LineSpace)
	if !ok {
		return ErrPlane
	}
	cells, rest := b.roadCells(lines)
	rows := make([]record, len(cells))
	for i, c := range cells {
		rows[i] = record{b.TimeNS, c.chart, c.fromM, c.toM, c.from[0], c.from[1], c.to[0], c.to[1], c.mass}
	}
	out := parquet.NewGenericWriter[record](w, parquet.Compression(&parquet.Snappy), parquet.CreatedBy("leadline", version, ""),
		parquet.KeyValueMetadata("drive", b.Drive), parquet.KeyValueMetadata("probability_left_out", fmt.Sprint(rest)))
	_, err := out.Write(rows)
	return errors.Join(err, out.Close())
}
