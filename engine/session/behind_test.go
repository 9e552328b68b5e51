package session

import (
	"reflect"
	"slices"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// TestBehind: asked after each few events, what is known of a time the lag ago is to
// the bit what looking back over all events until then says of it (which is held
// against sums over all paths), on roads and on a plane, whatever the tape holds; and
// events before that time are not kept.
func TestBehind(t *testing.T) {
	const lagS = 3
	for _, c := range []struct {
		name   string
		config Config
		events []sensor.Event
	}{
		{"roads", Config{Space: crossing(), Names: crossing(), Suite: onRoads(), Start: pointStart(crossing(), geo.Point{E: 10, N: 30}, 25)}, roadEvents(5)},
		{"plane", Config{Space: sea(), Start: pointStart(sea(), geo.Point{}, 30), MaxCells: 100}, planeEvents(5)},
	} {
		t.Run(c.name, func(t *testing.T) {
			events := slices.SortedStableFunc(slices.Values(c.events), sensor.Event.Compare)
			b, err := NewBehind(c.config, lagS, 100_000)
			if err != nil {
				t.Fatal(err)
			}
			compared, later := 0, 0
			for from := 0; from < len(events); {
				until := min(from+61, len(events))
				for until < len(events) && events[until].Time == events[until-1].Time {
					until++
				}
				b.Add(events[from:until])
				from = until
				got, err := b.At()
				if err != nil {
					t.Fatal(err)
				}
				if got == nil {
					continue
				}
				now := events[until-1].Time
				if ago := now.Seconds(sensor.Time(got.TimeNS)); ago < lagS {
					t.Errorf("asked for %v s ago, it tells of %v s ago", lagS, ago)
				}
				var want, filtered *summary.Posterior
				err = LookBack(c.config, List(events[:until]), HindsightOptions{Give: func(h Hindsight) error {
					if h.Filtered.TimeNS == got.TimeNS {
						want, filtered = h.Smoothed, h.Filtered
					}
					return nil
				}})
				if err != nil {
					t.Fatal(err)
				}
				if want == nil {
					continue // passed over there
				}
				compared++
				if !reflect.DeepEqual(got, want) {
					t.Errorf("%v s before %v: %+v, want %+v", lagS, now, got, want)
				}
				if got.MeanFrame != filtered.MeanFrame {
					later++
				}
			}
			if compared < 3 || later < compared/2 {
				t.Errorf("%d compared, of which later measurements changed %d", compared, later)
			}
		})
	}
	if _, err := NewBehind(Config{Space: sea(), Start: pointStart(sea(), geo.Point{}, 30)}, 0, 0); err == nil {
		t.Error("a lag of 0 was taken")
	}
}

// TestBehindForgets: of a long drive no more than the events of the lag, and as many
// again, are held.
func TestBehindForgets(t *testing.T) {
	b, err := NewBehind(Config{Space: sea(), Start: pointStart(sea(), geo.Point{}, 30), MaxCells: 100}, 1, 0)
	if err != nil {
		t.Fatal(err)
	}
	most := 0
	for k := 1; k <= 1500; k++ {
		at := at(float64(k) / 10)
		b.Add([]sensor.Event{{Time: at, Sensor: "fix", Number: uint64(k), Measurement: sensor.Fix{Position: sea().Frame().Inverse(geo.Point{}), SigmaM: 30}}})
		if k%100 == 0 {
			if _, err := b.At(); err != nil {
				t.Fatal(err)
			}
		}
		most = max(most, len(b.l.s.log.events))
	}
	if most > 600 {
		t.Errorf("%d events were held", most)
	}
}
