package page_test

import (
	"fmt"
	"math"
	"os"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"

	"leadline/engine/geo"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// audit has axe-core look at the page as it is.
func (p *tab) audit(what string) {
	p.t.Helper()
	text, err := os.ReadFile("node_modules/axe-core/axe.min.js")
	if err != nil {
		p.t.Skipf("axe-core is not here: make fetch-page (%v)", err)
	}
	eval[any](p, string(text)+";0")
	for _, v := range eval[[]string](p, `axe.run(document, {runOnly: ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]}).then(r => r.violations.map(v => v.id + ": " + v.help + " " + v.nodes.slice(0, 3).map(n => n.html.slice(0, 200)).join(" | ")))`) {
		p.t.Errorf("%s: %s", what, v)
	}
}

// TestTasks does what the page is for, by keyboard and by mouse, and compares
// with what the server then holds: a chance, a risk, a sighting, an alarm that is
// seen; with a vehicle beside whose name is markup. Then the server is stopped
// and another one started in its place, under the open page.
func TestTasks(t *testing.T) {
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	w, _ := invented()
	const hostile = `<img src=x onerror="document.title='owned'">`
	f := r.open(w.van, hostile, nearStart(w.van))
	r.send(f, upTo(w.van, 3))
	evs := upTo(w.van, 20)
	r.send(r.open(w.van, "van", nearStart(w.van)), evs)
	ask := &leadlinev1.WhereRequest{Vehicles: []string{"van"}}
	at := r.where(ask, len(evs)-4)
	accepted := int(at.GetCounts().GetAccepted())

	p := b.open(t, r.origin+"/#chances/van", 1440, 900, true)
	p.await("two rows", "document.querySelectorAll('a.row').length === 2")
	if names := eval[[]string](p, "[...document.querySelectorAll('.name')].map(e => e.textContent)"); !strings.Contains(strings.Join(names, " "), hostile) || eval[string](p, "document.title") != "Leadline" {
		t.Errorf("rows %q, title %q", names, eval[string](p, "document.title"))
	}
	p.says(".legend", "probability per m")

	// A vehicle that nobody has heard of, and one that no address can name, in the address.
	for address, words := range map[string]string{
		"#now/%3Cimg%20src%3Dx%20onerror%3D%22document.title%3D1%22%3E": "No vehicle <img src=x onerror=\"document.title=1\"> is here yet.",
		"#chances/nobody": "No vehicle nobody is here yet.",
	} {
		eval[any](p, fmt.Sprintf("location.hash = %q", address))
		p.says("main .side", words)
		eval[any](p, "location.hash = '#chances/%E0%A4%A'")
		p.await("what was chosen stays", "document.querySelector('main.chances')")
	}
	p.click("document.getElementById('row-van')")
	p.says("main .side h2", "van")
	p.says(".legend", "probability per m")

	// A chance, by keyboard.
	lon, lat := math.Round(at.GetMean().GetLon()*1e6)/1e6, math.Round(at.GetMean().GetLat()*1e6)/1e6
	p.tabTo("document.querySelector('[name=place]')")
	p.write(fmt.Sprintf("%.6f, %.6f", lat, lon))
	p.press("Enter")
	p.says("#inside-answer", "within 25")
	frame := w.maps[0].Space.Frame()
	middle := frame.Forward(geo.FromDegrees(lon, lat))
	var ring []geo.LonLat
	for i := range 48 {
		s, c := math.Sincos(2 * math.Pi * float64(i) / 48)
		ring = append(ring, frame.Inverse(middle.Add(geo.Point{E: 25 * c, N: 25 * s})))
	}
	within := r.where(&leadlinev1.WhereRequest{Vehicles: []string{"van"}, Area: wire.FromPolygon([][]geo.LonLat{ring}), IntegrityRisk: proto.Float64(0.01)}, accepted)
	var said float64
	if _, err := fmt.Sscanf(p.text("#inside-answer b"), "%f", &said); err != nil || math.Abs(said-100*within.GetAreaProbability()) > 0.6 {
		t.Errorf("the page says %q, the server has %v", p.text("#inside-answer"), within.GetAreaProbability())
	}

	// A risk, by mouse, and another by keyboard.
	protects := func(risk string, of *leadlinev1.Protection) {
		t.Helper()
		p.says("#protection-answer", "a risk of "+risk+",")
		var metres float64
		if _, err := fmt.Sscanf(strings.ReplaceAll(p.text("#protection-answer b"), "\u00a0", " "), "%f m", &metres); err != nil || math.Abs(metres-of.GetRadiusM()) > 0.06*metres {
			t.Errorf("the page says %q, the server has %v", p.text("#protection-answer"), of)
		}
	}
	box := "document.querySelector('[aria-labelledby=risk] select')"
	p.chooseByMouse(box, "0.001")
	protects("0.001", r.where(&leadlinev1.WhereRequest{Vehicles: []string{"van"}, IntegrityRisk: proto.Float64(0.001)}, accepted).GetProtection())
	p.chooseByKeys(box, "0.01")
	protects("0.01", within.GetProtection())
	p.looks("chances")
	p.audit("chances, dark")

	// A sighting, by keyboard: a sure one elsewhere, which is impossible.
	p.tabTo("document.querySelector('[name=road]')")
	p.write("Dune Lane")
	p.tabTo("document.querySelector('[name=mistaken]')")
	p.write("0")
	p.tabTo("document.querySelector('[name=who]')")
	p.write("Ada")
	p.press("Enter")
	p.says("#sighting-answer", "Entered.")
	if got := r.recent("van", saidBy("Ada")).GetMeasurement().GetMeasurement().GetSighting(); got.GetRoad() != "Dune Lane" || got.GetMistaken() != 0 {
		t.Errorf("the server has %v", got)
	}
	if got := r.where(ask, accepted+1); got.GetStatus() != leadlinev1.Status_STATUS_CONTRADICTED || len(got.GetAlarms()) == 0 {
		t.Errorf("after it the server has %v, %v", got.GetStatus(), got.GetAlarms())
	}

	// The alarm, by mouse.
	p.click("document.querySelector('nav a[href^=\"#alarms\"]')")
	p.says("main", "impossible everywhere")
	p.audit("alarms, dark")
	p.click("[...document.querySelectorAll('button')].find(e => e.innerText === 'I have seen it')")
	p.says("tbody", "open, seen")
	p.looks("alarms")
	// The other one, by keyboard.
	p.tabTo("[...document.querySelectorAll('tbody button')].find(e => e.innerText === 'I have seen it')")
	p.press("Enter")
	p.await("both are seen", "document.querySelectorAll('tbody tr.seen').length === 2")
	st, err := r.calls.Follow(t.Context(), &leadlinev1.FollowRequest{Alarms: true})
	if err != nil {
		t.Fatal(err)
	}
	for {
		m, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if a := m.GetAlarm(); a != nil && a.GetSeenBy() != "" {
			if a.GetSeenBy() != "Ada" || a.GetVehicle() != "van" {
				t.Errorf("the server has %v", a)
			}
			break
		}
	}

	// The maps, by mouse.
	p.click("document.querySelector('nav a[href^=\"#maps\"]')")
	p.says("main", w.maps[0].Space.Fingerprint())
	p.click("[...document.querySelectorAll('button')].find(e => e.innerText === 'Check it' && e.ariaLabel.includes('quillmere'))")
	p.says(".cards", "strongly connected")
	p.audit("maps, dark")
	p.looks("server")

	// A suite's text, by mouse, and another's by keyboard.
	for i, name := range []string{"survey-craft", "truck"} {
		suite, err := r.calls.DescribeSuite(t.Context(), &leadlinev1.DescribeSuiteRequest{Suite: name})
		if err != nil {
			t.Fatal(err)
		}
		heading := fmt.Sprintf("[...document.querySelectorAll('summary')].find(e => e.innerText === %q)", name)
		if i == 0 {
			p.click(heading)
		} else {
			p.tabTo(heading)
			p.press("Enter")
		}
		p.await("the suite's text", fmt.Sprintf("document.querySelector('[aria-label=\"Suite %s\"]').checkVisibility() && document.querySelector('[aria-label=\"Suite %[1]s\"]').textContent === %q", name, suite.GetYaml()))
	}
	p.click("document.querySelector('nav a[href^=\"#now\"]')")
	p.says("main .side", "Last measurements")
	p.audit("now, dark")
	p.looks("now")
	p.clean(r.origin)

	// The server goes, and another comes.
	r.stop()
	p.says(".connection", "The server does not answer. Trying again.")
	r = serve(t, r.address)
	p.says(".list", "The server does not know this vehicle any more")
	p.says(".connection", "Live.")
	p.clean(r.origin, "net::ERR_")
}
