package session

import (
	"fmt"
	"strings"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
)

// still is a fix of a vehicle on the water.
func still(s float64, name string) sensor.Event {
	return sensor.Event{Time: at(s), Sensor: name, Measurement: sensor.Fix{Position: seaOrigin, SigmaM: 10}}
}

func afloat(t *testing.T) *Session {
	p := sea()
	return open(t, Config{Space: p, Start: pointStart(p, geo.Point{}, 50), MaxCells: 250})
}

// addAll adds events in order of arrival; the session's counts agree with what
// each Add said, but for what was taken back later.
func addAll(t *testing.T, s *Session, events ...sensor.Event) (refused int) {
	t.Helper()
	for _, ev := range events {
		if _, err := s.Add(ev); err != nil {
			refused++
		}
	}
	return refused
}

// TestClockAhead drives with three sensors, one of which is hours ahead, from the
// first event on or from some time on: it is refused, with what to do, what it
// sent before that became clear counts as refused, and all else is as without it.
func TestClockAhead(t *testing.T) {
	for _, first := range []int{0, 40} {
		for _, aheadS := range []float64{61.5, 23 * 3600} {
			t.Run(fmt.Sprintf("first=%d/ahead=%g", first, aheadS), func(t *testing.T) {
				with, without := afloat(t), afloat(t)
				bad, said := 0, ""
				for i := range 120 {
					x := float64(i) / 4
					if i >= first {
						bad++
						if _, err := with.Add(still(x+aheadS, "wrong")); err != nil {
							said = err.Error()
						}
					}
					for _, name := range []string{"gps", "log"} {
						mustAdd(t, with, still(x, name))
						mustAdd(t, without, still(x, name))
					}
				}
				for _, want := range []string{"too early", `"wrong"`, "ahead of all the others", "check its clock"} {
					if !strings.Contains(said, want) {
						t.Errorf("%q does not say %q", said, want)
					}
				}
				if strings.Contains(said, "\n") {
					t.Errorf("%q is not one line", said)
				}
				with.Flush()
				without.Flush()
				sameState(t, without, with)
				if accepted, refused := with.Counts(); int(refused) != bad || accepted != 240 {
					t.Errorf("%d accepted, %d refused; it sent %d", accepted, refused, bad)
				}
			})
		}
	}
}

// TestClockPutRight: a sensor that was refused is taken again once its clock is
// right.
func TestClockPutRight(t *testing.T) {
	s := afloat(t)
	for i := range 40 {
		x := float64(i) / 4
		mustAdd(t, s, still(x, "gps"))
		if i < 20 {
			addAll(t, s, still(x+7200, "wrong"))
		} else {
			mustAdd(t, s, still(x, "wrong"))
		}
	}
	if _, refused := s.Counts(); refused != 20 {
		t.Errorf("%d refused", refused)
	}
}

// TestPause: after two hours of silence whatever comes first is taken, as soon as
// a second sensor is there, in any order, and nothing is refused.
func TestPause(t *testing.T) {
	var before []sensor.Event
	for i := range 20 {
		before = append(before, still(float64(i), "gps"), still(float64(i), "log"))
	}
	first, second, third := still(7200, "log"), still(7200.5, "gps"), still(7201, "log")
	var hash string
	for _, after := range [][]sensor.Event{{first, second, third}, {second, first, third}, {first, third, second}, {third, second, first}} {
		s := afloat(t)
		for _, ev := range before {
			mustAdd(t, s, ev)
		}
		for i, ev := range after {
			mustAdd(t, s, ev)
			if s.log.latest > at(100) != (i > 0 && after[i].Sensor != after[0].Sensor || i == 2) {
				t.Errorf("after %d of %v the latest is %d", i, after, s.log.latest)
			}
		}
		s.Flush()
		if hash == "" {
			hash = s.Hash()
		}
		if accepted, refused := s.Counts(); refused != 0 || accepted != 43 || s.Hash() != hash {
			t.Errorf("%d refused of %d, or another hash", refused, accepted)
		}
	}
}

// TestAlone: one sensor that goes on after a pause is taken once it has spoken for
// ten seconds, or at the end of the drive; at once, if the others had been silent
// before or never were there; and a motion that covers the pause is none.
func TestAlone(t *testing.T) {
	s := afloat(t)
	addAll(t, s, still(0, "gps"), still(0, "log"), still(1, "gps"))
	for i := range 10 {
		mustAdd(t, s, still(600+float64(i), "gps"))
		if s.log.latest > at(100) {
			t.Fatalf("taken after %d s", i)
		}
	}
	mustAdd(t, s, still(610, "gps"))
	if s.log.latest != at(610) {
		t.Error("not taken after ten seconds")
	}
	mustAdd(t, s, still(1200, "gps")) // the log has been silent since
	if s.log.latest != at(1200) {
		t.Error("not taken where the other is silent")
	}

	s = afloat(t)
	addAll(t, s, still(0, "gps"), still(0, "log"), still(600, "gps"))
	s.Flush()
	if p := s.Latest(); p.TimeNS != int64(at(600)) {
		t.Errorf("a drive ends at %d", p.TimeNS)
	}

	s = afloat(t)
	addAll(t, s, still(0, "gps"), still(3600, "gps"))
	if s.log.latest != at(3600) {
		t.Error("the only sensor is not taken")
	}

	s = afloat(t)
	addAll(t, s, still(0, "gps"), still(0, "log"))
	mustAdd(t, s, sensor.Event{Time: at(900), Sensor: "ins", Measurement: sensor.Displacement{Since: at(0), CovM2: [3]float64{100, 0, 100}}})
	if s.log.latest != at(900) {
		t.Error("a displacement over the pause is not taken")
	}
}

// TestLateAfterPause: an event from before a pause that comes after the first one
// of after it costs what was held, and no more.
func TestLateAfterPause(t *testing.T) {
	s := afloat(t)
	addAll(t, s, still(0, "gps"), still(0, "log"), still(1, "gps"))
	mustAdd(t, s, still(600, "gps"))
	mustAdd(t, s, still(1, "log"))
	if refused := addAll(t, s, still(600.2, "gps")); refused != 1 {
		t.Error("a sensor that was contradicted is taken")
	}
	mustAdd(t, s, still(600.3, "log"))
	mustAdd(t, s, still(600.4, "gps"))
	s.Flush()
	if accepted, refused := s.Counts(); accepted != 6 || refused != 2 || s.Latest().TimeNS != int64(at(600.4)) {
		t.Errorf("%d accepted, %d refused, at %d", accepted, refused, s.Latest().TimeNS)
	}
}

// TestTwoLeads: a sensor whose clock is wrong does not keep the others from
// going on after a pause.
func TestTwoLeads(t *testing.T) {
	s := afloat(t)
	for i := range 8 {
		addAll(t, s, still(float64(i), "gps"), still(float64(i), "log"), still(9000+float64(i), "wrong"))
	}
	addAll(t, s, still(9008, "wrong"))
	mustAdd(t, s, still(700, "gps"))
	addAll(t, s, still(9020, "wrong"))
	mustAdd(t, s, still(700.5, "log"))
	if s.log.latest != at(700.5) {
		t.Errorf("the latest is %d", s.log.latest)
	}
}

// TestFirstSensorsDisagree: before anything is computed, one sensor far behind two
// that agree is late.
func TestFirstSensorsDisagree(t *testing.T) {
	s := afloat(t)
	addAll(t, s, still(9000, "gps"), still(9000.2, "log"))
	if r := refusal(t, s, still(0, "wrong")); r.Reason != TooLate || !strings.Contains(r.Detail, "behind all the others") {
		t.Error(r)
	}
}
