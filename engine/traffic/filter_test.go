package traffic

import (
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/fixtures/sim"
)

// stretch is 400 m of road with posts every 100 m.
func stretch(t *testing.T, model Model, lines ...float64) (*sim.Roadside, *Filter) {
	t.Helper()
	r := &sim.Roadside{
		Line: []geo.Point{{}, {E: 400}}, Hz: 5, SigmaRad: geo.Rad(3), Detection: 0.9, ReachM: 150, FalsePerS: 1,
		SoundMPS: 20.05 * math.Sqrt(273.15), AxleM: 2.7, Second: model.TwoBearings,
	}
	var posts []Post
	for i := range 4 {
		at := geo.Point{E: 50 + 100*float64(i), N: 50}
		r.Posts = append(r.Posts, at)
		posts = append(posts, Post{ID: fmt.Sprint("p", i), At: at})
	}
	f, err := New(roadOf(t, r.Line...), posts, model, lines...)
	if err != nil {
		t.Fatal(err)
	}
	return r, f
}

func scanOf(r *sim.Roadside, h sim.Heard) Scan {
	s := Scan{Time: sensor.Time(math.Round(h.TimeS * 1e9)), Post: fmt.Sprint("p", h.Post)}
	for _, b := range h.Bearings {
		s.Bearings = append(s.Bearings, Bearing{Rad: b, SigmaRad: r.SigmaRad})
	}
	return s
}

// through drives a vehicle through a stretch and calls after each time.
func through(t *testing.T, seed uint64, r *sim.Roadside, f *Filter, mps float64, after func(v *sim.Passing, tS float64)) {
	t.Helper()
	from := 0.0
	if mps < 0 {
		from = r.LengthM()
	}
	v := sim.Pass(sim.Random(seed, sim.StreamTraffic), 1, from, 2*r.LengthM()/math.Abs(mps), 0.3, func(float64) float64 { return mps })
	heard := r.Listen(sim.Random(seed, sim.StreamHearing), 0, r.LengthM()/math.Abs(mps)+6, []sim.Passing{v})
	for i, h := range heard {
		if err := f.Hear(scanOf(r, h)); err != nil {
			t.Fatal(err)
		}
		if i == len(heard)-1 || heard[i+1].TimeS > h.TimeS {
			after(&v, h.TimeS)
		}
	}
}

// TestOneVehicle: one that drives through, either way, is there once, where it
// is, with one label, is counted once, and is gone when it has left; also where
// most of what is heard are two bearings, of its front and rear.
func TestOneVehicle(t *testing.T) {
	const seed = 3
	for _, second := range []float64{0, 0.7} {
		for _, mps := range []float64{14, -17} {
			r, f := stretch(t, Model{Traffic: sensor.Traffic{TwoBearings: second}}, 200)
			labels := map[uint64]bool{}
			through(t, seed, r, f, mps, func(v *sim.Passing, tS float64) {
				at, _, _ := v.At(tS)
				vs := f.Picture(0.5).Vehicles
				switch {
				case at > 60 && at < 340 && len(vs) != 1:
					t.Errorf("seed %d, %v m/s: at %.0f m there are %d vehicles", seed, mps, at, len(vs))
				case at > 60 && at < 340:
					labels[vs[0].Label] = true
					if e := math.Abs(vs[0].PositionM-at) / vs[0].PositionSigmaM; e > 4.5 {
						t.Errorf("seed %d: at %.1f m, said %.1f ± %.1f m", seed, at, vs[0].PositionM, vs[0].PositionSigmaM)
					}
					if vs[0].Forward > 0.01 && mps < 0 || vs[0].Forward < 0.99 && mps > 0 || vs[0].SpeedMPS*mps < 0 {
						t.Errorf("seed %d: %v m/s, said %v, forward %v", seed, mps, vs[0].SpeedMPS, vs[0].Forward)
					}
				}
			})
			p := f.Picture(0.5)
			if len(p.Vehicles) != 0 || len(labels) != 1 {
				t.Errorf("seed %d, %v m/s, second %v: %d vehicles are left, labels %v", seed, mps, second, len(p.Vehicles), labels)
			}
			forward, backward := 1, 0
			if mps < 0 {
				forward, backward = 0, 1
			}
			if l := p.Lines[0]; l.Forward != forward || l.Backward != backward || len(l.Recent) != 1 {
				t.Errorf("seed %d, %v m/s, second %v: counted %d forward and %d backward", seed, mps, second, l.Forward, l.Backward)
			}
			if a := f.Account(); a.Pruned > 1e-6 || a.Clipped > 0.02 || a.Refused+a.Crowded > 0 {
				t.Errorf("seed %d: %+v", seed, a)
			}
		}
	}
}

