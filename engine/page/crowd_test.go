package page_test

import (
	"fmt"
	"math"
	"testing"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestCrowd has two hundred vehicles report at once under an open page. It then
// says of each what the server says, with the one on top whose driver was seen
// elsewhere, is gone through by keyboard, and draws a belief over the whole town meanwhile.
// How long the page takes is logged.
func TestCrowd(t *testing.T) {
	const vehicles, seconds = 200, 2
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	w, _ := invented()
	p := b.open(t, r.origin+"/#now/wide", 1440, 900, false)
	p.says(".list", "No vehicle is here yet")

	wide := r.open(w.van, "wide", nil)
	r.send(wide, upTo(w.van, 10))
	p.await("the belief over the town", "document.querySelector('.legend')?.innerText.includes('probability')")
	// The longest that the page let nothing else happen.
	eval[any](p, "globalThis.longest = 0; new PerformanceObserver(l => { for (const e of l.getEntries()) longest = Math.max(longest, e.duration) }).observe({type: 'longtask'})")
	name := func(i int) string { return fmt.Sprintf("van-%03d", i) }
	feeds := make([]*client.Feed, vehicles)
	for i := range feeds {
		feeds[i] = r.open(w.van, name(i), nearStart(w.van))
	}
	sent := 0
	for s := 1; s <= seconds; s++ {
		evs := upTo(w.van, float64(s))
		for _, f := range feeds {
			r.send(f, evs[sent:])
		}
		sent = len(evs)
	}
	const poor = 113
	r.where(&leadlinev1.WhereRequest{Vehicles: []string{name(poor)}}, sent-4)
	if _, err := r.calls.AddSighting(t.Context(), &leadlinev1.AddSightingRequest{Vehicle: name(poor), Sighting: &leadlinev1.Sighting{Who: "Ada", Place: &leadlinev1.Sighting_Road{Road: "Dune Lane"}}}); err != nil {
		t.Fatal(err)
	}
	p.await("the one that was seen elsewhere on top", fmt.Sprintf("document.querySelector('a.row')?.id === 'row-%s'", name(poor)))
	p.await("a row for each", fmt.Sprintf("document.querySelectorAll('a.row').length === %d", vehicles+1))

	for i := range vehicles {
		at := r.where(&leadlinev1.WhereRequest{Vehicles: []string{name(i)}}, sent)
		want := at.GetRadii().GetRadius95M()
		if i == poor { // may be lost, so that it has no radius
			continue
		}
		radius := fmt.Sprintf("parseFloat(document.querySelector('#row-%s .radius b')?.textContent)", name(i))
		p.await(fmt.Sprintf("%s within %.3g m", name(i), want), fmt.Sprintf("Math.abs(%s - %v) <= %v", radius, want, 0.501*math.Pow(10, math.Floor(math.Log10(want))-1))) // two figures
	}
	if got := eval[[]string](p, "[...document.querySelectorAll('a.row.worst')].map(e => e.id)"); len(got) != 1 || got[0] != "row-"+name(poor) {
		t.Errorf("the page worries most about %q", got)
	}
	p.tabTo("document.querySelector('a.row')")
	for i := 0; !eval[bool](p, "document.activeElement === [...document.querySelectorAll('a.row')].at(-1)"); i++ {
		if i > 2*vehicles { // rows that change places meanwhile take the focus along
			t.Fatal("the arrow keys do not reach the last row")
		}
		p.press("ArrowDown")
	}
	p.press("Enter")
	p.await("it is chosen", "document.activeElement.getAttribute('aria-current') === 'true'")
	p.click("document.getElementById('row-wide')")
	p.says("main .side h2", "wide")
	p.await("the belief over the town", "document.querySelector('.legend')?.innerText.includes('probability')")
	p.shoot("crowd-light")
	p.clean(r.origin)
	took := eval[map[string]float64](p, "import(document.querySelector('script[type=module]').src).then(m => m.took)")
	t.Logf("first paint after %.0f ms; longest busy %.0f ms; the belief placed in %.1f ms, painted in %.1f ms",
		eval[float64](p, "performance.getEntriesByName('first-contentful-paint')[0].startTime"), eval[float64](p, "longest"), took["place"], took["paint"])
}
