package diagnose

import (
	"math"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/study/replay"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// looked replays a scene and looks at it.
func looked(t *testing.T, s *scene) (*Findings, *replay.Result) {
	t.Helper()
	var r Record
	res, err := replay.Run(s.drive, s.config, replay.Options{Watch: r.Add})
	must(t, res, err)
	f, err := Look(res, &r, replay.Truth(s.drive), s.drive.Events, s.config)
	return must(t, f, err), res
}

func spoiled(s *scene, spoil func(*sensor.Event)) *scene {
	for i := range s.drive.Events {
		spoil(&s.drive.Events[i])
	}
	return s
}

// TestLook: what is suspect is said, and nothing of a drive that is not.
func TestLook(t *testing.T) {
	for _, c := range []struct {
		name  string
		scene *scene
		want  []string // in the reasons, one each
	}{
		{"a good car", fittedCar(t, 1), nil},
		{"a good flight", flyer(t, 1), nil},
		{"a reversed gyro", spoiled(plainCar(t, 3), each(func(m *sensor.Turn) { m.AngleRad *= -1 })), []string{"located wrongly", "off the map's roads"}},
		{"heights in feet", spoiled(flyer(t, 1), each(func(m *sensor.Clearance) { m.AltitudeM /= 0.3048 })), []string{"altimeter fits badly"}},
		{"depths below zero", spoiled(surveyor(t, 1), each(func(m *sensor.Sounding) { m.DepthBelowTransducerM *= -1 })), []string{"sounder is refused: 120 of 120 measurements, first as unusable"}},
	} {
		f, _ := looked(t, c.scene)
		all := strings.Join(f.Reasons, "; ")
		if len(c.want) == 0 && len(f.Reasons) > 0 {
			t.Errorf("%s: %s", c.name, all)
		}
		for _, w := range c.want {
			if !strings.Contains(all, w) {
				t.Errorf("%s: %q does not say %q", c.name, all, w)
			}
		}
	}
}

// TestStatuses: a run that is never located, and one that is contradicted, are
// suspect whatever else.
func TestStatuses(t *testing.T) {
	s := flyer(t, 1)
	at := func(status summary.Status) *replay.Result {
		return &replay.Result{Start: 1e9, Posteriors: []*summary.Posterior{{TimeNS: 5e9, Status: status}}}
	}
	for status, want := range map[summary.Status]string{
		summary.Located: "", summary.Ambiguous: "it is never located", summary.Unsure: "it is never located",
		summary.Contradicted: "it is contradicted 4 s after the start; it is never located",
		summary.OffMap:       "it is never located; it is off the map's roads for 1 of 1 posteriors",
	} {
		f, err := Look(at(status), &Record{}, nil, nil, s.config)
		if err != nil || strings.Join(f.Reasons, "; ") != want {
			t.Errorf("%v: %v, %v, want %q", status, f.Reasons, err, want)
		}
	}
}

// TestAstray: a fifth of the located posteriors with the truth beyond the 99 %
// radius, and three sigma of the truth, is wrong.
func TestAstray(t *testing.T) {
	frame := geo.NewFrame(atlantic)
	var ps []*summary.Posterior
	var truth []score.Truth
	for i := range 10 {
		ns := int64(i+1) * 1e9
		ps = append(ps, &summary.Posterior{TimeNS: ns, Status: summary.Located, Mean: atlantic, Radius99M: 10})
		truth = append(truth, score.Truth{TimeNS: ns, At: frame.Inverse(geo.Point{E: 15}), SigmaM: 1})
	}
	ps[9].Status = summary.Unsure
	wrong, compared, mostM, err := astray(ps, truth)
	if err != nil || wrong != 9 || compared != 9 || math.Abs(mostM-2) > 1e-3 {
		t.Errorf("%d of %d, by %v m, %v", wrong, compared, mostM, err)
	}
	for i := range truth {
		truth[i].SigmaM = 2
	}
	if wrong, _, _, _ := astray(ps, truth); wrong != 0 {
		t.Errorf("within three sigma of the truth %d are wrong", wrong)
	}
	if _, compared, _, _ := astray(ps, nil); compared != 0 {
		t.Errorf("%d are compared without a truth", compared)
	}
}

// TestBeyondPrior: an odometer that is 8 % off ends beyond a prior of 1 %, and
// says by how much distances are to be taken; within 5 % nothing is said.
func TestBeyondPrior(t *testing.T) {
	suite := func(sigma string) *sensor.Suite {
		return parse(t, "sensors: [{name: odometer, kind: travel, nuisances: [{name: odometer_scale, sigma: "+sigma+"}]}, {name: gyro, kind: turn}, {name: fix, kind: fix}, {name: compass, kind: heading}]")
	}
	for sigma, want := range map[string]int{"0.01": 1, "0.05": 0} {
		s := spoiled(fittedCar(t, 2), each(func(m *sensor.Travel) { m.DistanceM *= 1.08 }))
		s.config.Suite = suite(sigma)
		f, _ := looked(t, s)
		if len(f.Beyond) != want {
			t.Fatalf("a prior of %s: %+v", sigma, f.Beyond)
		}
		if want == 0 {
			continue
		}
		b := f.Beyond[0]
		if b.Name != "odometer_scale" || math.Abs(b.Mean+0.074) > 0.03 || b.PriorSigmas > -3 || !strings.Contains(b.Suggests, "wheel") {
			t.Errorf("%+v", b)
		}
	}
}
