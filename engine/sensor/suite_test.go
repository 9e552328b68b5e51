package sensor

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Each starter suite parses, is valid, and says of every figure where it comes
// from, beside it or in the comment right above.
func TestStarterSuites(t *testing.T) {
	names := StarterNames()
	if got := strings.Join(names, " "); got != "low-aircraft roadside-posts survey-craft truck" {
		t.Fatalf("starters: %s", got)
	}
	for _, name := range names {
		text, ok := StarterText(name)
		if !ok {
			t.Fatalf("%s: no text", name)
		}
		s, err := ParseSuite(name+".yaml", text)
		if err != nil {
			t.Errorf("%v", err)
			continue
		}
		if err := s.Validate(); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		for _, dim := range []int{1, 2} {
			if err := s.For(dim).Validate(); err != nil {
				t.Errorf("%s with defaults for dim %d: %v", name, dim, err)
			}
		}
		if bare := unsourced(string(text)); len(bare) > 0 {
			t.Errorf("%s says of these figures neither a source nor that they are practice: %q", name, bare)
		}
	}
	if _, ok := StarterText("../suite"); ok {
		t.Error("a name outside the starters gives a text")
	}
}

var (
	figure = regexp.MustCompile(`^[^#]*[:{][^#a-zA-Z]*[0-9]`)
	origin = regexp.MustCompile(`practice|Practice|invented|formula|memory|ISO [0-9]|ICAO Annex|IHO S-44|Applied Acoustics`)
)

// unsourced are the lines of a suite with a figure of no stated origin.
func unsourced(text string) (bare []string) {
	above := ""
	lines := strings.Split(text, "\n")
	for i, line := range lines {
		value, comment, _ := strings.Cut(line, "#")
		if strings.TrimSpace(value) == "" {
			above += comment
			continue
		}
		if next := strings.TrimLeft(lines[min(i+1, len(lines)-1)], " "); strings.HasPrefix(next, "#") && len(lines[i+1])-len(next) > strings.Index(value, strings.TrimSpace(value)) {
			comment += next // goes on there, farther in
		}
		if figure.MatchString(line) && !origin.MatchString(above+comment) {
			bare = append(bare, strings.TrimSpace(line))
		}
		above = ""
	}
	return bare
}

// TestUnsourced: a figure without an origin is found, wherever others have one.
func TestUnsourced(t *testing.T) {
	text := "vehicle:\n  hold_s: 2 # practice\n  alert_limit_m: 25\n  # Practice.\n  max_speed_mps: 40\n  max_turn_dps: 1.0e-3 # fast\n  mounting: {down_m: -3}\n  vertical_datum: \"\" # name it\n"
	if got := fmt.Sprintf("%q", unsourced(text)); got != `["alert_limit_m: 25" "max_turn_dps: 1.0e-3 # fast" "mounting: {down_m: -3}"]` {
		t.Error(got)
	}
}

// TestSensorFigures: what the starters and the defaults say of sensors lies where
// it was measured, or where practice has it.
func TestSensorFigures(t *testing.T) {
	starter := func(name string) *Suite {
		text, _ := StarterText(name)
		s, err := ParseSuite(name, text)
		if err != nil {
			t.Fatal(err)
		}
		return s
	}
	truck, posts := starter("truck"), starter("roadside-posts")
	sigma := func(s *Suite, sensor, kind, nuisance string) float64 {
		for _, n := range s.Sensor(sensor, kind).Nuisances {
			if n.Name == nuisance {
				return n.Sigma
			}
		}
		return math.NaN()
	}
	scale := Default(1).Quantities(1)
	for _, c := range []struct {
		source           string
		got, least, most float64
	}{
		{"practice (memory): wheel odometry is good to 0.5 to 2 % of distance", sigma(truck, "odo", KindTravel, NuisanceOdometerScale), 0.005, 0.02},
		{"the same, where no suite says", math.Sqrt(scale[filter.Index(scale, filter.OdometerScale)].PriorVar), 0.005, 0.02},
		// To the one digit that is given.
		{"practice (memory): MEMS gyros 3 to 100 °/h in run", sigma(truck, "gyro", KindTurn, NuisanceGyroBias) * 3600, 2.5, 150},
		{"Moran, Greenfield & Wilson, Applied Acoustics 68, 2007: small arrays hear vehicles to 2 to 5° at 25 to 60 Hz", posts.Posts[0].SigmaDeg, 2, 5},
	} {
		if !(c.got >= c.least && c.got <= c.most) {
			t.Errorf("%s: %v", c.source, c.got)
		}
	}
}