// TestSameAgain: the same scans give the same bits.
func TestSameAgain(t *testing.T) {
	var runs [2][]Picture
	for i := range runs {
		r, f := stretch(t, Model{Traffic: sensor.Traffic{TwoBearings: 0.3}}, 200)
		through(t, 9, r, f, 20, func(v *sim.Passing, tS float64) { runs[i] = append(runs[i], f.Picture(0)) })
	}
	if !reflect.DeepEqual(runs[0], runs[1]) {
		t.Error("two runs differ")
	}
}

// TestScanByHand: existence, density and evidence after a scan equal sums over
// the cells and over the ways in which two bearings may be the vehicle's or false,
// where nothing else may be on the road.
func TestScanByHand(t *testing.T) {
	_, f := stretch(t, Model{Traffic: sensor.Traffic{PerHour: 0.01, TwoBearings: 0.4}, LateralM: 1})
	for _, s := range f.unseen.slices {
		clear(s.mass)
	}
	g := bell(0.5, 0.3, 120, 12, 2, 1, 0.3)
	f.tracks = []*track{{label: 1, existence: 0.6, grid: *g}}
	f.started = true
	e := f.ears[1]
	bearings := []Bearing{{geo.Rad(196), geo.Rad(3)}, {geo.Rad(210), geo.Rad(4)}}
	said := e.say(nil, bearings)
	clutter := f.model.FalsePerS / f.model.ListenHz / (2 * math.Pi)
	total, mean := 1-f.tracks[0].existence, 0.0
	total *= clutter * clutter
	for k, s := range g.slices {
		for i, p := range s.mass {
			x, v := s.fromM+float64(i)*g.stepM, g.speed(k)
			at, d, piece := e.emission(x, v, 0)
			pd := f.model.detection(d)
			side := f.model.LateralM * (at - e.footM[piece]) / (d * d)
			one, front, rear := make([]float64, 2), make([]float64, 2), make([]float64, 2)
			for o, dst := range map[float64][]float64{0: one, 1.35: front, -1.35: rear} {
				off := e.offset(at+o, piece)
				e.densities(dst, said, off, off.Norm(), side)
			}
			l := (1-pd)*clutter*clutter + pd*0.6*(one[0]+one[1])*clutter + pd*0.4*(front[0]*rear[1]+front[1]*rear[0])
			total += 0.6 * p * l
			mean += 0.6 * p * l * x
		}
	}
	f.tracks[0].grid = *bell(0.5, 0.3, 120, 12, 2, 1, 0.3)
	f.tracks[0].heard.listen(&f.tracks[0].grid, e, &f.model, bearings)
	for _, c := range f.clusters(f.tracks, nil, len(bearings)) {
		f.settle(c, len(bearings))
	}
	existence := 1 - (0.4 * clutter * clutter / total)
	if got := f.tracks[0].existence; math.Abs(got-existence) > 1e-9 {
		t.Errorf("existence %v, by hand %v", got, existence)
	}
	if got := f.tracks[0].grid.moments().positionM; math.Abs(got-mean/total/existence) > 1e-6 {
		t.Errorf("mean %v, by hand %v", got, mean/total/existence)
	}
	if want := math.Log(total); math.Abs(f.account.LogEvidence-want) > 1e-9 {
		t.Errorf("evidence %v, by hand %v", f.account.LogEvidence, want)
	}
}

