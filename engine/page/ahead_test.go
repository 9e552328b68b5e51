package page_test

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// TestAhead has a route forecast, of a file by mouse and drawn by keyboard, and
// compares with what the server says; a file that is too large, and one that is
// none, are a sentence each.
func TestAhead(t *testing.T) {
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	w, _ := invented()
	bay := w.maps[1].Name
	p := b.open(t, r.origin+"/#ahead", 1440, 900, false)
	const mapBox, suiteBox = "document.querySelector('[name=map]')", "document.querySelector('[name=suite]')"
	load := func(name, content string) {
		t.Helper()
		eval[any](p, fmt.Sprintf("(() => { const d = new DataTransfer(); d.items.add(new File([%s], %q)); const f = document.querySelector('[name=route]'); f.files = d.files; f.dispatchEvent(new Event('change', {bubbles: true})); })()", content, name))
	}
	p.await("the maps", fmt.Sprintf("[...document.querySelectorAll('[name=map] option')].some(o => o.value === %q)", bay))
	p.chooseByMouse(mapBox, "open-sea")
	p.chooseByMouse(mapBox, bay)
	p.chooseByMouse(suiteBox, "truck")
	p.chooseByMouse(suiteBox, "survey-craft")
	p.says(".legend", "height")

	large := filepath.Join(t.TempDir(), "<b>large.geojson")
	if err := os.WriteFile(large, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	if err := os.Truncate(large, 50e6); err != nil {
		t.Fatal(err)
	}
	load("good.geojson", `'{"type": "LineString", "coordinates": [[-29.995, 45.008], [-29.985, 45.020]]}'`)
	p.says(".hint", "good.geojson")
	p.drop("main .side form", large)
	p.says("#ahead-trouble", "The file <b>large.geojson has 47.7 MiB, and a route at most 2")
	p.says(".hint", "good.geojson")
	load("wrong.geojson", `"[1, 2]"`)
	p.says(".hint", "wrong.geojson")
	p.click("[...document.querySelectorAll('button')].find(e => e.innerText === 'Forecast')")
	p.says("#ahead-trouble", "neither GeoJSON nor GPX")

	line := `{"type": "LineString", "coordinates": [[-29.995, 45.008], [-29.985, 45.020], [-29.970, 45.012]]}`
	stream, err := r.calls.Forecast(t.Context(), &leadlinev1.ForecastRequest{
		Map: bay, Suite: "survey-craft", SpeedMps: 10, LimitM: proto.Float64(12), NoAmbiguity: true, Route: &leadlinev1.ForecastRequest_RouteFile{RouteFile: []byte(line)},
	})
	if err != nil {
		t.Fatal(err)
	}
	var want *leadlinev1.Forecast
	for want == nil {
		m, err := stream.Recv()
		if err != nil {
			t.Fatal(err)
		}
		want = m.GetForecast()
	}
	load("bay.geojson", fmt.Sprintf("%q", line))
	p.tabTo("document.querySelector('[name=limit]')")
	p.write("12")
	p.click("[...document.querySelectorAll('input[type=checkbox]')].at(-1)")
	p.click("[...document.querySelectorAll('button')].find(e => e.innerText === 'Forecast')")
	p.says("#ahead-answer", "95 % within")
	var long, median, worst float64
	if _, err := fmt.Sscanf(strings.ReplaceAll(p.text("#ahead-answer"), "\u00a0", " "), "%f m in 5 min: 95 %% within %f m on half of the way, %f m at worst", &long, &median, &worst); err != nil ||
		math.Abs(long-want.GetLengthM()) > 5 || math.Abs(median-want.GetMedianRadius95M()) > 0.5 || math.Abs(worst-want.GetWorstRadius95M()) > 0.5 {
		t.Errorf("the page says %q, the server has %v m, %v and %v m: %v", p.text("#ahead-answer"), want.GetLengthM(), want.GetMedianRadius95M(), want.GetWorstRadius95M(), err)
	}
	if rows := eval[int](p, "document.querySelectorAll('#weak tbody tr').length"); rows != len(want.GetWeak()) || rows == 0 {
		t.Errorf("the page lists %d weak stretches, the server %d", rows, len(want.GetWeak()))
	}
	p.click("document.querySelector('#weak button')")

	// Distances and speeds in nautical units, by mouse, and in metric ones again, by keyboard.
	const units = "document.querySelector('header select')"
	p.chooseByMouse(units, "nautical")
	p.says("#ahead-answer", "NM")
	if _, err := fmt.Sscanf(strings.ReplaceAll(p.text("#ahead-answer"), "\u00a0", " "), "%f NM", &long); err != nil || math.Abs(long-want.GetLengthM()/1852) > 0.006*long {
		t.Errorf("the page says %q, the server has %v m: %v", p.text("#ahead-answer"), want.GetLengthM(), err)
	}
	knots := eval[float64](p, "document.querySelector('[name=speed]').valueAsNumber")
	p.chooseByKeys(units, "metric")
	p.await("metric units", "document.querySelector('#ahead-answer').innerText.includes('\u00a0m in')")
	if kmh := eval[float64](p, "document.querySelector('[name=speed]').valueAsNumber"); math.Abs(knots*1.852-kmh) > 0.006*kmh || math.Abs(kmh-36) > 0.2 {
		t.Errorf("a speed of %v kn and of %v km/h, the server was asked for 36 km/h", knots, kmh)
	}
	p.audit("ahead")
	p.looks("ahead")

	// The same by keyboard: on another map and back, and a route of two points.
	p.chooseByKeys(mapBox, w.maps[2].Name)
	p.chooseByKeys(mapBox, bay)
	p.chooseByKeys(suiteBox, "truck")
	p.chooseByKeys(suiteBox, "survey-craft")
	p.tabTo("[...document.querySelectorAll('button')].find(e => e.innerText === 'Draw the route')")
	p.press("Enter")
	eval[any](p, "document.querySelector('.ground').focus()")
	p.press(" ", "ArrowRight", "ArrowRight", " ")
	p.says(".hint", "2 so far")
	p.tabTo("[...document.querySelectorAll('button')].find(e => e.innerText === 'Forecast')")
	p.press("Enter")
	p.says("#ahead-answer", "95 % within")
	p.do("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{{"name": "prefers-color-scheme", "value": "dark"}}}, nil)
	p.resize(390, 844)
	p.await("a narrow map", "document.querySelector('.map').clientWidth < 400")
	p.shoot("ahead-drawn-narrow-dark")
	p.clean(r.origin)
}
