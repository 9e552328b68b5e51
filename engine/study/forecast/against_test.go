package forecast_test

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"testing"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/forecast"
	"leadline/engine/study/replay"
	"leadline/engine/summary"
	"leadline/fixtures/accept"
	"leadline/fixtures/drives"
	"leadline/fixtures/outside"
	"leadline/fixtures/roads"
	"leadline/fixtures/sim"
	"leadline/network"
	"leadline/network/roadfile"
	"leadline/terrain/heightfile"
)

func suiteOf(t testing.TB, text string) *sensor.Suite {
	t.Helper()
	s, err := sensor.ParseSuite("the test's", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func quillmere(t testing.TB) *network.Map {
	t.Helper()
	m, _, err := roadfile.ReadFrom(bytes.NewReader(roads.Quillmere), roadfile.Options{})
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// drove is one simulated drive along a route, filtered: what it says where.
type drove struct{ wayM, errorM, radius95M []float64 }

// filtered runs a drive and reads each posterior at its place along the route.
func filtered(t testing.TB, space filter.Space, suite *sensor.Suite, d *sim.Drive, startM float64, wayOf func(tr *sim.Truth) float64) (out drove) {
	t.Helper()
	file := drives.Convert(d, "", "")
	start := replay.Start(file.Header.Start)
	s, err := session.New(session.Config{Space: space, Suite: suite, Start: start})
	if err != nil {
		t.Fatal(err)
	}
	truth := map[int64]*sim.Truth{}
	for i := range d.Truth {
		truth[d.Truth[i].TimeNs] = &d.Truth[i]
	}
	take := func(ps []*summary.Posterior) {
		for _, p := range ps {
			tr, ok := truth[p.TimeNS]
			if !ok {
				continue
			}
			wayM := wayOf(tr)
			if math.IsNaN(wayM) {
				continue
			}
			m, _, err := geo.WGS84.Distance(p.Mean, geo.FromDegrees(tr.LonDeg, tr.LatDeg))
			if err != nil {
				t.Fatal(err)
			}
			out.wayM, out.errorM, out.radius95M = append(out.wayM, wayM), append(out.errorM, m), append(out.radius95M, p.Radius95M)
		}
	}
	for _, ev := range file.Events {
		ps, err := s.Add(ev)
		if err != nil {
			t.Fatal(err)
		}
		take(ps)
	}
	take(s.Flush())
	return out
}

// agreement is how much of a route a prediction is within a fifth of what 200
// drives show, bin by bin: the median of the radii that posteriors state against
// the radius that was predicted, by runs and by the bound, and the 95 % quantile of
// their errors against that of the runs. The ratios are geometric means of
// predicted over observed.
type agreement struct {
	stated, bound, errors                float64
	statedRatio, boundRatio, errorsRatio float64
}

const within = 0.2

func compare(t testing.TB, f *forecast.Forecast, all []drove, binM float64) (a agreement) {
	t.Helper()
	bins := 0
	near := func(predicted, observed float64, share, ratio *float64) {
		if math.Abs(predicted-observed) <= within*observed {
			*share++
		}
		*ratio += math.Log(predicted / observed)
	}
	for from := 0.0; from+binM <= f.LengthM; from += binM {
		var errs, radii []float64
		for _, d := range all {
			// One figure a drive and bin, so that slow drives count no more: that
			// nearest to its middle.
			best := -1
			for i, m := range d.wayM {
				if m >= from && m < from+binM && (best < 0 || math.Abs(m-from-binM/2) < math.Abs(d.wayM[best]-from-binM/2)) {
					best = i
				}
			}
			if best >= 0 {
				errs, radii = append(errs, d.errorM[best]), append(radii, d.radius95M[best])
			}
		}
		if len(errs) < len(all)/2 {
			continue
		}
		slices.Sort(errs)
		slices.Sort(radii)
		s := f.At(from + binM/2)
		e, r := errs[int(0.95*float64(len(errs)-1)+0.5)], radii[len(radii)/2]
		bins++
		near(s.BoundRadius95M, r, &a.bound, &a.boundRatio)
		text := ""
		if s.Runs != nil {
			near(s.Radius95M, r, &a.stated, &a.statedRatio)
			near(s.Runs.ErrorP95M, e, &a.errors, &a.errorsRatio)
			text = fmt.Sprintf("runs %.2f, their errors %.2f; ", s.Radius95M, s.Runs.ErrorP95M)
		}
		t.Logf("%6.0f m: %sbound %.2f; %d drives state %.2f, err %.2f", from+binM/2, text, s.BoundRadius95M, len(errs), r, e)
	}
	n := float64(bins)
	for _, v := range []*float64{&a.stated, &a.bound, &a.errors} {
		*v /= n
	}
	for _, v := range []*float64{&a.statedRatio, &a.boundRatio, &a.errorsRatio} {
		*v = math.Exp(*v / n)
	}
	t.Logf("%+v", a)
	return a
}

// judge asks for nine tenths of the route within a fifth. The quick form has too
// few drives for quantiles of errors, and compares radii by the bound, which on
// roads knows nothing of the time before the direction is known.
func judge(t testing.TB, a agreement, withRuns bool) {
	t.Helper()
	switch {
	case withRuns && a.stated < 0.9:
		t.Errorf("the radius that runs predict is right to a fifth on only %.0f %% of the route", 100*a.stated)
	case !withRuns && a.bound < 0.7:
		t.Errorf("the bound is right to a fifth on only %.0f %% of the route", 100*a.bound)
	}
}

// carSuite is the standard car's (sim.StandardCar): its own sigmas, and a gyro's
// bias of 30 °/h.
const carSuite = `
sensors:
  - name: odometer
    kind: travel
    noise: {sigma_m_per_sqrt_m: 0.02}
    nuisances:
      - {name: odometer_scale, sigma: 0.01, drift_per_sqrt_s: 1.0e-5}
  - name: gyro
    kind: turn
    noise: {sigma_deg_per_sqrt_s: 0.005}
    nuisances:
      - {name: heading_deg, sigma: 10, drift_per_sqrt_s: 0.1}
      - {name: gyro_bias_dps, sigma: 0.0083, drift_per_sqrt_s: 4.6e-5}
`

func TestAgainstCars(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long")
	}
	n, runs := 3, 0
	if accept.Long() {
		n, runs = 200, 200
	}
	m := quillmere(t)
	world, err := sim.FromMap(m)
	if err != nil {
		t.Fatal(err)
	}
	first, err := sim.Course(world, 7, 10)
	if err != nil {
		t.Fatal(err)
	}
	r := &forecast.Route{Name: "course"}
	for _, tr := range first.Truth {
		r.Points = append(r.Points, geo.FromDegrees(tr.LonDeg, tr.LatDeg))
	}
	suite := suiteOf(t, carSuite)
	path, err := forecast.NewPath(m, r, 9)
	if err != nil {
		t.Fatal(err)
	}
	// The route from the beginning of its first road on: that is where cars with a
	// given route begin.
	r.Points = nil
	for _, c := range path.Charts() {
		e, n := m.Polyline(c)
		for i := range e {
			r.Points = append(r.Points, m.Frame().Inverse(geo.Point{E: e[i], N: n[i]}))
		}
	}
	if path, err = forecast.NewPath(m, r, 9); err != nil {
		t.Fatal(err)
	}
	const startM = 10
	plan, err := forecast.NewPlan(path, suite, nil, startM)
	if err != nil {
		t.Fatal(err)
	}
	f, err := forecast.Of(plan, forecast.Options{Runs: runs, Seed: 1, NoAmbiguity: true})
	if err != nil {
		t.Fatal(err)
	}
	o := sim.StandardCar()
	o.Route, o.StartSigmaM = path.Charts(), startM
	o.Driver.ReverseProbability = 0
	o.Odometer.Hz, o.Gyro.Hz = 5, 5
	all := make([]drove, n)
	accept.Each(n, func(i int) {
		seed := uint64(100 + i)
		w, err := world.Disturb(seed, sim.MapErrorM, sim.MapErrorLengthM)
		if err != nil {
			t.Error(err)
			return
		}
		d, err := w.Drive(seed, o)
		if err != nil {
			t.Error(err)
			return
		}
		last := 0.0
		all[i] = filtered(t, m, suite, d, startM, func(tr *sim.Truth) float64 {
			last = path.WayOf(tr.Edge, tr.AlongM, last)
			return last
		})
	})
	t.Logf("%.0f m, %d charts", path.LengthM(), len(o.Route))
	judge(t, compare(t, f, all, 25), runs > 0)
}

const flightSuite = `
sensors:
  - name: odometry
    kind: displacement
    noise: {sigma_m_per_sqrt_m: 0.5}
  - name: altimeter
    kind: clearance
    noise: {sigma_m: 3}
    outlier_probability: 0
`

func TestAgainstFlights(t *testing.T) {
	if testing.Short() {
		t.Skip("filters for long")
	}
	n, runs, durationS := 3, 0, 120.0
	if accept.Long() {
		n, runs, durationS = 200, 200, 180
	}
	res, err := heightfile.Read(outside.Path(t, "trinidad.nc"), heightfile.Options{Unit: heightfile.Foot})
	if err != nil {
		t.Fatal(err)
	}
	raster := res.Raster
	east, north := raster.StepM()
	space := plane.Over(raster, raster.Fingerprint(), math.Min(east, north))
	suite := suiteOf(t, flightSuite)
	o := sim.FlightOptions{Vehicle: "aircraft", DurationS: durationS, StartSigmaM: 100, MarginM: 6000, OdometryMRootMin: 30, AltimeterM: 3, TrackSeed: 11}
	first, err := sim.Flight(1, raster, o)
	if err != nil {
		t.Fatal(err)
	}
	r := &forecast.Route{Name: "flight"}
	for _, tr := range first.Truth {
		r.Points = append(r.Points, geo.FromDegrees(tr.LonDeg, tr.LatDeg))
	}
	path, err := forecast.NewPath(space, r, 60)
	if err != nil {
		t.Fatal(err)
	}
	plan, err := forecast.NewPlan(path, suite, nil, 100)
	if err != nil {
		t.Fatal(err)
	}
	f, err := forecast.Of(plan, forecast.Options{Runs: runs, Seed: 1, NoAmbiguity: true})
	if err != nil {
		t.Fatal(err)
	}
	all := make([]drove, n)
	accept.Each(n, func(i int) {
		d, err := sim.Flight(uint64(100+i), raster, o)
		if err != nil {
			t.Error(err)
			return
		}
		all[i] = filtered(t, space, suite, d, 100, func(tr *sim.Truth) float64 { return float64(tr.TimeNs-d.StartNs) / 1e9 * 60 })
	})
	t.Logf("%.0f m", path.LengthM())
	judge(t, compare(t, f, all, 300), runs > 0)
}
