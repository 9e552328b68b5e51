package diagnose

import (
	"math"
	"math/rand/v2"
	"sync"
	"testing"

	"leadline/engine/drivefile"
	"leadline/engine/geo"
	"leadline/engine/plane"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/fixtures/drives"
	"leadline/fixtures/sim"
	"leadline/network"
	"leadline/terrain"
)

// scene is an invented world with a drive in it.
type scene struct {
	config session.Config
	drive  *drivefile.Drive
	sim    *sim.Drive
}

func must[T any](t testing.TB, v T, err error) T {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// relief makes invented hills: 60 waves of 600 m to 4 km, 400 × 400 samples
// some 30 m apart. No place is meant.
func relief(seed uint64, meanM, heightM float64) *terrain.Raster {
	const n, step = 400, 30.0
	rng := rand.New(rand.NewPCG(seed, 0xd1a9))
	type wave struct{ e, n, phase, amplitudeM float64 }
	waves := make([]wave, 60)
	for i := range waves {
		dir, phase := 2*math.Pi*rng.Float64(), 2*math.Pi*rng.Float64()
		lengthM := 600 * math.Pow(4000.0/600, rng.Float64())
		k := 2 * math.Pi / lengthM
		waves[i] = wave{k * math.Sin(dir), k * math.Cos(dir), phase, heightM * lengthM / 4000}
	}
	heights := make([]float32, n*n)
	for r := range n {
		for c := range n {
			h := meanM
			for _, v := range waves {
				h += v.amplitudeM * math.Sin(v.e*step*float64(c)-v.n*step*float64(r)+v.phase)
			}
			heights[r*n+c] = float32(h)
		}
	}
	lon, lat := atlantic.Degrees()
	dLat := step / 111000
	dLon := dLat / math.Cos(atlantic.Lat)
	r, err := terrain.New(
		terrain.Grid{CRS: terrain.LonLat(), Cols: n, Rows: n, FirstX: lon - dLon*n/2, FirstY: lat + dLat*n/2, StepX: dLon, StepY: -dLat}, heights,
		terrain.Meta{VerticalDatum: "invented", SigmaM: 0.5, Source: "INVENTED relief: no place is meant", Licence: "Apache-2.0"})
	if err != nil {
		panic(err)
	}
	return r
}

// hills and seaFloor are flown over and surveyed by all.
var (
	hills    = sync.OnceValue(func() *terrain.Raster { return relief(1, 600, 40) })
	seaFloor = sync.OnceValue(func() *terrain.Raster { return relief(2, -120, 15) })
)

// a town is there for each of four seeds.
var towns = [4]func() *sim.World{town(1), town(2), town(3), town(4)}

func town(seed uint64) func() *sim.World {
	return sync.OnceValue(func() *sim.World {
		w, err := sim.Town(seed, geo.NewFrame(atlantic), 9, 8)
		if err != nil {
			panic(err)
		}
		return w
	})
}

var atlantic = geo.FromDegrees(-30, 45)

// over is a plane over a raster.
func over(r *terrain.Raster) *plane.Plane {
	e, n := r.StepM()
	return plane.Over(r, r.Fingerprint(), math.Min(e, n))
}

// car drives through an invented town.
func car(t testing.TB, seed uint64, durationS float64, edit func(*sim.CarOptions)) *scene {
	t.Helper()
	o := sim.StandardCar()
	o.DurationS, o.StartSigmaM = durationS, 10
	if edit != nil {
		edit(&o)
	}
	m, w, err := towns[seed%4]().HandOver(seed, sim.Flaws{}, network.Options{Heights: o.Heights, HeightSigmaM: 1, Source: "invented", Licence: "Apache-2.0"})
	must(t, m, err)
	w, err = w.Disturb(seed, sim.MapErrorM, sim.MapErrorLengthM)
	must(t, w, err)
	d, err := w.Drive(seed, o)
	must(t, d, err)
	c := drives.Convert(d, "town", "")
	return &scene{session.Config{Space: m, Names: m, MaxCells: 2000}, c, d}
}

func flight(t testing.TB, seed uint64, durationS float64, edit func(*sim.FlightOptions)) *scene {
	t.Helper()
	r := hills()
	o := sim.StandardFlight()
	o.DurationS, o.StartSigmaM, o.LegM, o.OdometryMRootMin, o.MarginM = durationS, 50, 2500, 10, 1500
	if edit != nil {
		edit(&o)
	}
	d, err := sim.Flight(seed, r, o)
	must(t, d, err)
	return &scene{session.Config{Space: over(r), MaxCells: 2000}, drives.Convert(d, "relief", ""), d}
}

func survey(t testing.TB, seed uint64, durationS float64) *scene {
	t.Helper()
	r := seaFloor()
	o := sim.StandardSurvey()
	o.DurationS, o.SpeedMPS, o.StartSigmaM, o.TideM, o.MarginM, o.LegM = durationS, 5, 30, 0.3, 500, 400
	d, err := sim.Survey(seed, r, o)
	must(t, d, err)
	s := &scene{session.Config{Space: over(r), MaxCells: 2000}, drives.Convert(d, "sea floor", ""), d}
	// The log gives the compass's course along, so that no heading need be
	// estimated.
	var events []sensor.Event
	course := map[sensor.Time]float64{}
	for _, ev := range s.drive.Events {
		switch m := ev.Measurement.(type) {
		case sensor.HeadingFix:
			course[ev.Time] = m.HeadingRad
		case sensor.Speed:
			m.HasCourse, m.CourseRad = true, course[ev.Time]
			ev.Measurement = m
			events = append(events, ev)
		default:
			events = append(events, ev)
		}
	}
	s.drive.Events = events
	return s
}

func parse(t testing.TB, text string) *sensor.Suite {
	t.Helper()
	s, err := sensor.ParseSuite("test", []byte(text))
	return must(t, s, err)
}
