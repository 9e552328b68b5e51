package diagnose

import (
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
	"leadline/engine/summary"
)

// TestExplain proves that the effects are what happened: each begins with what
// the one before left, the last posterior of a time is the replay's, evidence
// and measurements are the session's, and moves name what measured them.
func TestExplain(t *testing.T) {
	s := fittedCar(t, 2)
	start := s.drive.Time
	at := start + 30e9
	x, err := Explain(s.drive, s.config, at, 2.5, nil)
	must(t, x, err)
	res, err := replay.Run(s.drive, s.config, replay.Options{})
	must(t, res, err)

	kinds := map[string]int{}
	evidence := map[int64]float64{}
	for i := range x.Effects {
		e := &x.Effects[i]
		kinds[e.Kind+" "+e.Sensor]++
		if math.Abs(e.AtS) > 2.5 {
			t.Errorf("an effect %v s away", e.AtS)
		}
		if i > 0 {
			o := &x.Effects[i-1]
			if e.Radius95M[0] != o.Radius95M[1] || e.EntropyNats[0] != o.EntropyNats[1] || !reflect.DeepEqual(e.Modes[0], o.Modes[1]) || e.Status[0] != o.Status[1] {
				t.Errorf("effect %d does not begin where %d ended", i, i-1)
			}
		}
		if math.Abs(e.ShiftM-math.Hypot(e.EastM, e.NorthM)) > 1e-9 {
			t.Errorf("effect %d shifts by %v, not %v and %v", i, e.ShiftM, e.EastM, e.NorthM)
		}
		if e.LogEvidence != nil {
			evidence[int64(e.when)] += *e.LogEvidence
		} else if e.Kind != moved {
			t.Errorf("%s has no evidence", e.Kind)
		}
	}
	if kinds["fix fix"] != 5 || kinds["heading compass"] != 5 || kinds["move gyro, odometer"] != 5 || kinds["heading road"] == 0 {
		t.Errorf("effects: %v", kinds)
	}
	// The last effect of a time leaves the posterior of that time, and what it
	// weighed is all that the posterior's evidence grew by.
	compared := 0
	for i := range x.Effects {
		e := &x.Effects[i]
		if i+1 < len(x.Effects) && x.Effects[i+1].when == e.when {
			continue
		}
		j := slices.IndexFunc(res.Posteriors, func(p *summary.Posterior) bool { return p.TimeNS == int64(e.when) })
		if j < 1 {
			continue
		}
		p := res.Posteriors[j]
		if e.Radius95M[1] != p.Radius95M || e.EntropyNats[1] != p.EntropyNats || e.Status[1] != p.Status.String() {
			t.Errorf("%v s: the effects end with a radius of %v, the posterior has %v", e.AtS, e.Radius95M[1], p.Radius95M)
		}
		if e.AtS > -1.5 && math.Abs(evidence[p.TimeNS]-(p.LogEvidence-res.Posteriors[j-1].LogEvidence)) > 1e-9 {
			t.Errorf("%v s: evidence %v, the posterior's grew by %v", e.AtS, evidence[p.TimeNS], p.LogEvidence-res.Posteriors[j-1].LogEvidence)
		}
		compared++
	}
	if compared < 5 {
		t.Errorf("only %d posteriors were compared", compared)
	}
	// A fix far off moves the belief less than it would, and is an outlier.
	for i := range x.Effects {
		if e := &x.Effects[i]; e.Kind == "fix" && (e.Outlier == nil || *e.Outlier > 0.5 || e.InformationNats() < -1) {
			t.Errorf("a good fix: %+v", e)
		}
	}
}

// TestExplainOutlier: a planted outlier is seen as one, and hardly moves the
// belief.
func TestExplainOutlier(t *testing.T) {
	s := fittedCar(t, 2)
	at := s.drive.Time + 30e9
	for i := range s.drive.Events {
		if ev := &s.drive.Events[i]; ev.Sensor == "fix" && ev.Time == at {
			m := ev.Measurement.(sensor.Fix)
			m.Position.Lat += 500 / 6.4e6
			ev.Measurement = m
		}
	}
	x, err := Explain(s.drive, s.config, at, 0.5, nil)
	must(t, x, err)
	i := slices.IndexFunc(x.Effects, func(e Effect) bool { return e.Kind == "fix" })
	if i < 0 {
		t.Fatal("the fix is not among the effects")
	}
	if e := x.Effects[i]; e.Outlier == nil || *e.Outlier < 0.999 || e.ShiftM > 0.1 || *e.LogEvidence > -15 {
		t.Errorf("500 m off: %+v", e)
	}
}

// TestExplainTheLate: measurements that come late, by an increment that is
// longer than the session waits, are explained once and in their place.
func TestExplainTheLate(t *testing.T) {
	s := fittedCar(t, 2)
	long := sensor.Event{}
	kept := s.drive.Events[:0]
	for _, ev := range s.drive.Events { // one increment of the odometer over 2 s
		tr, ok := ev.Measurement.(sensor.Travel)
		switch sinceStart := ev.Time.Seconds(s.drive.Time); {
		case ok && sinceStart == 30:
			long = ev
		case ok && sinceStart == 31:
			first := long.Measurement.(sensor.Travel)
			ev.Measurement = sensor.Travel{Since: first.Since, DistanceM: first.DistanceM + tr.DistanceM, SigmaM: math.Hypot(first.SigmaM, tr.SigmaM)}
			kept = append(kept, ev)
		default:
			kept = append(kept, ev)
		}
	}
	s.drive.Events = kept
	s.config.Suite = &sensor.Suite{Vehicle: sensor.Vehicle{HoldS: 0.4, LateWindowS: 5}}
	again := 0
	var last sensor.Time
	_, err := replay.Run(s.drive, s.config, replay.Options{Watch: func(c session.Change) {
		if c.Time < last {
			again++
		}
		last = c.Time
	}})
	if err != nil || again == 0 {
		t.Fatalf("nothing was computed again, %v", err)
	}
	x, err := Explain(s.drive, s.config, s.drive.Time+30e9, 2, nil)
	must(t, x, err)
	fixes := map[float64]int{}
	for i := range x.Effects {
		if i > 0 && x.Effects[i].AtS < x.Effects[i-1].AtS {
			t.Errorf("effect %d goes back in time", i)
		}
		if x.Effects[i].Kind == "fix" {
			fixes[x.Effects[i].AtS]++
		}
	}
	for at, n := range fixes {
		if n != 1 {
			t.Errorf("the fix at %v is explained %d times", at, n)
		}
	}
	if len(fixes) < 4 {
		t.Errorf("only %d fixes", len(fixes))
	}
}

// TestExplainNothing: where a drive has nothing, that is an error.
func TestExplainNothing(t *testing.T) {
	s := flyer(t, 1)
	_, err := Explain(s.drive, s.config, s.drive.Time+1e13, 2, nil)
	if err == nil || !strings.Contains(err.Error(), "nothing moved") {
		t.Errorf("explained: %v", err)
	}
}
