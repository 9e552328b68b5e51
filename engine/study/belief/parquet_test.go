package belief

import (
	"bytes"
	"encoding/json"
	"errors"
	"math"
	"testing"

	"github.com/parquet-go/parquet-go"

	"leadline/engine/filter"
	"leadline/engine/filter/filtertest"
)

// TestParquetIsGeoJSON: of a belief on roads both forms have the same cells, which
// hold all of it; on a plane there is no table.
func TestParquetIsGeoJSON(t *testing.T) {
	g := filtertest.NewGraph(1, []float64{10, 3.3}, [][]filtertest.Link{{{To: 1, Weight: 1}}, nil})
	b := &Belief{TimeNS: 1_900_000_000_000_000_007, Drive: "x", Space: g}
	b.Cloud = filter.Cloud{Mass: []float64{0.5, 0.2, 0.25, 0.05}, Chart: []int32{0, 0, 1, 0}, AlongM: []float64{2.2, 2.7, 3.3, 9.99}}
	var features, table bytes.Buffer
	if err := b.Write(&features); err != nil {
		t.Fatal(err)
	}
	if err := b.WriteParquet(&table, "v"); err != nil {
		t.Fatal(err)
	}
	var geo struct {
		Features []struct {
			Properties struct {
				Edge        int32
				FromM       float64 `json:"from_m"`
				Probability float64
			}
			Geometry struct{ Coordinates [][2]float64 }
		}
	}
	if err := json.Unmarshal(features.Bytes(), &geo); err != nil {
		t.Fatal(err)
	}
	rows, err := parquet.Read[record](bytes.NewReader(table.Bytes()), int64(table.Len()))
	if err != nil || len(rows) != 3 || len(geo.Features) != 3 {
		t.Fatalf("%d rows, %d features, %v", len(rows), len(geo.Features), err)
	}
	sum := 0.0
	for i, r := range rows {
		f := geo.Features[i]
		if r.Edge != f.Properties.Edge || r.FromM != f.Properties.FromM || r.Probability != f.Properties.Probability || r.Time != b.TimeNS ||
			[2]float64{r.FromLon, r.FromLat} != f.Geometry.Coordinates[0] || [2]float64{r.ToLon, r.ToLat} != f.Geometry.Coordinates[1] {
			t.Errorf("row %d is %+v, the feature %+v", i, r, f)
		}
		sum += r.Probability
	}
	if math.Abs(sum-1) > 1e-15 || rows[0].Probability != 0.7 || rows[0].Edge != 0 {
		t.Errorf("%+v", rows)
	}
	if err := some(1).WriteParquet(&table, "v"); !errors.Is(err, ErrPlane) {
		t.Errorf("on a plane: %v", err)
	}
}
