package session

import (
	"errors"
	"math"
	"reflect"
	"slices"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// hindsight runs a drive forward and looks back over it.
func hindsight(t *testing.T, c Config, events []sensor.Event, tapeBytes int) (hash string, out []Hindsight) {
	t.Helper()
	s := open(t, c)
	var settled []sensor.Event
	s.Settled(func(evs []sensor.Event) { settled = append(settled, evs...) })
	events = slices.SortedStableFunc(slices.Values(events), sensor.Event.Compare)
	for _, ev := range events {
		if _, err := s.Add(ev); err != nil {
			t.Fatal(err)
		}
	}
	s.Flush()
	settled = append(settled, s.Held()...)
	err := LookBack(c, List(settled), HindsightOptions{Path: true, TapeBytes: tapeBytes, Give: func(h Hindsight) error {
		out = append(out, h)
		return nil
	}})
	if err != nil {
		t.Fatal(err)
	}
	return s.Hash(), out
}

// reading looks back with few events in memory at a time.
func reading(t *testing.T, c Config, events []sensor.Event, tapeBytes int) (out []Hindsight) {
	t.Helper()
	most := 0
	var l *looker
	l, err := newLooker(c, HindsightOptions{Path: true, TapeBytes: tapeBytes, Give: func(h Hindsight) error {
		out, most = append(out, h), max(most, len(l.s.log.events))
		return nil
	}})
	if err != nil {
		t.Fatal(err)
	}
	all := List(inOrder(events))
	l.all, l.least = all, 20
	if err := l.fill(); err != nil {
		t.Fatal(err)
	}
	l.s.begin()
	if _, err := l.stretch(l.first(), all.Len(), nil, true); err != nil {
		t.Fatal(err)
	}
	if len(all) > 512 && most > len(all)/2 { // fewer are not dropped
		t.Errorf("of %d events %d were in memory", len(all), most)
	}
	return out
}

// TestLookBack: looking back comes by the posteriors that the session had, bit for
// bit; what it finds does not depend on how often it has to begin again from a
// checkpoint; the last time is known as it was; and in the mean over the drive the
// covariance is smaller, as is the error. On roads the path is on one road at a time, each the
// next of the one before.
func TestLookBack(t *testing.T) {
	early := func(events []sensor.Event) []sensor.Event {
		return slices.DeleteFunc(events, func(ev sensor.Event) bool { return ev.Time > at(9) })
	}
	for _, c := range []struct {
		name   string
		config Config
		events []sensor.Event
		truth  func(s float64) geo.Point
	}{
		{"roads", Config{Space: crossing(), Names: crossing(), Suite: onRoads(), Start: pointStart(crossing(), geo.Point{E: 10, N: 30}, 25)}, roadEvents(5), nil},
		{"plane", Config{Space: sea(), Start: pointStart(sea(), geo.Point{}, 30), MaxCells: 100}, early(planeEvents(5)), func(s float64) geo.Point {
			return geo.Point{E: 3 * s, N: 20 * math.Sin(s/6)}
		}},
	} {
		t.Run(c.name, func(t *testing.T) {
			hash, whole := hindsight(t, c.config, c.events, 0)
			_, cut := hindsight(t, c.config, c.events, 100_000)
			if few := reading(t, c.config, c.events, 100_000); !reflect.DeepEqual(whole, few) {
				t.Error("with few events in memory it finds something else")
			}
			if !reflect.DeepEqual(whole, cut) {
				t.Error("with a short tape it finds something else")
			}
			h := summary.NewHasher()
			var filtered, smoothed, errF, errS float64
			for i, x := range whole {
				h.Add(x.Filtered)
				filtered += x.Filtered.CovFrame.EE + x.Filtered.CovFrame.NN
				smoothed += x.Smoothed.CovFrame.EE + x.Smoothed.CovFrame.NN
				if x.Path == nil || x.Path.TimeNS != x.Filtered.TimeNS || x.Smoothed.TimeNS != x.Filtered.TimeNS {
					t.Fatalf("of posterior %d the parts have different times", i)
				}
				if c.truth != nil {
					at := c.truth(sensor.Time(x.Filtered.TimeNS).Seconds(at(0)))
					errF += math.Pow(x.Filtered.MeanFrame.Sub(at).Norm(), 2)
					errS += math.Pow(x.Smoothed.MeanFrame.Sub(at).Norm(), 2)
				}
				if c.truth == nil && i > 0 {
					before, now := whole[i-1].Path.Edges[0].Chart, x.Path.Edges[0].Chart
					if before != now && (before == 0) == (now == 0) {
						t.Errorf("the path leads from road %d to road %d, which are no neighbours", before, now)
					}
				}
			}
			if got := h.Sum(); got != hash {
				t.Errorf("looking back came by posteriors %s, the session by %s", got, hash)
			}
			if last := whole[len(whole)-1]; last.Smoothed.MeanFrame != last.Filtered.MeanFrame || last.Smoothed.CovFrame != last.Filtered.CovFrame {
				t.Errorf("at the end %v is known later, and was %v", last.Smoothed.MeanFrame, last.Filtered.MeanFrame)
			}
			if !(smoothed < 0.9*filtered) || errS > errF {
				t.Errorf("covariances sum up to %.3g m² later and were %.3g; squared errors to %.3g and %.3g", smoothed, filtered, errS, errF)
			}
		})
	}
}

// TestLookBackStops: an error of who is given the times, or who is asked whether to
// go on, ends it.
func TestLookBackStops(t *testing.T) {
	c := Config{Space: sea(), Start: pointStart(sea(), geo.Point{}, 30), MaxCells: 100}
	events := slices.SortedStableFunc(slices.Values(planeEvents(5)), sensor.Event.Compare)
	stop := &Refusal{TooLate, "enough"}
	o := HindsightOptions{Give: func(Hindsight) error { return stop }}
	if err := LookBack(c, List(events), o); !errors.Is(err, stop) {
		t.Errorf("got %v", err)
	}
	if err := LookBack(c, List(nil), o); err == nil {
		t.Error("a drive without events has nothing to look back over")
	}
}