func TestDefaultsAreValid(t *testing.T) {
	for _, dim := range []int{1, 2} {
		s := Default(dim)
		if err := s.Validate(); err != nil {
			t.Errorf("dim %d: %v", dim, err)
		}
		if want := []float64{1: 1e-4, 2: 1e-7}[dim]; s.Vehicle.IntegrityRisk != want {
			t.Errorf("dim %d: integrity risk %v", dim, s.Vehicle.IntegrityRisk)
		}
	}
	// The design: 25 m on roads unless said. ICAO Annex 10 Vol. I: 556 m for
	// a non-precision approach.
	if a, b := Default(1).Vehicle.AlertLimitM, Default(2).Vehicle.AlertLimitM; a != 25 || b != 556 {
		t.Errorf("alert limits %v, %v", a, b)
	}
	s := &Suite{Vehicle: Vehicle{AlertLimitM: 7}}
	if got := s.For(1).Vehicle.AlertLimitM; got != 7 {
		t.Errorf("a given alert limit became %v", got)
	}
	if s.Vehicle.LateWindowS != 0 {
		t.Error("For changed its receiver")
	}
}

// Every refusal of a suite file names the line and what is wrong.
func TestParseSuiteErrors(t *testing.T) {
	for _, c := range []struct {
		name, text string
		want       []string
	}{
		{"unknown key", "vehicle:\n  alert_limit_m: 25\n  colour: red\n", []string{"x.yaml:3:", "colour"}},
		{"unknown key deep", "sensors:\n- name: a\n  kind: turn\n  noise: {sigma_furlong: 1}\n", []string{"x.yaml:4:", "sigma_furlong"}},
		{"doubled key", "vehicle:\n  hold_s: 1\n  hold_s: 2\n", []string{"x.yaml:3:", "hold_s"}},
		{"wrong type", "vehicle:\n  hold_s: soon\n", []string{"x.yaml:2:", "string"}},
		{"list for a map", "vehicle:\n- 1\n", []string{"x.yaml:"}},
		{"syntax", "vehicle: {hold_s: 1\nsensors: [", []string{"x.yaml:"}},
		{"kind", "sensors:\n- name: a\n  kind: odometer\n", []string{"x.yaml:3:", "no kind", "travel"}},
		{"no name", "sensors:\n- kind: turn\n", []string{"x.yaml:2:", "name"}},
		{"twice", "sensors:\n- name: a\n  kind: turn\n- name: a\n  kind: travel\n", []string{"x.yaml:4:", "twice"}},
		{"not finite", "vehicle:\n  hold_s: .nan\n", []string{"x.yaml:2:", "NaN"}},
		{"infinite", "sensors:\n- name: a\n  kind: turn\n  mounting: {down_m: .inf}\n", []string{"x.yaml:4:", "Inf"}},
		{"negative sigma", "sensors:\n- name: a\n  kind: travel\n  noise: {sigma_m: -1}\n", []string{"x.yaml:4:", "noise.sigma_m"}},
		{"probability", "sensors:\n- name: a\n  kind: travel\n  outlier_probability: 1.5\n", []string{"x.yaml:4:", "outlier_probability"}},
		{"sign", "sensors:\n- name: a\n  kind: travel\n  sign: 3\n", []string{"x.yaml:4:", "sign"}},
		{"nuisance of another sensor", "sensors:\n- name: a\n  kind: clearance\n  nuisances:\n  - {name: gyro_bias_dps, sigma: 1, drift_per_sqrt_s: 0.1}\n", []string{"x.yaml:5:", "name", "depends on gyro_bias_dps", "turn"}},
		{"scale without a distance", "sensors:\n- name: a\n  kind: heading\n  nuisances:\n  - {name: odometer_scale, sigma: 0.1}\n", []string{"x.yaml:5:", "name", "depends on odometer_scale", "travel or body_displacement"}},
		{"offset without drift", "sensors:\n- name: a\n  kind: clearance\n  nuisances:\n  - {name: altimeter_offset_m, sigma: 1}\n", []string{"x.yaml:5:", "drift_per_sqrt_s", "above 0"}},
		{"offset with a negative drift", "sensors:\n- name: a\n  kind: clearance\n  nuisances:\n  - {name: altimeter_offset_m, sigma: 1, drift_per_sqrt_s: -1}\n", []string{"x.yaml:5:", "drift_per_sqrt_s", "from 0"}},
		{"offset without sigma", "sensors:\n- name: a\n  kind: barometer\n  nuisances:\n  - {name: barometer_offset_m, drift_per_sqrt_s: 1}\n", []string{"x.yaml:", "sigma", "needs a sigma"}},
		{"tide of infinite sigma", "sensors:\n- name: a\n  kind: sounding\n  nuisances:\n  - {name: tide_m, sigma: .inf, drift_per_sqrt_s: 0.01}\n", []string{"x.yaml:5:", "sigma", "Inf"}},
		{"drift that is no number", "sensors:\n- name: a\n  kind: sounding\n  nuisances:\n  - {name: tide_m, sigma: 1, drift_per_sqrt_s: .nan}\n", []string{"x.yaml:5:", "drift_per_sqrt_s", "NaN"}},
		{"one nuisance at two sensors", "sensors:\n- name: a\n  kind: sounding\n  nuisances:\n  - {name: tide_m, sigma: 1, drift_per_sqrt_s: 0.01}\n- name: b\n  kind: sounding\n  nuisances:\n  - {name: tide_m, sigma: 1, drift_per_sqrt_s: 0.01}\n", []string{"x.yaml:9:", "already", "\"a\""}},
		{"unknown nuisance", "sensors:\n- name: a\n  kind: turn\n  nuisances:\n  - name: mood\n", []string{"x.yaml:5:", "no nuisance"}},
		{"nuisance without sigma", "sensors:\n- name: a\n  kind: turn\n  nuisances:\n  - name: heading_deg\n", []string{"x.yaml:", "sigma"}},
		{"nuisance twice", "sensors:\n- name: a\n  kind: travel\n  nuisances:\n  - {name: odometer_scale, sigma: 0.1}\n  - {name: odometer_scale, sigma: 0.1}\n", []string{"x.yaml:6:", "already"}},
		{"place", "beacons:\n- id: a\n  lon: 10\n", []string{"x.yaml:2:", "lon and lat"}},
		{"latitude", "posts:\n- id: a\n  lon: 10\n  lat: 95\n", []string{"x.yaml:", "not on the globe"}},
		{"array", "posts:\n- id: a\n  lon: 10\n  lat: 5\n  spacing_m: 1\n", []string{"x.yaml:", "go together"}},
		{"heights", "vehicle:\n  lowest_m: 10\n  highest_m: 10\n", []string{"x.yaml:3:", "above lowest_m"}},
		{"alias", "vehicle: &v {hold_s: 1}\nenvironment: *v\n", []string{"x.yaml:1:", "anchors"}},
		{"tag", "vehicle: !!map {hold_s: 1}\n", []string{"x.yaml:1:", "tags"}},
		{"two documents", "---\nvehicle: {hold_s: 1}\n---\nvehicle: {hold_s: 1}\n", []string{"x.yaml:3:", "one document"}},
		{"deep", strings.Repeat("[", 20), []string{"x.yaml:1:", "deeply"}},
		{"long line", "# " + strings.Repeat("x", 600), []string{"x.yaml:1:", "bytes"}},
		{"huge", strings.Repeat("# x\n", maxYAMLBytes), []string{"x.yaml:", "at most"}},
		{"binary", "vehicle:\n\x00", []string{"x.yaml:2:", "no text"}},
		{"not UTF-8", "vehicle: \xff\n", []string{"x.yaml:1:", "no text"}},
		{"two faults, both said, in order of line", "sensors:\n- name: a\n  kind: nope\nvehicle:\n  hold_s: -1\n", []string{"x.yaml:3:", "nope", "x.yaml:5:", "hold_s"}},
	} {
		_, err := ParseSuite("x.yaml", []byte(c.text))
		if err == nil {
			t.Errorf("%s: no error", c.name)
			continue
		}
		text := err.Error()
		if strings.Contains(text, "\n") {
			t.Errorf("%s: more than one line: %q", c.name, text)
		}
		rest := text
		for _, w := range c.want {
			i := strings.Index(rest, w)
			if i < 0 {
				t.Errorf("%s: %q lacks %q (in this order: %q)", c.name, text, w, c.want)
				break
			}
			rest = rest[i+len(w):]
		}
	}
}

