package sensor

import (
	"reflect"
	"strings"
	"testing"
)

const edited = `# a suite
vehicle: {alert_limit_m: 25}   # metres
sensors:
  - name: odo
    kind: travel # wheels
    noise: {sigma_m_per_sqrt_m: 0.02} # per root of a metre
    nuisances:
      - {name: odometer_scale, sigma: 0.02, drift_per_sqrt_s: 1.0e-5}
  - kind: fix
    name: 'gnss'
beacons:
  - {id: mast, lon: 10.0, lat: 50.0}
`

func parsed(t *testing.T, text string) *Suite {
	t.Helper()
	s, err := ParseSuite("it", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// TestSetAndEdit: both give the same suite, in the file only the figure changes,
// and the suite that was there stays as it was.
func TestSetAndEdit(t *testing.T) {
	for _, c := range []struct{ key, value, line string }{
		{"vehicle.alert_limit_m", "30", "vehicle: {alert_limit_m: 30}   # metres"},
		{"vehicle.lost_per_s", "0", "vehicle: {lost_per_s: 0, alert_limit_m: 25}   # metres"},
		{"environment.air_temperature_c", "-3", "environment: {air_temperature_c: -3}"},
		{"sensors.odo.noise.sigma_m_per_sqrt_m", "0.0314", "    noise: {sigma_m_per_sqrt_m: 0.0314} # per root of a metre"},
		{"sensors.odo.nuisances.odometer_scale.drift_per_sqrt_s", "2e-05", "      - {name: odometer_scale, sigma: 0.02, drift_per_sqrt_s: 2e-05}"},
		{"sensors.gnss.noise.sigma_m", "4", "  - noise: {sigma_m: 4}"},
		{"sensors.1.kind", "range", `  - kind: "range"`},
		{"sensors.odo.sign", "-1", "  - sign: -1"},
		{"beacons.mast.height_m", "12", "  - {height_m: 12, id: mast, lon: 10.0, lat: 50.0}"},
	} {
		s := parsed(t, edited)
		set, err := s.Set(c.key, c.value)
		if err != nil {
			t.Errorf("%s: %v", c.key, err)
			continue
		}
		if !reflect.DeepEqual(s, parsed(t, edited)) {
			t.Errorf("%s: Set changed the suite itself", c.key)
		}
		text, err := EditSuite("it", []byte(edited), c.key, c.value)
		if err != nil {
			t.Errorf("%s: %v", c.key, err)
			continue
		}
		if got := parsed(t, string(text)); !reflect.DeepEqual(got, set) {
			t.Errorf("%s: the file reads as another suite than Set's", c.key)
		}
		if !strings.Contains("\n"+string(text), "\n"+c.line+"\n") {
			t.Errorf("%s: want the line %q in\n%s", c.key, c.line, text)
		}
		for _, comment := range []string{"# a suite", "# metres", "# wheels", "# per root of a metre"} {
			if !strings.Contains(string(text), comment) {
				t.Errorf("%s: the comment %q is gone", c.key, comment)
			}
		}
	}
}

func TestSetFigure(t *testing.T) {
	s := parsed(t, edited)
	for _, c := range []struct {
		key string
		v   float64
		ok  bool
	}{{"vehicle.alert_limit_m", 25, true}, {"vehicle.lost_per_s", 0, false}, {"vehicle.corner_sigma_m", 0, false}, {"beacons.mast.lon", 10, true}} {
		if v, ok, err := s.Figure(c.key); v != c.v || ok != c.ok || err != nil {
			t.Errorf("%s is %v, %v, %v", c.key, v, ok, err)
		}
	}
	if _, _, err := s.Figure("sensors.odo.kind"); err == nil {
		t.Error("a kind is a figure")
	}
}

// TestSetNothing: an empty suite, and one that is none.
func TestSetNothing(t *testing.T) {
	set, err := (*Suite)(nil).Set("vehicle.corner_sigma_m", "1")
	if err != nil || set.Vehicle.CornerSigmaM != 1 {
		t.Errorf("%+v, %v", set, err)
	}
	text, err := EditSuite("it", []byte("# nothing yet"), "vehicle.corner_sigma_m", "1")
	if err != nil || string(text) != "# nothing yet\nvehicle: {corner_sigma_m: 1}\n" {
		t.Errorf("%q, %v", text, err)
	}
}

func TestSetWrong(t *testing.T) {
	for _, c := range [][3]string{
		{"vehicle.alert", "1", `suite key vehicle.alert: there is no "alert" in vehicle: there are alert_limit_m`},
		{"nothing", "1", `suite key nothing: there is no "nothing": there are vehicle, environment`},
		{"sensors.odometer.sign", "1", `suite key sensors.odometer.sign: there is no "odometer" in sensors: there are odo, gnss`},
		{"sensors.odo.nuisances.tide_m.sigma", "1", `there is no "tide_m" in sensors.odo.nuisances: there are odometer_scale`},
		{"sensors.gnss.nuisances.tide_m.sigma", "1", "sensors.gnss.nuisances has no elements"},
		{"posts.x.lon", "1", "posts has no elements"},
		{"sensors.odo.noise", "1", "suite key sensors.odo.noise has parts"},
		{"sensors", "1", "suite key sensors has parts"},
		{"vehicle.alert_limit_m.x", "1", "vehicle.alert_limit_m is a value and has no parts"},
		{"vehicle.alert_limit_m", "far", `suite key vehicle.alert_limit_m is "far": want one number`},
		{"vehicle.alert_limit_m", "-1", "vehicle.alert_limit_m = -1: suite: vehicle.alert_limit_m: -1 must be a number from"},
		{"sensors.odo.sign", "1.5", "want a whole number"},
		{"sensors.odo.course", "maybe", "want true or false"},
		{"sensors.odo.kind", "trip", "no kind of measurement"},
		{"", "1", "there is no"},
	} {
		_, err := parsed(t, edited).Set(c[0], c[1])
		if err == nil || !strings.Contains(err.Error(), c[2]) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s = %s: got %v, want %q", c[0], c[1], err, c[2])
		}
		if _, err := EditSuite("it", []byte(edited), c[0], c[1]); err == nil {
			t.Errorf("%s = %s can be written", c[0], c[1])
		}
	}
}

// TestEditStarters: every figure that a starter states can be written.
func TestEditStarters(t *testing.T) {
	for _, name := range StarterNames() {
		text, _ := StarterText(name)
		s := parsed(t, string(text))
		keys := []string{"vehicle.stretch_m_per_sqrt_m", "vehicle.corner_sigma_m"}
		for _, d := range s.Sensors {
			keys = append(keys, "sensors."+d.Name+".noise.sigma_m", "sensors."+d.Name+".outlier_probability")
			for _, n := range d.Nuisances {
				keys = append(keys, "sensors."+d.Name+".nuisances."+n.Name+".drift_per_sqrt_s")
			}
		}
		for _, key := range keys {
			if _, err := EditSuite(name, text, key, "0.005"); err != nil {
				t.Errorf("%s: %v", name, err)
			}
		}
	}
}

// FuzzEditSuite: whatever the text, what comes out says what was asked for.
func FuzzEditSuite(f *testing.F) {
	f.Add(edited, "vehicle.alert_limit_m", "30")
	f.Add(edited, "sensors.gnss.noise.sigma_m", "4")
	f.Add("vehicle:\n  {}\n", "vehicle.hold_s", "1")
	f.Add("", "environment.air_temperature_c", "3")
	f.Fuzz(func(t *testing.T, text, key, value string) {
		out, err := EditSuite("it", []byte(text), key, value)
		if err != nil {
			return
		}
		want, err := parsed(t, text).Set(key, value)
		if err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(parsed(t, string(out)), want) {
			t.Fatalf("%q, %s = %s: %q", text, key, value, out)
		}
	})
}
