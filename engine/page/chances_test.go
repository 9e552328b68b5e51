package page_test

import (
	"encoding/json"
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// copied is what a button gives away: to a clipboard that the test holds, or that refuses it, so
// that the page shows it.
func (p *tab) copied(words string, press func(element string), refuse bool) string {
	p.t.Helper()
	eval[any](p, fmt.Sprintf("globalThis.given = undefined; navigator.clipboard.writeText = async t => { if (%v) throw new Error('not allowed'); globalThis.given = t; }; 0", refuse))
	press(fmt.Sprintf("[...document.querySelectorAll('.copy button')].find(e => e.innerText === %q)", words))
	given := "globalThis.given"
	if refuse {
		given = fmt.Sprintf("document.querySelector('textarea[aria-label=%q]')?.value", words)
	}
	p.await("what is copied", given)
	return eval[string](p, given)
}

// TestChances asks for the probability of places and areas that are pointed at and drawn, by mouse
// and by keyboard, enters a sighting in one, and compares with the server what is copied: the
// area's probability, a posterior, coordinates in each form. A satellite fix is marked; units change.
func TestChances(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	evs := upTo(w.van, 5)
	f := r.open(w.van, "van", nearStart(w.van))
	r.send(f, evs)
	ask := &leadlinev1.WhereRequest{Vehicles: []string{"van"}}
	at := r.where(ask, len(evs)-4)

	p := b.open(t, r.origin+"/#chances/van", 1440, 900, false)
	p.says(".legend", "probability per m")
	button := func(words string) string {
		return fmt.Sprintf("[...document.querySelectorAll('main button')].find(e => e.innerText === %q)", words)
	}
	byMouse := func(element string) { p.click(element) }
	byKeys := func(element string) {
		p.tabTo(element)
		p.press("Enter")
	}
	middle := eval[[2]float64](p, "(() => { const r = document.querySelector('.ground').getBoundingClientRect(); return [r.x + r.width / 2, r.y + r.height / 2]; })()")
	said := func() (percent float64) {
		t.Helper()
		if _, err := fmt.Sscanf(p.text("#inside-answer b"), "%f", &percent); err != nil {
			t.Fatalf("%q: %v", p.text("#inside-answer"), err)
		}
		return percent
	}

	// A place, by mouse.
	byMouse(button("Point at a place"))
	p.clickAt(middle[0]+7, middle[1]-5)
	p.says("#inside-answer", "within 25")
	var lat, lon float64
	if _, err := fmt.Sscanf(eval[string](p, "document.querySelector('[name=place]').value"), "%f, %f", &lat, &lon); err != nil {
		t.Fatal(err)
	}
	frame := w.maps[0].Space.Frame()
	spot := frame.Forward(geo.FromDegrees(lon, lat))
	var ring []geo.LonLat
	for i := range 48 {
		s, c := math.Sincos(2 * math.Pi * float64(i) / 48)
		ring = append(ring, frame.Inverse(spot.Add(geo.Point{E: 25 * c, N: 25 * s})))
	}
	inside := r.where(&leadlinev1.WhereRequest{Vehicles: []string{"van"}, Area: wire.FromPolygon([][]geo.LonLat{ring})}, 0).GetAreaProbability()
	if math.Abs(said()-100*inside) > 0.6 {
		t.Errorf("the page says %v %%, the server has %v", said(), inside)
	}

	// An area, by mouse and by keyboard: as it is copied, so the server has it.
	drawn := func(press func(string)) {
		t.Helper()
		p.says("#inside-answer", "inside the area")
		var got struct {
			Features []struct {
				Geometry   struct{ Coordinates json.RawMessage }
				Properties struct {
					What        string
					Probability float64
				}
			}
		}
		if err := json.Unmarshal([]byte(p.copied("Copy as GeoJSON", press, false)), &got); err != nil {
			t.Fatal(err)
		}
		last := got.Features[len(got.Features)-1]
		var rings [][][2]float64
		if err := json.Unmarshal(last.Geometry.Coordinates, &rings); err != nil || last.Properties.What != "asked area" {
			t.Fatalf("%+v: %v", last, err)
		}
		var ring []geo.LonLat
		for _, c := range rings[0][:len(rings[0])-1] {
			ring = append(ring, geo.FromDegrees(c[0], c[1]))
		}
		want := r.where(&leadlinev1.WhereRequest{Vehicles: []string{"van"}, Area: wire.FromPolygon([][]geo.LonLat{ring})}, 0).GetAreaProbability()
		if want < 0.05 || want > 0.999 || math.Abs(last.Properties.Probability-want) > 1e-9 || math.Abs(said()-100*want) > 0.6 {
			t.Errorf("of %d corners the page has %v, says %v %%, the server has %v", len(ring), last.Properties.Probability, said(), want)
		}
	}
	byMouse(button("Draw an area"))
	for _, d := range [][2]float64{{-40, -90}, {60, -90}, {60, 5}, {-40, 5}} {
		p.clickAt(middle[0]+d[0], middle[1]+d[1])
	}
	byMouse(button("Close the area"))
	drawn(byMouse)
	byKeys(button("Draw an area"))
	byKeys(button("Draw an area")) // put away, and taken up again
	eval[any](p, "document.querySelector('.ground').focus()")
	p.press(" ", "ArrowUp", " ", "ArrowLeft", " ", "Enter")
	drawn(byKeys)

	// Somebody has seen it in that area, by mouse.
	p.click("document.querySelector('[name=who]')")
	p.write("Ada")
	byMouse(button("Enter the sighting"))
	p.says("#sighting-answer", "Entered. The 95 % radius was")
	if got := r.recent("van", saidBy("Ada")).GetMeasurement().GetMeasurement().GetSighting(); len(got.GetArea().GetRings()) != 1 || math.Abs(got.GetMistaken()-0.1) > 1e-9 {
		t.Errorf("the server has %v", got)
	}
	after := r.where(ask, int(at.GetCounts().GetAccepted())+1)
	var was, is float64
	if _, err := fmt.Sscanf(strings.ReplaceAll(p.text("#sighting-answer"), "\u00a0", " "), "Entered. The 95 %% radius was %f m and is %f m.", &was, &is); err != nil || math.Abs(was-at.GetRadii().GetRadius95M()) > 0.6 || math.Abs(is-after.GetRadii().GetRadius95M()) > 0.6 {
		t.Errorf("the page says %q, the server had %v and has %v", p.text("#sighting-answer"), at.GetRadii(), after.GetRadii())
	}

	// What is copied, and coordinates in each form.
	var same leadlinev1.Posterior
	p.await("the page has it", fmt.Sprintf("document.querySelector('#coordinates-answer').innerText === '%.6f, %.6f'", after.GetMean().GetLat(), after.GetMean().GetLon()))
	if err := protojson.Unmarshal([]byte(p.copied("Copy as JSON", byMouse, true)), &same); err != nil || same.GetVehicle() != "van" || math.Abs(same.GetMean().GetLon()-after.GetMean().GetLon()) > 1e-9 || same.GetCounts().GetAccepted() != after.GetCounts().GetAccepted() {
		t.Errorf("as JSON %v: %v", &same, err)
	}
	if got, want := p.copied("Copy the command", byKeys, false), "leadline where van --at "+r.address+" --json"; got != want {
		t.Errorf("the command is %q, want %q", got, want)
	}
	byMouse(button("degrees and minutes"))
	parts := regexp.MustCompile(`^(\d\d)° ([\d.]+)′ N (\d\d\d)° ([\d.]+)′ W$`).FindStringSubmatch(p.text("#coordinates-answer"))
	if parts == nil {
		t.Fatalf("in minutes %q", p.text("#coordinates-answer"))
	}
	number := func(s string) float64 { v, _ := strconv.ParseFloat(s, 64); return v }
	if la, lo := number(parts[1])+number(parts[2])/60, -number(parts[3])-number(parts[4])/60; math.Abs(la-after.GetMean().GetLat()) > 1e-5 || math.Abs(lo-after.GetMean().GetLon()) > 1e-5 {
		t.Errorf("in minutes %q, the server has %v", p.text("#coordinates-answer"), after.GetMean())
	}
	byKeys(button("UTM"))
	// The zones meet at 30° W.
	zone, meridian, band := 26, -27.0, "T"
	if after.GetMean().GetLon() < -30 {
		zone, meridian = 25, -33
	}
	if after.GetMean().GetLat() < 40 || after.GetMean().GetLat() >= 48 {
		t.Fatal("the town has moved")
	}
	m, err := wire.Position(after.GetMean())
	if err != nil {
		t.Fatal(err)
	}
	grid := geo.NewTransverseMercator(geo.WGS84, geo.FromDegrees(meridian, 0), 0.9996, 500_000, 0).Forward(m)
	if got, want := p.text("#coordinates-answer"), fmt.Sprintf("%d%s %.0f E %.0f N", zone, band, grid.E, grid.N); got != want {
		t.Errorf("in UTM %q, want %q", got, want)
	}

	// A satellite fix is marked as one; then in nautical units, by keyboard.
	p.click("document.querySelector('nav a[href^=\"#now\"]')")
	last := evs[len(evs)-1]
	r.send(f, []sensor.Event{{Time: last.Time + 1e8, Sensor: "gnss", Number: 1, Measurement: sensor.Fix{Position: m, SigmaM: 5}}})
	r.send(f, upTo(w.van, 5.4)[len(evs):])
	p.says(".legend", "satellite fix")
	p.says(".last", "gnss")
	p.says("main .side", "km/h")
	p.tabTo("document.querySelector('header select')")
	p.press("ArrowDown")
	p.says("main .side", "kn ±")
	p.chooseByMouse("document.querySelector('header select')", "metric")
	p.says("main .side", "km/h ±")
	p.chooseByMouse("document.querySelector('header select')", "nautical")
	p.says("main .side", "kn ±")
	now := r.where(ask, 0)
	var knots float64
	if _, err := fmt.Sscanf(strings.ReplaceAll(eval[string](p, "[...document.querySelectorAll('.pairs dt')].find(e => e.innerText === 'Speed').nextElementSibling.innerText"), "\u00a0", " "), "%f kn", &knots); err != nil || math.Abs(knots-now.GetSpeed().GetMps()*3600/1852) > 0.005*knots+0.001 {
		t.Errorf("the page says %v kn, the server has %v: %v", knots, now.GetSpeed(), err)
	}

	// A way that ends before it begins, and what comes much too late, are refused, which is shown
	// as the server says it.
	unusable := last
	unusable.Time -= 4e9
	late := sensor.Event{Time: w.van.Time - 3600e9, Sensor: "gnss", Number: 2, Measurement: sensor.Fix{Position: m, SigmaM: 5}}
	r.send(f, append([]sensor.Event{unusable, late}, upTo(w.van, 5.6)[len(upTo(w.van, 5.4)):]...)) // news comes with a posterior
	var whys []string
	for _, ev := range []sensor.Event{unusable, late} {
		at := wire.FromEvent(ev).GetTime().AsTime()
		m := r.recent("van", func(m *leadlinev1.RecentMeasurement) bool {
			return m.GetRefusal() != nil && m.GetMeasurement().GetTime().AsTime().Equal(at) && m.GetMeasurement().GetSensor() == ev.Sensor
		})
		whys = append(whys, m.GetRefusal().GetDetail())
	}
	t.Logf("refused: %q", whys)
	for _, why := range whys {
		p.await("why it is refused", fmt.Sprintf("[...document.querySelectorAll('.last tr.refused strong')].some(e => e.textContent.trim() === 'Refused: ' + %q)", why))
	}
	if refused := r.where(ask, 0).GetCounts().GetRefused(); refused != 2 {
		t.Errorf("the server has refused %d", refused)
	}
	p.says("main .side .pairs", " taken, 2 refused")
	p.audit("now, with a fix, in nautical units")
	p.shoot("now-fix-light")
	p.clean(r.origin)
}