func TestEmptySuiteIsAllDefaults(t *testing.T) {
	for _, text := range []string{"", "# nothing\n", "---\n", "vehicle:\n", "{}"} {
		s, err := ParseSuite("x.yaml", []byte(text))
		if err != nil {
			t.Errorf("%q: %v", text, err)
			continue
		}
		if len(s.Sensors) != 0 || s.Vehicle != (Vehicle{}) {
			t.Errorf("%q: %+v", text, s)
		}
	}
}

func TestQuantities(t *testing.T) {
	sensor := func(kinds ...string) *Suite {
		s := &Suite{}
		for _, k := range kinds {
			s.Sensors = append(s.Sensors, Sensor{Name: k, Kind: k, Course: k == KindSpeed})
		}
		return s
	}
	names := func(qs []filter.Quantity) string {
		var all []string
		for _, q := range qs {
			all = append(all, q.Name)
		}
		return strings.Join(all, " ")
	}
	for _, c := range []struct {
		s    *Suite
		dim  int
		want string
	}{
		{sensor(), 1, "along_m heading_rad odometer_scale"},
		{sensor(), 2, ""},
		{sensor(KindTravel), 1, "along_m odometer_scale"},
		{sensor(KindTravel, KindTurn), 1, "along_m heading_rad odometer_scale"},
		{sensor(KindAcousticBearing), 1, "along_m"},
		{sensor(KindHeading, KindSpeed), 1, "along_m heading_rad"},
		{sensor(KindDisplacement, KindClearance, KindSpeed, KindHeading), 2, ""},
		{sensor(KindBodyDisplacement), 2, "east_m north_m heading_rad odometer_scale"},
		{sensor(KindTurn), 2, "east_m north_m heading_rad"},
		{&Suite{Sensors: []Sensor{{Name: "a", Kind: KindSpeed}}}, 2, "east_m north_m heading_rad"},
		{&Suite{Sensors: []Sensor{{Name: "a", Kind: KindHeading, Nuisances: []Nuisance{{Name: NuisanceHeading, Sigma: 104}}}}}, 2, "east_m north_m heading_rad"},
	} {
		if got := names(c.s.Quantities(c.dim)); got != c.want {
			t.Errorf("dim %d: %q, want %q", c.dim, got, c.want)
		}
	}
	s := &Suite{Sensors: []Sensor{{Name: "o", Kind: KindTravel, Nuisances: []Nuisance{{Name: NuisanceOdometerScale, Mean: 0.01, Sigma: 0.03, DriftPerSqrtS: 2e-4}}}}}
	qs := s.Quantities(1)
	q := qs[filter.Index(qs, filter.OdometerScale)]
	if q.PriorMean != 0.01 || !near(q.PriorVar, 9e-4, 1e-15) || !near(q.DriftVar, 4e-8, 1e-20) || q.Angular {
		t.Errorf("scale: %+v", q)
	}
	qs = Default(1).Quantities(1)
	h := qs[filter.Index(qs, filter.Heading)]
	if !h.Angular || !near(h.PriorVar, square(geo.Rad(10)), 1e-15) || !near(h.DriftVar, square(geo.Rad(0.1)), 1e-18) {
		t.Errorf("heading: %+v", h)
	}
}