// TestDensitiesAreOfADirection: each bearing's density makes 1 over all
// directions, that of a line of microphones too.
func TestDensitiesAreOfADirection(t *testing.T) {
	axis := 0.4
	for _, sigma := range []float64{0.1, 3, 20} {
		for _, post := range []Post{{ID: "p"}, {ID: "p", AxisRad: &axis}} {
			e := newEar(roadOf(t, geo.Point{N: 50}, geo.Point{E: 400, N: 50}), post, 340, 150)
			const n = 36000
			sum := 0.0
			for i := range n {
				said := e.say(nil, []Bearing{{2 * math.Pi * float64(i) / n, geo.Rad(sigma)}})
				var d [1]float64
				e.densities(d[:], said, geo.Point{E: 30, N: 50}, math.Hypot(30, 50), 0)
				sum += d[0] * 2 * math.Pi / n
			}
			if math.Abs(sum-1) > 2e-4 {
				t.Errorf("sigma %v°, axis %v: %v", sigma, post.AxisRad != nil, sum)
			}
		}
	}
}

// TestUnseenStays: without posts that hear, the model's traffic flows on as it
// was: what enters leaves.
func TestUnseenStays(t *testing.T) {
	model := Model{Traffic: sensor.Traffic{VanishPerS: 1e-9}}.Filled()
	u := newUnseen(roadOf(t, bent...), &model)
	before := u.total()
	for range 500 {
		u.move(0.2, model.VanishPerS)
	}
	if after := u.total(); math.Abs(after/before-1) > 0.03 {
		t.Errorf("%v vehicles, then %v", before, after)
	}
}

// TestBudget: more vehicles than the budget are not followed, and said; the rest
// go on.
func TestBudget(t *testing.T) {
	r, f := stretch(t, Model{Traffic: sensor.Traffic{MaxVehicles: 1}})
	a := sim.Pass(sim.Random(1, sim.StreamTraffic), 1, 0, 60, 0.3, func(float64) float64 { return 14 })
	b := sim.Pass(sim.Random(2, sim.StreamTraffic), 4, 400, 60, 0.3, func(float64) float64 { return -14 })
	for _, h := range r.Listen(sim.Random(1, sim.StreamHearing), 0, 12, []sim.Passing{a, b}) {
		if err := f.Hear(scanOf(r, h)); err != nil {
			t.Fatal(err)
		}
	}
	vs := f.Picture(0.5).Vehicles
	if at, _, _ := a.At(12); len(vs) != 1 || math.Abs(vs[0].PositionM-at) > 10 || f.Account().Refused == 0 {
		t.Errorf("%+v, %+v", vs, f.Account())
	}
}

func TestBadInput(t *testing.T) {
	road, posts := roadOf(t, bent...), []Post{{ID: "p"}}
	for name, c := range map[string]struct {
		posts []Post
		model Model
		lines []float64
		says  []string
	}{
		"no posts":      {nil, Model{}, nil, []string{"no posts"}},
		"post twice":    {[]Post{{ID: "p"}, {ID: "p"}}, Model{}, nil, []string{`post "p" is there twice`}},
		"line":          {posts, Model{}, []float64{5}, []string{"a line at 5 m", "20 m or more from either end"}},
		"figures, both": {posts, Model{Traffic: sensor.Traffic{Detection: 1, ReachM: -3}}, nil, []string{"traffic.detection", "traffic.reach_m"}},
	} {
		_, err := New(road, c.posts, c.model, c.lines...)
		for _, says := range c.says {
			if err == nil || !strings.Contains(err.Error(), says) {
				t.Errorf("%s: %v", name, err)
			}
		}
	}
	_, f := stretch(t, Model{})
	for name, c := range map[string]struct {
		scan Scan
		says string
	}{
		"unknown post": {Scan{Time: 1e9, Post: "elsewhere"}, `post "elsewhere" is none of this road's`},
		"out of order": {Scan{Time: 0, Post: "p1"}, "give them in order"},
		"no number":    {Scan{Time: 2e9, Post: "p1", Bearings: []Bearing{{math.NaN(), 0.1}}}, "NaN°"},
		"no sigma":     {Scan{Time: 2e9, Post: "p1", Bearings: []Bearing{{1, 0}}}, "sigma of 0.1° to 20°"},
	} {
		if err := f.Hear(Scan{Time: 1e9, Post: "p0"}); err != nil {
			t.Fatal(err)
		}
		before := f.Picture(0)
		if err := f.Hear(c.scan); err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%s: %v", name, err)
		}
		if after := f.Picture(0); !reflect.DeepEqual(before, after) {
			t.Errorf("%s: %+v became %+v", name, before, after)
		}
	}
}

