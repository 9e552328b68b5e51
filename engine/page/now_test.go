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
	p.await("three rows", "document.querySelectorAll('a.row').length === 3")
	t.Logf("three rows after %v", time.Since(began))
	p.await("the map", "document.querySelector('.legend')")
	time.Sleep(time.Second)
	p.shoot("now-light")
	p.clean(r.origin)
	p.click("document.getElementById('row-craft')")
	p.says("main .side h2", "craft")
	p.await("the legend", "document.querySelector('.legend')?.innerText.includes('height')")
	time.Sleep(time.Second)
	p.shoot("now-craft-light")
	p.click("document.getElementById('row-van-anywhere')")
	p.says("main .side h2", "van-anywhere")
	time.Sleep(time.Second)
	p.shoot("now-anywhere-light")
	p.clean(r.origin)
}
