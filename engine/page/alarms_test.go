package page_test

import (
	"fmt"
	"slices"
	"testing"
	"time"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	leadlinev1 "leadline/proto/leadline/v1"
)

// silentAudio stands in for the browser's sound: it counts how often it is asked for one.
const silentAudio = `globalThis.sounded = 0;
	globalThis.AudioContext = class {
		currentTime = 0; destination = {};
		createOscillator() { return {frequency: {}, connect: to => to, start() { globalThis.sounded++; }, stop() {}}; }
		createGain() { return {gain: {setValueAtTime() {}, exponentialRampToValueAtTime() {}}, connect: to => to}; }
		close() {}
	};`

// records are the alarms that a server has on record, by number; as many as are waited for.
func (r *running) records(enough func(map[uint64]*leadlinev1.AlarmRecord) bool) map[uint64]*leadlinev1.AlarmRecord {
	r.t.Helper()
	st, err := r.calls.Follow(r.t.Context(), &leadlinev1.FollowRequest{Alarms: true})
	if err != nil {
		r.t.Fatal(err)
	}
	out := map[uint64]*leadlinev1.AlarmRecord{}
	for !enough(out) {
		m, err := st.Recv()
		if err != nil {
			r.t.Fatal(err)
		}
		if a := m.GetAlarm(); a != nil {
			out[a.GetNumber()] = a
		}
	}
	return out
}

// TestAlarms has alarms raised and cleared under the open page, which says why each is over as the
// server does, and sounds once for those that are raised together if it is asked to, by mouse and by
// keyboard, and not otherwise.
func TestAlarms(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	evs := upTo(w.van, 20)
	f := r.open(w.van, "van", nearStart(w.van))
	r.send(f, evs)
	r.where(&leadlinev1.WhereRequest{Vehicles: []string{"van"}}, len(evs)-4)
	p := b.open(t, r.origin+"/#alarms", 1440, 900, false, silentAudio)
	p.says("main", "No alarm has been raised since the server was started.")
	box := "document.querySelector('main input[type=checkbox]')"
	rows := func(state string) int {
		return eval[int](p, fmt.Sprintf("[...document.querySelectorAll('tbody tr')].filter(e => e.cells[0].innerText === %q).length", state))
	}

	// impossible has somebody say of the van what cannot be, and the alarms of that shown.
	seconds, sightings := 20.0, 0
	impossible := func() {
		t.Helper()
		open := rows("open")
		resp, err := r.calls.AddSighting(t.Context(), &leadlinev1.AddSightingRequest{Vehicle: "van", Sighting: &leadlinev1.Sighting{Place: &leadlinev1.Sighting_Road{Road: "Dune Lane"}, Who: "Ada"}})
		if err != nil || resp.GetRefusal() != nil {
			t.Fatal(resp.GetRefusal(), err)
		}
		sightings++
		p.await("an alarm is raised", fmt.Sprintf("[...document.querySelectorAll('tbody tr')].filter(e => e.cells[0].innerText === 'open').length > %d", open))
	}
	// mended has it drive on, with a satellite fix a second, until all alarms are over.
	fixes := uint64(0)
	mended := func() {
		t.Helper()
		for began := seconds; rows("open") > 0; {
			if seconds++; seconds > began+30 {
				t.Fatalf("it is not over: %s", p.text("tbody"))
			}
			more := upTo(w.van, seconds)
			r.send(f, more[len(evs):])
			evs = more
			at := evs[len(evs)-1].Time
			i := slices.IndexFunc(w.van.Truths, func(q drivefile.TimedTruth) bool { return q.Time >= at })
			fixes++
			r.send(f, []sensor.Event{{Time: at, Sensor: "gnss", Number: fixes, Measurement: sensor.Fix{Position: w.van.Truths[i].Position, SigmaM: 5}}})
			time.Sleep(250 * time.Millisecond) // the page hears of it five times a second
		}
	}
	sounded := func(when string, want int) {
		t.Helper()
		// Whatever is to sound has by the time that the words are there for screen readers.
		eval[any](p, "new Promise(done => setTimeout(done, 1100))") // alarms that come within a second sound together
		if got := eval[int](p, "globalThis.sounded"); got != want {
			t.Errorf("%s: it has sounded %d times, want %d", when, got, want)
		}
	}

	impossible()
	sounded("not asked to", 0)
	mended()
	p.click(box)
	impossible()
	sounded("switched on by mouse", 1)
	mended()
	sounded("when an alarm is over", 1)
	p.tabTo(box)
	p.press(" ")
	impossible()
	sounded("switched off by keyboard", 1)
	mended()
	p.press(" ")
	impossible()
	sounded("switched on by keyboard", 2)
	mended()

	// One holds when the drive ends.
	impossible()
	sounded("another", 3)
	if _, err := f.Close(); err != nil {
		t.Fatal(err)
	}
	p.await("none holds", "![...document.querySelectorAll('tbody tr')].some(e => e.cells[0].innerText.startsWith('open'))")
	all := eval[int](p, "document.querySelectorAll('tbody tr').length")
	want := r.records(func(got map[uint64]*leadlinev1.AlarmRecord) bool { return len(got) == all })
	reasons := map[string]int{}
	for _, a := range want {
		if a.GetClearedAt() == nil || a.GetClearedReason() == "" {
			t.Errorf("the server has %v", a)
		}
		reasons[a.GetClearedReason()]++
	}
	for reason, n := range reasons {
		if got := eval[int](p, fmt.Sprintf("[...document.querySelectorAll('tbody tr.over')].filter(e => e.cells[5].innerText.endsWith(%q)).length", reason)); got != n {
			t.Errorf("%d rows say %q, the server has %d", got, reason, n)
		}
	}
	if t.Logf("%d sightings, alarms over because: %v", sightings, reasons); len(reasons) < 2 {
		t.Errorf("alarms are over for %v alone", reasons)
	}
	p.says(".count, main h2 small", "none open")
	p.clean(r.origin)
}