func TestCheckDatum(t *testing.T) {
	s := &Suite{Sensors: []Sensor{{Name: "a", Kind: KindClearance, VerticalDatum: "EGM 96"}, {Name: "b", Kind: KindTurn}}}
	for datum, ok := range map[string]bool{"": true, "egm96": true, "WGS 84 ellipsoid": false} {
		if err := s.CheckDatum(datum); (err == nil) != ok {
			t.Errorf("%q: %v", datum, err)
		}
	}
}

// FuzzParseSuite: whatever the bytes, the parser ends with a suite that is
// valid, or with an error of one line.
func FuzzParseSuite(f *testing.F) {
	for _, name := range StarterNames() {
		text, _ := StarterText(name)
		f.Add(text)
	}
	f.Add([]byte("sensors:\n- name: a\n  kind: turn\n  nuisances: [{name: heading_deg, sigma: 3}]\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		s, err := ParseSuite("x", text)
		if err != nil {
			if strings.Contains(err.Error(), "\n") {
				t.Fatalf("an error of several lines: %q", err)
			}
			return
		}
		if err := s.Validate(); err != nil {
			t.Fatalf("parsed, yet %v", err)
		}
		for _, dim := range []int{1, 2} {
			if err := s.For(dim).Validate(); err != nil {
				t.Fatalf("valid, but not with its defaults: %v", err)
			}
			for _, q := range s.Quantities(dim) {
				if !geo.Finite(q.PriorMean, q.PriorVar, q.DriftVar) {
					t.Fatalf("%+v", q)
				}
			}
		}
	})
}

func TestFuzzCorpusIsThere(t *testing.T) {
	files, err := filepath.Glob("testdata/fuzz/FuzzParseSuite/*")
	if err != nil || len(files) < 5 {
		t.Fatalf("%d files in the corpus, %v", len(files), err)
	}
	for _, f := range files {
		if text, err := os.ReadFile(f); err != nil || !strings.HasPrefix(string(text), "go test fuzz v1") {
			t.Errorf("%s is no corpus file (%v)", f, err)
		}
	}
}