// TestWatch: bearings that come in another order, or twice, give the same bits; a
// post that is silent is heard to be so, for a while; what is too late or of an
// unknown post is refused.
func TestWatch(t *testing.T) {
	r, _ := stretch(t, Model{})
	v := sim.Pass(sim.Random(1, sim.StreamTraffic), 1, 0, 60, 0.3, func(float64) float64 { return 14 })
	var said []Said
	for _, h := range r.Listen(sim.Random(1, sim.StreamHearing), 0, 10, []sim.Passing{v}) {
		for i, b := range scanOf(r, h).Bearings {
			said = append(said, Said{sensor.Time(math.Round(h.TimeS * 1e9)), fmt.Sprint("p", h.Post), "", uint64(i), b})
		}
	}
	const seed = 11
	rng := rand.New(rand.NewPCG(seed, 0))
	var was Picture
	for i := range 3 {
		_, f := stretch(t, Model{}, 100)
		w := NewWatch(f, 1)
		give := append([]Said(nil), said...)
		if i > 0 {
			for at := range give { // up to half a second out of order
				for k := at; k > 0 && give[k].Time-give[k-1].Time < 5e8 && at-k < 8 && rng.Float64() < 0.5; k-- {
					give[k], give[k-1] = give[k-1], give[k]
				}
			}
			give = append(give, give[len(give)-3:]...)
		}
		for _, s := range give {
			if err := w.Add(s); err != nil {
				t.Fatalf("seed %d: %v", seed, err)
			}
		}
		if err := w.Flush(); err != nil {
			t.Fatal(err)
		}
		p := f.Picture(0)
		if i == 0 {
			was = p
		} else if !reflect.DeepEqual(p, was) {
			t.Errorf("seed %d: in another order: %+v, in order %+v", seed, p, was)
		}
		late := said[0]
		if err := w.Add(late); err == nil || !strings.Contains(err.Error(), "too late") {
			t.Errorf("late: %v", err)
		}
		if err := w.Add(Said{Time: late.Time, Post: "elsewhere"}); err == nil || !strings.Contains(err.Error(), "none of this road's") {
			t.Errorf("unknown: %v", err)
		}
	}
	// Scans without bearings are made up for: the vehicle that is no longer heard
	// ceases to exist, until the post is taken for out of order.
	_, f := stretch(t, Model{})
	w := NewWatch(f, 1)
	for _, s := range said {
		if err := w.Add(s); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Flush(); err != nil {
		t.Fatal(err)
	}
	before := f.Picture(0.5)
	far := Bearing{0, geo.Rad(3)} // from behind the posts
	for i := range 30 {
		if err := w.Add(Said{before.Time + sensor.Time(i+1)*1e9, "p3", "", 0, far}); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Flush(); err != nil {
		t.Fatal(err)
	}
	if vs := f.Picture(0.5).Vehicles; len(before.Vehicles) != 1 || len(vs) != 0 {
		t.Errorf("%d vehicles, and %d after half a minute of silence", len(before.Vehicles), len(vs))
	}
	quiet := ""
	for _, d := range w.Doubts() {
		if d.Kind == Silent {
			quiet += d.Post + " "
		}
	}
	if quiet != "p0 p1 p2 " {
		t.Errorf("quiet: %q", quiet)
	}
}
