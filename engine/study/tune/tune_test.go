package tune

import (
	"errors"
	"reflect"
	"runtime"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/fixtures/drives"
	"leadline/fixtures/sim"
)

// trueAltimeterM is that of the world.
const trueAltimeterM = 3.0

const (
	altimeterKey = "sensors.altimeter.noise.sigma_m"
	odometryKey  = "sensors.odometry.noise.sigma_m_per_sqrt_m"
)

func parsed(t testing.TB, text string) *sensor.Suite {
	t.Helper()
	s, err := sensor.ParseSuite("the test's", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// flights are simulated: their world shares nothing with the filter.
func flights(t testing.TB, seed uint64, n int, durationS float64) (out []Drive) {
	t.Helper()
	field := sim.Hills{On: geo.NewFrame(geo.FromDegrees(-30, 45))}
	space := plane.Over(field, "hills", 50)
	for i := range n {
		o := sim.FlightOptions{Vehicle: "aircraft", DurationS: durationS, StartSigmaM: 20, OdometryMRootMin: 30, AltimeterM: trueAltimeterM}
		d, err := sim.Flight(seed*1000+uint64(i), field, o)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, Drive{Name: "flight", Drive: drives.Convert(d, "", ""), Space: space})
	}
	return out
}

// TestSaysWhatIsNotKnown: of a figure that no drive depends on nothing is said; of
// one that shows only where it is large, a limit; and processors do not matter.
func TestSaysWhatIsNotKnown(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long")
	}
	all := flights(t, 77, 2, 20)
	o := Options{
		Figures:  []Figure{{Key: "vehicle.max_accel_mps2"}, {Key: "sensors.altimeter.attitude_sigma_deg", Low: 0.01, High: 20}},
		MaxCells: 200,
	}
	suite := parsed(t, strings.Replace(drives.Guessed, "sigma_m: 1.5", "sigma_m: 3", 1))
	of := func(processors int) *Result {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(processors))
		r, err := Run(suite, all[:1], all[1:], o)
		if err != nil {
			t.Fatal(err)
		}
		return r
	}
	one := of(1)
	if f := one.Figures[0]; f.Known != Silent || f.Value != nil || f.LogSigma != nil {
		t.Errorf("the greatest acceleration, where nothing is a gap: %+v", f)
	}
	if f := one.Figures[1]; f.Known != AtMost || f.Value == nil || *f.Value > 15 {
		t.Errorf("the attitude: %+v", f)
	}
	if !reflect.DeepEqual(one.Suite, suite) {
		t.Error("figures that are not known were written into the suite")
	}
	if one.HeldBefore == nil || *one.HeldBefore != *one.HeldAfter || one.Held != 1 || one.Drives != 1 {
		t.Errorf("held out: %+v", one)
	}
	if len(one.Figures[1].Profile) != profilePoints {
		t.Errorf("profile: %v", one.Figures[1].Profile)
	}
	if two := of(2); !reflect.DeepEqual(one, two) {
		t.Error("one and two processors give different results")
	}
}

// TestStops: a tuning that is stopped gives the best so far, and a bound holds for
// the search.
func TestStops(t *testing.T) {
	all := flights(t, 5, 1, 20)
	o := Options{Figures: []Figure{{Key: altimeterKey}}, MaxCells: 100, NoProfile: true, MaxEvaluations: 4}
	r, err := Run(parsed(t, drives.Guessed), all, nil, o)
	if err != nil || r.Converged || r.Searched < 2 || r.Searched > 4 || r.Evaluations <= r.Searched || r.Interrupted {
		t.Fatalf("cut short: %+v, %v", r, err)
	}
	tried := 0
	o.Progress = func(n int) { tried = n }
	o.Stop = func() error {
		if tried >= 3 {
			return errors.New("enough")
		}
		return nil
	}
	r, err = Run(parsed(t, drives.Guessed), all, nil, o)
	if err != nil || !r.Interrupted || r.Figures[0].Known != BestSoFar || !(*r.Figures[0].Value > 0) || r.After < r.Before {
		t.Fatalf("stopped: %+v, %v", r, err)
	}
}

func TestTuneWrong(t *testing.T) {
	all := flights(t, 1, 1, 5)
	for _, c := range []struct {
		figures []Figure
		want    string
	}{
		{nil, "0 figures are to be tuned"},
		{[]Figure{{Key: altimeterKey}, {Key: altimeterKey}}, "is to be tuned twice"},
		{[]Figure{{Key: "sensors.gyro.sign"}}, `there is no "gyro" in sensors`},
		{[]Figure{{Key: "sensors.odometry.kind"}}, "is no figure"},
		{[]Figure{{Key: "sensors.altimeter.beam_width_deg"}}, "the suite does not say what sensors.altimeter.beam_width_deg is: give bounds"},
		{[]Figure{{Key: altimeterKey, Low: 2, High: 1}}, "the lower first"},
		{[]Figure{{Key: "vehicle.integrity_risk", Low: 1e-3, High: 1}}, "a bound of vehicle.integrity_risk = 1"},
	} {
		_, err := Run(parsed(t, drives.Guessed), all, nil, Options{Figures: c.figures})
		if err == nil || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%v: got %v, want %q", c.figures, err, c.want)
		}
	}
	if _, err := Run(nil, nil, all, Options{}); err == nil || !strings.Contains(err.Error(), "no drive to tune on") {
		t.Errorf("nothing to tune on: %v", err)
	}
}
