package page_test

import (
	"bytes"
	"fmt"
	"maps"
	"math"
	"strings"
	"testing"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/server"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// heardRow is a line of the page's table of vehicles.
type heardRow struct {
	Label                                              uint64
	PositionM, SigmaM, SpeedKMH, SpeedSigmaKMH, Exists float64
	Way                                                string
}

// heardRows reads the table.
func (p *tab) heardRows() (rows []heardRow) {
	p.t.Helper()
	for _, text := range eval[[]string](p, "[...document.querySelectorAll('#heard tbody tr')].map(e => [...e.cells].map(c => c.innerText).join('|').replaceAll('\u00a0', ' '))") {
		var r heardRow
		cells := strings.Split(text, "|")
		_, err := fmt.Sscanf(strings.Join(append(cells[:3:3], cells[4]), "|"), "%d|%f ± %f|%f ± %f|%f", &r.Label, &r.PositionM, &r.SigmaM, &r.SpeedKMH, &r.SpeedSigmaKMH, &r.Exists)
		if err != nil {
			p.t.Fatalf("%q: %v", text, err)
		}
		r.Way = cells[3]
		rows = append(rows, r)
	}
	return rows
}

// TestTraffic proves that a road which posts listen to is shown as the server holds it: by mouse
// and by keyboard vehicles, counts, flows and doubts; that it moves as bearings come, says how old
// it is when they stop, when the server goes and when the drive ends; that markup in names is text.
func TestTraffic(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	scene, err := scenes.Traffic(1)
	if err != nil {
		t.Fatal(err)
	}
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	suites := maps.Clone(w.suites)
	for name, text := range map[string][]byte{
		scene.SuiteName: scene.Suite,
		"few":           bytes.Replace(scene.Suite, []byte("traffic:\n"), []byte("traffic:\n  max_vehicles: 2\n"), 1),
	} {
		if suites[name], err = sensor.ParseSuite(name, text); err != nil {
			t.Fatal(err)
		}
	}
	change := func(c *server.Config) { c.Suites = suites }
	r := serve(t, "127.0.0.1:0", change)
	p := b.open(t, r.origin+"/#traffic", 1440, 900, false)
	p.says("main .side", "No road is heard here yet.")
	p.audit("no road")
	// Nobody asks again whether one has come: the server says so.
	asked := p.asked()
	time.Sleep(4500 * time.Millisecond)
	if got := p.asked()[len(asked):]; len(got) > 0 {
		t.Errorf("while there is no road the page asks %q", got)
	}

	f := r.open(scene.Drive, scene.Name, nil)
	const seconds = 95
	r.send(f, upTo(scene.Drive, seconds))
	ask := func(least, flowS float64) *leadlinev1.TrafficPicture {
		t.Helper()
		resp, err := r.calls.Traffic(t.Context(), &leadlinev1.TrafficRequest{Road: scene.Name, LeastExistence: &least, FlowS: &flowS})
		if err != nil {
			t.Fatal(err)
		}
		return resp.GetPicture()
	}
	same := func(want *leadlinev1.TrafficPicture) {
		t.Helper()
		p.await("as many vehicles", fmt.Sprintf("document.querySelectorAll('#heard tbody tr').length === %d", len(want.GetVehicles())))
		rows := p.heardRows()
		near := func(a, b, rel float64) bool { return math.Abs(a-b) <= rel*math.Abs(b)+0.06 }
		for i, v := range want.GetVehicles() {
			way := "forward"
			switch {
			case v.GetForward() <= 0.05:
				way = "backward"
			case v.GetForward() < 0.95:
				way = "either way"
			}
			// Positions have one decimal, sigmas two figures, speeds three; probabilities one decimal or less.
			if g := rows[i]; g.Label != v.GetLabel() || !near(g.PositionM, v.GetPositionM(), 0) || !near(g.SigmaM, v.GetPositionSigmaM(), 0.05) ||
				!near(g.SpeedKMH, 3.6*math.Abs(v.GetSpeedMps()), 0.005) || !near(g.SpeedSigmaKMH, 3.6*v.GetSpeedSigmaMps(), 0.05) || g.Way != way || math.Abs(g.Exists-100*v.GetExistence()) > 0.51 {
				t.Errorf("the page has %+v, the server %v", g, v)
			}
		}
	}
	all := func(evs []sensor.Event) {
		t.Helper()
		for ask(0.5, 60).GetAccepted() < uint64(len(evs)) {
			time.Sleep(10 * time.Millisecond)
		}
		p.says("main .side", fmt.Sprintf("%d taken", len(evs)))
	}
	p.says("#traffic-answer", "vehicle")
	p.says("main .side h2", scene.Name)
	all(upTo(scene.Drive, seconds))
	at := ask(0.5, 3600)
	p.says("main .side", at.GetTime().AsTime().Format("15:04:05"))
	if len(at.GetVehicles()) == 0 || at.GetLines()[0].GetForward() == 0 {
		t.Fatalf("nothing to see: %v", at)
	}
	same(at)
	cells := func(l *leadlinev1.LineCount) string {
		three := func(x float64) string { return fmt.Sprintf("%.3g", x) }
		return fmt.Sprintf("%s, at %.0f m|%d|%s|%d|%s", l.GetName(), l.GetAtM(), l.GetForward(), three(l.GetForwardPerHour()), l.GetBackward(), three(l.GetBackwardPerHour()))
	}
	const row = "[...document.querySelector('#lines tbody tr').cells].map(c => c.innerText).join('|').replaceAll('\u00a0', ' ')"
	p.await("the counts", fmt.Sprintf("%s === %q", row, cells(at.GetLines()[0])))
	p.says(".legend", "expected vehicles a km")
	p.says("main .side", "a recording, or a clock that is wrong")
	p.says("main .side", "to the east, from the first corner on, 601\u00a0m")
	p.await("the intensity", "document.querySelector('.plot canvas')")

	// A vehicle is looked up by mouse, and let go of by keyboard.
	label := at.GetVehicles()[0].GetLabel()
	button := fmt.Sprintf("[...document.querySelectorAll('button')].find(e => e.ariaLabel === 'Show vehicle %d on the map')", label)
	p.click(button)
	p.await("it is marked", button+".ariaPressed === 'true'")
	p.audit("traffic")
	p.looks("traffic")
	p.do("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{{"name": "prefers-color-scheme", "value": "light"}}}, nil)
	p.tabTo(button)
	p.press("Enter")
	p.await("it is not marked", button+".ariaPressed === 'false'")

	// Less sure ones, and another time for flows, by keyboard.
	p.tabTo("document.querySelector('[name=least]')")
	p.press("ArrowUp")
	same(ask(0.1, 3600))
	p.tabTo("document.querySelector('[name=flow]')")
	p.press("Home")
	p.await("the flow of a minute", fmt.Sprintf("%s === %q", row, cells(ask(0.5, 60).GetLines()[0])))
	p.says("main .side", "Taken over 60 s.")
	p.press("End")

	// By mouse on the map's buttons, and by its keys.
	p.click("[...document.querySelectorAll('.buttons button')].find(e => e.innerText === 'Whole map')")
	eval[any](p, "document.querySelector('.ground').focus()")
	p.press("+", "ArrowLeft", "0")

	// A post that is none of the road's.
	const hostile = `<img src=x onerror="document.title=1">`
	last := upTo(scene.Drive, seconds)[len(upTo(scene.Drive, seconds))-1]
	r.send(f, []sensor.Event{{Time: last.Time, Sensor: "stray", Number: 1, Measurement: sensor.AcousticBearing{Post: hostile, SigmaRad: 0.05}}})
	p.says(".note.bad", "A post that is not this road's, "+hostile+" (1 time)")
	p.says("main .side", "1 refused")
	p.says("main .side", "No news of it for")

	// It moves on as bearings come.
	stamp := eval[string](p, "document.querySelector('.pairs dd').innerText")
	r.send(f, upTo(scene.Drive, 110)[len(upTo(scene.Drive, seconds)):])
	all(upTo(scene.Drive, 110))
	p.await("it has moved on", fmt.Sprintf("document.querySelector('.pairs dd').innerText !== %q", stamp))
	same(ask(0.1, 60))

	// A second road, of another name, that has more vehicles than are followed.
	few := *scene.Drive
	few.Header.Suite = "few"
	g := r.open(&few, "<i>lane</i>", nil)
	r.send(g, upTo(scene.Drive, 60))
	p.click("document.querySelector('nav a[href^=\"#now\"]')")
	p.click("document.querySelector('nav a[href^=\"#traffic\"]')")
	p.tabTo("document.querySelector('[name=road]')")
	p.press("ArrowUp")
	p.says("main .side h2", "<i>lane</i>")
	p.says("main .side", "More vehicles than are followed")
	p.resize(390, 844)
	p.do("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{{"name": "prefers-color-scheme", "value": "dark"}}}, nil)
	p.await("a narrow map", "document.querySelector('.map').clientWidth < 400")
	p.click("[...document.querySelectorAll('.buttons button')].find(e => e.innerText === 'Whole map')")
	p.audit("traffic, narrow and dark")
	eval[any](p, "scrollTo(0, 0)")
	// Two fingers that part make the scale larger.
	const bar = "parseFloat(document.querySelector('.legend .bar').innerText) / document.querySelector('.legend .bar').clientWidth"
	before := eval[float64](p, bar)
	for i, kind := range []string{"touchStart", "touchMove", "touchMove", "touchEnd"} {
		points := []map[string]any{}
		if kind != "touchEnd" {
			points = append(points, map[string]any{"x": 180 - 20*i, "y": 500, "id": 1}, map[string]any{"x": 220 + 20*i, "y": 500, "id": 2})
		}
		p.do("Input.dispatchTouchEvent", map[string]any{"type": kind, "touchPoints": points}, nil)
	}
	p.await("a larger scale", fmt.Sprintf("%s < %v", bar, 0.6*before))
	p.click("[...document.querySelectorAll('.buttons button')].find(e => e.innerText === 'Whole map')")
	eval[any](p, "scrollTo(0, 0)")
	eval[any](p, "document.querySelector('#lines').scrollIntoView()")
	p.shoot("traffic-counts-narrow-dark")

	// Its drive ends; then the server goes, and one comes that does not know it.
	if _, err := g.Close(); err != nil {
		t.Fatal(err)
	}
	p.says("main .side", "The drive has ended: this is what was known last.")
	eval[any](p, fmt.Sprintf("location.hash = %q", "#traffic/"+scene.Name))
	p.says("#traffic-answer", "vehicle")
	r.stop()
	p.says("#traffic-trouble", "The server does not answer. What is shown is")
	r = serve(t, r.address, change)
	p.says("#traffic-trouble", fmt.Sprintf("There is no road %q here: feed it first", scene.Name))
	r.send(r.open(scene.Drive, scene.Name, nil), upTo(scene.Drive, 30))
	p.says("main .side", fmt.Sprintf("%d taken", len(upTo(scene.Drive, 30))))
	p.await("all is well", "!document.querySelector('#traffic-trouble')")
	if title := eval[string](p, "document.title"); title != "Leadline" {
		t.Errorf("the title is %q", title)
	}
	p.clean(r.origin, "net::ERR_", "status of 404")
}
