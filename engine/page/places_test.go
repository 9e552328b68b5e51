package page_test

import (
	"fmt"
	"math"
	"testing"

	"leadline/engine/geo"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestPlaces proves that a file of places is drawn, found by name from the keyboard,
// kept in the browser over a reload and forgotten; that a polygon asks for the
// probability that the server has of it; that markup in a name is text; and that a bad
// file is a sentence and leaves the places before.
func TestPlaces(t *testing.T) {
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	w, _ := invented()
	evs := upTo(w.van, 5)
	r.send(r.open(w.van, "van", nearStart(w.van)), evs)
	at := r.where(&leadlinev1.WhereRequest{Vehicles: []string{"van"}}, len(evs)-4).GetMean()
	p := b.open(t, r.origin+"/#chances/van", 1440, 900, false)
	load := func(name, content string) {
		t.Helper()
		eval[any](p, fmt.Sprintf("(() => { const d = new DataTransfer(); d.items.add(new File([%s], %q)); const f = document.querySelector('[name=places]'); f.files = d.files; f.dispatchEvent(new Event('change', {bubbles: true})); })()", content, name))
	}
	const hostile = `<img src=x onerror=document.title=1>`
	lon, lat := at.GetLon(), at.GetLat()
	near := [][2]float64{{lon, lat - 1e-4}, {lon + 1e-4, lat}, {lon, lat + 1e-4}, {lon - 1e-4, lat}}
	var ring []geo.LonLat
	for _, c := range near {
		ring = append(ring, geo.FromDegrees(c[0], c[1]))
	}
	text := fmt.Sprintf(`{"type":"FeatureCollection","features":[
		{"type":"Feature","properties":{"name":"Old Yard"},"geometry":{"type":"Polygon","coordinates":[[[%v,%v],[%v,%v],[%v,%v],[%v,%v],[%v,%v]]]}},
		{"type":"Feature","properties":{"name":%q},"geometry":{"type":"Point","coordinates":[%v,%v]}},
		{"type":"Feature","properties":null,"geometry":{"type":"LineString","coordinates":[[%v,%v],[%v,%v]]}}]}`,
		near[0][0], near[0][1], near[1][0], near[1][1], near[2][0], near[2][1], near[3][0], near[3][1], near[0][0], near[0][1],
		hostile, lon+0.002, lat, lon, lat, lon+0.002, lat)
	p.says(".legend", "probability per m")
	load("yards.geojson", fmt.Sprintf("%q", text))
	p.says(".legend", "places of yards.geojson")

	for name, c := range map[string][2]string{
		"large.geojson":   {"new Uint8Array(50e6)", "has 47.7 MiB, and places at most 4"},
		"text.geojson":    {`"{"`, "is no JSON"},
		"list.geojson":    {`"[1]"`, "is no GeoJSON"},
		"metres.geojson":  {`'{"type":"Point","coordinates":[500000,4]}'`, "has 500000, 4 in feature 1, which are no degrees"},
		"surface.geojson": {`'{"type":"TIN","coordinates":[]}'`, "has the geometry TIN"},
		"short.geojson":   {`'{"type":"LineString","coordinates":[[1,2]]}'`, "has 1 point in feature 1, where there must be 2 or more"},
		"empty.geojson":   {`'{"type":"FeatureCollection","features":[]}'`, "has no place in it"},
	} {
		load(name, c[0])
		p.says("#places-said", "The file "+name+" "+c[1])
		p.says(".legend", "places of yards.geojson")
	}
	load("yards.geojson", fmt.Sprintf("%q", text))
	p.await("nothing more is said of a bad file", "document.querySelector('#places-said').innerText === ''")

	p.tabTo("document.querySelector('input[name=place]')")
	p.write("old y")
	p.press("Enter")
	p.says("#inside-answer", "inside Old Yard")
	want := r.where(&leadlinev1.WhereRequest{Vehicles: []string{"van"}, Area: wire.FromPolygon([][]geo.LonLat{ring})}, 0).GetAreaProbability()
	var said float64
	if _, err := fmt.Sscanf(p.text("#inside-answer b"), "%f", &said); err != nil || math.Abs(said-100*want) > 0.6 {
		t.Errorf("the page says %q, the server has %v", p.text("#inside-answer"), want)
	}
	eval[any](p, "document.querySelector('input[name=place]').focus()")
	p.write(hostile)
	p.press("Enter")
	p.says("#inside-answer", "of "+hostile)
	p.audit("places")
	p.shoot("places-light")
	p.do("Page.reload", nil, nil)
	p.says(".legend", "places of yards.geojson")
	p.click("[...document.querySelectorAll('button')].find(e => e.innerText === 'Forget places')")
	p.await("they are forgotten", "!document.querySelector('.legend').innerText.includes('yards') && localStorage.getItem('leadline-places') === null")
	if title := eval[string](p, "document.title"); title != "Leadline" {
		t.Errorf("the title is %q", title)
	}
	p.clean(r.origin)
}
