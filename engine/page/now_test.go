package page_test

import (
	"testing"
	"time"
)

// TestNow proves that the page shows every vehicle, follows the one that is
// chosen, complains of nothing and asks nobody but its server.
func TestNow(t *testing.T) {
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	w, _ := invented()
	lost := r.open(w.van, "van-anywhere", nil)
	r.send(lost, upTo(w.van, 40))
	craft := r.open(w.craft, "craft", nil)
	r.send(craft, upTo(w.craft, 300))
	van := r.open(w.van, "van", nearStart(w.van))
	r.stream(van, w.van.Events)

	began := time.Now()
	p := b.open(t, r.origin+"/", 1440, 900, false)
	// A chart has its lines as soon as it is there, however busy the page is.
	eval[any](p, `new MutationObserver(() => { for (const f of document.querySelectorAll(".plot")) if (!f.querySelector("canvas")) console.error("a chart without lines"); }).observe(document, {subtree: true, childList: true})`)
	p.await("three rows", "document.querySelectorAll('a.row').length === 3")
	p.await("the first paint", "performance.getEntriesByName('first-contentful-paint').length")
	// What the page takes to be there, of the processor: that does not depend on what else the
	// machine does. Whatever came after the first paint is counted, too.
	worked := p.threadMs()
	t.Logf("three rows after %v, first paint after %.0f ms; %.0f ms of the processor", time.Since(began), eval[float64](p, "performance.getEntriesByName('first-contentful-paint')[0].startTime"), worked)
	if worked > 1000 {
		t.Errorf("the page works for %.0f ms before it is there, 1000 are allowed", worked)
	}
	// A row that is not drawn yet (content-visibility) has no innerText.
	p.await("a recording is said to be one", "document.querySelector('#row-van-anywhere .say')?.textContent.includes('Its times are of 2026‑01‑01.')")
	p.says(".list .hint", "a recording, or a wrong clock")
	p.await("the map", "document.querySelector('.legend')")
	p.await("figures over time", "document.querySelectorAll('.plot canvas').length === 3")
	p.shoot("now-light")
	p.click("document.getElementById('row-van')")
	p.says("main .side h2", "van ")
	p.await("the van's figures", "document.querySelector('.plot [role=img]')")
	// Each update changes what a figure says.
	p.await("five updates a second", `new Promise(done => {
		let n = 0;
		const seen = new MutationObserver(all => { if (all.some(m => m.target.closest('.plot'))) n++; });
		seen.observe(document.querySelector('.side'), {subtree: true, attributes: true, attributeFilter: ['aria-label']});
		setTimeout(() => { seen.disconnect(); done(n >= 10); }, 2000);
	})`)
	p.clean(r.origin)
	p.click("document.getElementById('row-craft')")
	p.says("main .side h2", "craft")
	p.await("the legend", "document.querySelector('.legend')?.innerText.includes('height')")
	p.await("figures over time", "document.querySelectorAll('.plot canvas').length === 2")
	// It ends far within its limit, and is no less one that is located for that.
	p.await("the craft is located", "document.querySelector('#row-craft.good') && parseFloat(document.querySelector('#row-craft .radius b').innerText) < 50 / 6")
	p.shoot("now-craft-light")
	p.clean(r.origin)
}
