package sensor

import (
	"reflect"
	"strings"
	"testing"
)

// TestSuiteWritten proves that a suite which is written with its defaults is
// read as one that says the same, on roads and on a plane.
func TestSuiteWritten(t *testing.T) {
	texts := map[string]string{
		"empty":              "",
		"range alone":        "sensors:\n  - {name: r, kind: range}\n",
		"plane with a speed": "sensors:\n  - {name: log, kind: speed, sign: -1}\n",
		"no outliers":        "sensors:\n  - {name: gps, kind: fix, outlier_probability: 0, correlation_s: 0}\n",
		"own nuisances":      "sensors:\n  - {name: odo, kind: travel, nuisances: [{name: odometer_scale, mean: 0.1, sigma: 0.05}]}\n  - {name: gyro, kind: turn}\n",
		"heights":            "vehicle: {lowest_m: 0, highest_m: 100}\nposts:\n  - {id: p, lon: 1, lat: 2, axis_deg: 0}\n",
	}
	for _, name := range StarterNames() {
		text, _ := StarterText(name)
		texts[name] = string(text)
	}
	for name, text := range texts {
		s, err := ParseSuite(name, []byte(text))
		if err != nil {
			t.Fatal(err)
		}
		for _, dim := range []int{1, 2} {
			written, err := s.YAML(dim)
			if err != nil {
				t.Fatal(err)
			}
			again, err := ParseSuite(name, written)
			if err != nil {
				t.Errorf("%s, dim %d: %v in\n%s", name, dim, err, written)
				continue
			}
			if !reflect.DeepEqual(again, s.filled(dim)) || !reflect.DeepEqual(again.For(dim), again) {
				t.Errorf("%s, dim %d: another suite, or not all is filled in:\n%s", name, dim, written)
			}
			if !reflect.DeepEqual(again.Quantities(dim), s.Quantities(dim)) {
				t.Errorf("%s, dim %d: quantities %+v, want %+v:\n%s", name, dim, again.Quantities(dim), s.Quantities(dim), written)
			}
			for _, kind := range Kinds() {
				for _, d := range s.Sensors {
					a, b := again.Sensor(d.Name, kind), s.Sensor(d.Name, kind)
					if a.outlier() != b.outlier() || a.correlation() != b.correlation() || a.maxRange() != b.maxRange() || a.sign() != b.sign() {
						t.Errorf("%s: sensor %q is %+v, want %+v", name, d.Name, a, b)
					}
				}
			}
			if !strings.Contains(string(written), "alert_limit_m:") {
				t.Errorf("%s: the default of the alert limit is not there:\n%s", name, written)
			}
		}
	}
}
