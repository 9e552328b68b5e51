package track

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"encoding/xml"
	"fmt"
	"image/color"
	"image/png"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"time"

	"leadline/engine/geo"
	"leadline/engine/monitor"
	"leadline/engine/study/score"
	"leadline/engine/summary"
	"leadline/fixtures/outside"
)

var frame = geo.NewFrame(geo.FromDegrees(-30, 45)) // in the open Atlantic

// written is what a writer makes of a track.
func written(t *testing.T, tr *Track, begin func(w io.Writer) (Writer, error)) []byte {
	t.Helper()
	var b bytes.Buffer
	w, err := begin(&b)
	if err != nil {
		t.Fatal(err)
	}
	for _, p := range tr.Posteriors {
		s := Step{Posterior: p}
		if s.Truth, s.Known = score.Interpolate(tr.Truth, p.TimeNS); s.Known {
			if s.ErrorM, _, err = geo.WGS84.Distance(Scored(p), s.Truth.At); err != nil {
				t.Fatal(err)
			}
		}
		if err := w.Add(s); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

func table(w io.Writer) (Writer, error) { return NewTable(w) }

func features(tr *Track) func(io.Writer) (Writer, error) {
	return func(w io.Writer) (Writer, error) { return NewFeatures(w, tr.Drive, tr.Truth) }
}

// TestThinned: a long track keeps each second posterior, or each fourth, evenly.
func TestThinned(t *testing.T) {
	var tr Track
	const n = 3*mostKept + 7
	for i := range n {
		s := Step{Posterior: &summary.Posterior{TimeNS: int64(i), Status: summary.Located}}
		if err := tr.Add(s); err != nil {
			t.Fatal(err)
		}
	}
	if k := len(tr.Posteriors); k > mostKept || k < mostKept/2 || tr.All != n || tr.Located != n {
		t.Fatalf("%d of %d, %d located", k, tr.All, tr.Located)
	}
	for i, p := range tr.Posteriors {
		if p.TimeNS != int64(4*i) {
			t.Fatalf("posterior %d is number %d", i, p.TimeNS)
		}
	}
}

// walk is five posteriors, the first two not located, 100 m apart going east,
// the truth 3 m north of the means.
func walk() *Track {
	t := &Track{Drive: "walk"}
	for i := range 5 {
		p := geo.Point{E: 100 * float64(i)}
		q := &summary.Posterior{
			TimeNS: int64(i) * 1e9, Status: summary.Located, MeanFrame: p, Mean: frame.Inverse(p),
			Cov: summary.Cov{EE: 4, EN: 1, NN: 2}, Radius50M: 5, Radius95M: 20, Radius99M: 30,
			MostProbable: summary.Cell{Position: frame.Inverse(p.Add(geo.Point{N: 40}))},
			LogEvidence:  -float64(i),
		}
		if i < 2 {
			q.Status = summary.Ambiguous
		}
		if i == 2 || i == 3 {
			q.LostAlarm = i == 3
			q.Alarms = []monitor.Alarm{{Kind: monitor.Bias, Key: monitor.Key{Sensor: "ears", Part: "north; east"}}}
		}
		if i == 4 {
			q.Protection = summary.Protection{Bounded: true, RadiusM: 50}
			q.Heading = summary.Direction{Known: true, TrueRad: math.Pi / 2, SigmaRad: 0.1}
			q.Edges = []summary.Edge{{Chart: 7, Name: `Quay "A", east`, Probability: 0.75}}
		}
		t.Posteriors = append(t.Posteriors, q)
		t.Truth = append(t.Truth, score.Truth{TimeNS: q.TimeNS, At: frame.Inverse(p.Add(geo.Point{N: 3}))})
	}
	t.Truth = t.Truth[:4] // of the last nothing is known
	return t
}

// TestCSV reads the table back.
func TestCSV(t *testing.T) {
	rows, err := csv.NewReader(bytes.NewReader(written(t, walk(), table))).ReadAll()
	if err != nil || len(rows) != 6 {
		t.Fatalf("%v, %d rows", err, len(rows))
	}
	cell := func(row int, column string) string {
		for i, name := range rows[0] {
			if name == column {
				return rows[row+1][i]
			}
		}
		t.Fatalf("no column %s", column)
		return ""
	}
	number := func(row int, column string, want, tol float64) {
		t.Helper()
		if got, err := strconv.ParseFloat(cell(row, column), 64); err != nil || math.Abs(got-want) > tol {
			t.Errorf("row %d, %s: %q, want %v", row, column, cell(row, column), want)
		}
	}
	// Vincenty is good to 1 mm.
	number(0, "error_m", 37, 2e-3) // the most probable cell is 40 m north
	number(2, "error_m", 3, 2e-3)  // the mean
	number(2, "cov_en_m2", 1, 0)
	number(2, "log_evidence", -2, 0)
	number(4, "protection_m", 50, 0)
	number(4, "heading_deg", 90, 1e-9)
	number(4, "probability", 0.75, 0)
	number(0, "mean_lon_deg", -30, 1e-8)
	for _, empty := range []string{"truth_lon_deg", "error_m", "speed_mps"} {
		if got := cell(4, empty); got != "" {
			t.Errorf("%s is %q where it is not known", empty, got)
		}
	}
	if cell(0, "protection_m") != "" || cell(0, "road") != "" || cell(0, "status") != "ambiguous" ||
		cell(1, "time") != "1970-01-01T00:00:01Z" || cell(4, "road") != `Quay "A", east` {
		t.Errorf("%q", rows)
	}
}

// TestGeoJSON parses it: a line of truth, one for each status, and the points.
func TestGeoJSON(t *testing.T) {
	var c struct {
		Type     string
		Features []struct {
			Type       string
			Properties map[string]any
			Geometry   struct {
				Type        string
				Coordinates json.RawMessage
			}
		}
	}
	if err := json.Unmarshal(written(t, walk(), features(walk())), &c); err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, f := range c.Features {
		got = append(got, f.Geometry.Type)
	}
	if want := "LineString Point Point LineString Point Point Point LineString"; c.Type != "FeatureCollection" || strings.Join(got, " ") != want {
		t.Errorf("%s of %v", c.Type, got)
	}
	if f := c.Features[7]; f.Properties["status"] != "located" {
		t.Errorf("%v", f.Properties)
	}
	var at [2]float64
	if err := json.Unmarshal(c.Features[1].Geometry.Coordinates, &at); err != nil || math.Abs(at[0]+30) > 1e-8 || math.Abs(at[1]-45) > 0.001 {
		t.Errorf("%v, %v", at, err)
	}
	if got := written(t, &Track{}, features(&Track{})); !json.Valid(got) {
		t.Errorf("of nothing: %s", got)
	}
}

// slope is ground that rises to the east, with a void in the west.
type slope struct{}

func (slope) Frame() geo.Frame { return frame }

func (slope) Bounds() geo.Box {
	return geo.Box{Min: geo.Point{E: -1e4, N: -1e4}, Max: geo.Point{E: 1e4, N: 1e4}}
}

func (slope) Sample(dst geo.Heights, e, _ []float64) {
	for i := range e {
		dst.HeightM[i], dst.SlopeE[i], dst.SlopeN[i] = 0.1*e[i], 0.1, 0
		if e[i] < 0 {
			dst.HeightM[i], dst.SlopeE[i] = math.NaN(), 0
		}
	}
}

// TestPicture counts the pixels of each colour.
func TestPicture(t *testing.T) {
	draw := func(tr *Track, g Ground) map[color.RGBA]int {
		t.Helper()
		var b bytes.Buffer
		if err := tr.Picture(&b, g); err != nil {
			t.Fatal(err)
		}
		img, err := png.Decode(&b)
		if err != nil {
			t.Fatal(err)
		}
		n := map[color.RGBA]int{}
		r := img.Bounds()
		if r.Dx() < 400 || r.Dy() < 400 || r.Dx() > 2000 || r.Dy() > 2000 {
			t.Errorf("the picture has %v", r)
		}
		for y := r.Min.Y; y < r.Max.Y; y++ {
			for x := r.Min.X; x < r.Max.X; x++ {
				n[color.RGBAModel.Convert(img.At(x, y)).(color.RGBA)]++
			}
		}
		return n
	}
	roads := Ground{Frame: frame, Roads: [][]geo.Point{{{E: -50}, {E: 500}}, {{E: 5e4}, {E: 6e4}}}}
	n := draw(walk(), roads)
	for name, c := range map[string]color.RGBA{"roads": roadColour, "truth": truthColour, "mean": meanColour, "searching": searchColour} {
		if n[c] < 20 {
			t.Errorf("%d pixels of %s", n[c], name)
		}
	}
	// Grey also comes from the edges of letters.
	if without := draw(walk(), Ground{Frame: frame}); without[roadColour] > n[roadColour]/2 {
		t.Errorf("%d pixels of roads without roads, %d with them", without[roadColour], n[roadColour])
	}
	greys := 0
	for c := range draw(walk(), Ground{Frame: frame, Relief: slope{}}) {
		if c.R == c.G && c.G == c.B && c.R > 150 && c.R < 250 {
			greys++
		}
	}
	if greys < 20 {
		t.Errorf("a slope in %d greys", greys)
	}
	places := roads
	places.Places = []Place{{"mast", frame.Inverse(geo.Point{E: 20, N: 30})}, {"far", frame.Inverse(geo.Point{E: 9e4})}}
	if with, without := draw(walk(), places)[placeColour], n[placeColour]; with < 20 || without > 0 {
		t.Errorf("%d pixels of places, %d without any", with, without)
	}
	long := walk()
	long.Drive = strings.Repeat("a long name ", 12)
	var b bytes.Buffer
	if err := long.Picture(&b, roads); err != nil {
		t.Fatal(err)
	}
	img, err := png.Decode(&b)
	if err != nil {
		t.Fatal(err)
	}
	for y := range img.Bounds().Dy() {
		if c := color.GrayModel.Convert(img.At(2, y)).(color.Gray); c.Y != 255 {
			t.Fatal("a long title is cut off")
		}
	}
	never := walk()
	never.Posteriors, never.Truth = never.Posteriors[:2], nil
	if n := draw(never, roads); n[searchColour] < 10 || n[meanColour]+n[truthColour] > 0 {
		t.Errorf("a drive never located and without truth: %d pixels of searching, %d of the mean, %d of the truth", n[searchColour], n[meanColour], n[truthColour])
	}
	if err := (&Track{}).Picture(&bytes.Buffer{}, roads); err == nil {
		t.Error("a picture of nothing")
	}
}

// TestGPXByGDAL lets GDAL read a track's GPX: positions, times and comments are
// those of the table. No copy of the GPX schema is within reach of the tests; the
// order of elements is the schema's as it is known from memory.
func TestGPXByGDAL(t *testing.T) {
	tool := outside.Tool(t, "ogrinfo", "gdal-bin")
	tr := walk()
	tr.Drive = `a <name> & "more" ` + "\x01"
	path := filepath.Join(t.TempDir(), "track.gpx")
	text := written(t, tr, func(w io.Writer) (Writer, error) { return NewGPX(w, tr.Drive, "v<1>", tr.Truth) })
	if err := os.WriteFile(path, text, 0o600); err != nil {
		t.Fatal(err)
	}
	out, err := exec.Command(tool, "-al", path, "track_points").CombinedOutput()
	if err != nil || bytes.Contains(out, []byte("ERROR")) {
		t.Fatalf("%v: %s", err, out)
	}
	says := string(out)
	if n := strings.Count(says, "OGRFeature(track_points)"); n != len(tr.Truth)+len(tr.Posteriors) {
		t.Errorf("%d points: %s", n, says)
	}
	for _, want := range []string{
		"time (DateTime) = 1970/01/01 00:00:04+00", "cmt (String) = located, 95 % radius 20 m", "cmt (String) = ambiguous, 95 % radius 20 m",
		"track_seg_id (Integer) = 1", "track_fid (Integer) = 1", "POINT (-30 45.00002",
	} {
		if !strings.Contains(says, want) {
			t.Errorf("GDAL does not say %q of\n%s", want, text)
		}
	}
	if out, err := exec.Command(tool, "-al", path, "tracks").CombinedOutput(); err != nil || !strings.Contains(string(out), "name (String) = a <name> & \"more\" \ufffd truth") {
		t.Errorf("%v: %s", err, out)
	}
	if err := xml.Unmarshal(written(t, &Track{}, func(w io.Writer) (Writer, error) { return NewGPX(w, "", "", nil) }), new(struct{})); err != nil {
		t.Errorf("of nothing: %v", err)
	}
}

// TestParquetJavaScript lets another implementation read a track's Parquet: each
// column of the table by its name, with the same values, and null where that is
// empty.
func TestParquetJavaScript(t *testing.T) {
	node := outside.Tool(t, "node", "nodejs")
	dir, err := outside.Dir()
	if err != nil {
		t.Fatal(err)
	}
	module := filepath.Join(dir, "node_modules", "hyparquet", "src", "index.js")
	if _, err := os.Stat(module); err != nil {
		t.Skipf("outside library hyparquet is not here: make fetch-arrow")
	}
	tr := walk()
	path := filepath.Join(t.TempDir(), "track.parquet")
	text := written(t, tr, func(w io.Writer) (Writer, error) { return NewParquet(w, tr.Drive, "v"), nil })
	if err := os.WriteFile(path, text, 0o600); err != nil {
		t.Fatal(err)
	}
	script := fmt.Sprintf(`
import { parquetReadObjects, parquetMetadata } from %q;
import { readFileSync } from 'fs';
const b = readFileSync(%q);
const file = b.buffer.slice(b.byteOffset, b.byteOffset + b.byteLength);
const rows = await parquetReadObjects({ file });
const drive = parquetMetadata(file).key_value_metadata.find(x => x.key === 'drive').value;
console.log(JSON.stringify({ drive, rows }, (k, v) => typeof v === 'bigint' ? Number(v) : v));`, "file://"+module, path)
	out, err := exec.Command(node, "--input-type=module", "-e", script).CombinedOutput()
	if err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	var got struct {
		Drive string
		Rows  []map[string]any
	}
	if err := json.Unmarshal(out, &got); err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	lines, err := csv.NewReader(bytes.NewReader(written(t, tr, table))).ReadAll()
	if err != nil || len(got.Rows) != len(lines)-1 || got.Drive != tr.Drive {
		t.Fatalf("%d rows of %q, %v", len(got.Rows), got.Drive, err)
	}
	for i, line := range lines[1:] {
		if len(got.Rows[i]) != len(columns) {
			t.Errorf("row %d has %d columns", i, len(got.Rows[i]))
		}
		for k, name := range columns {
			switch v := got.Rows[i][name].(type) {
			case nil:
				if line[k] != "" {
					t.Errorf("row %d, %s: null, want %s", i, name, line[k])
				}
			case float64:
				if want, err := strconv.ParseFloat(line[k], 64); err != nil || math.Abs(v-want) > 1e-9*math.Max(1, math.Abs(want))+5e-9 {
					t.Errorf("row %d, %s: %v, want %s", i, name, v, line[k])
				}
			case string:
				if at, err := time.Parse(time.RFC3339Nano, v); name == "time" && (err != nil || stamp(at.UnixNano()) != line[k]) || name != "time" && v != line[k] {
					t.Errorf("row %d, %s: %q, want %s", i, name, v, line[k])
				}
			default:
				t.Errorf("row %d, %s: %T", i, name, v)
			}
		}
	}
}
