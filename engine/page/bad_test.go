package page_test

import (
	"fmt"
	"sync/atomic"
	"testing"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/server"
)

// TestClocksAndTokens proves that clocks which disagree are a sentence, whichever is ahead, and
// that a token which ends under an open page is one, too: nothing that was shown is lost, and it
// goes on with another token.
func TestClocksAndTokens(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	access, token := issuing(t)
	var aheadNS atomic.Int64 // of the server's clock, before the vehicle's
	var at atomic.Int64      // the vehicle's
	at.Store(int64(w.van.Time))
	r := serve(t, "127.0.0.1:0", func(c *server.Config) {
		c.Access = access
		c.Now = func() time.Time { return time.Unix(0, at.Load()+aheadNS.Load()) }
	})
	r.shown = map[string]string{"van": token("van", time.Hour, "vehicle")}
	f := r.open(w.van, "van", nearStart(w.van))
	sent := 0
	upto := func(seconds float64) {
		t.Helper()
		evs := upTo(w.van, seconds)
		at.Store(int64(w.van.Time + sensor.Time(seconds*1e9)))
		r.send(f, evs[sent:])
		sent = len(evs)
	}
	aheadNS.Store(-int64(20 * time.Minute))
	upto(2)

	// A server takes a token for 10 s longer than it lasts, since clocks may differ.
	p := b.open(t, r.origin+"/#now/van", 1440, 900, false)
	ends := time.Now().Add(5 * time.Second)
	p.show(token("Ada", time.Until(ends)-10*time.Second, "dispatcher"))
	p.says("#row-van .say", "Its clock is 20 min ahead of the server's.")
	p.says("main .side", "Its clock is 20 min ahead of the server's.")
	aheadNS.Store(int64(30 * time.Minute))
	for s := 3.0; !eval[bool](p, "document.querySelector('#row-van .say').innerText.includes('Its news is 30 min old when it comes: it is delayed, or its clock is behind')"); s++ {
		if s > 20 {
			t.Fatalf("the row says %q", p.text("#row-van .say"))
		}
		upto(s)
		time.Sleep(150 * time.Millisecond)
	}
	if left := time.Until(ends); left < 0 {
		t.Logf("the token ended %v too soon to be seen open", -left)
	}
	p.says(".identity", "Your identity has expired or is not known here: enter a new token.")
	p.says(".connection", "old.")
	p.await("what was shown stays", "document.querySelector('#row-van .radius b') && document.querySelector('main .side .pairs')")
	p.audit("a token that has ended")
	p.shoot("expired-light")
	p.show(token("Ada", time.Hour, "dispatcher"))
	p.says(".connection", "Live.")
	p.await("nothing is asked any more", "!document.querySelector('.identity')")
	stamp := eval[string](p, "document.querySelector('.pairs dd').innerText")
	upto(24)
	p.await("it goes on", fmt.Sprintf("document.querySelector('.pairs dd').innerText !== %q", stamp))

	// Whoever comes now knows of no news, but of old ones.
	q := b.open(t, r.origin+"/", 1440, 900, false)
	q.show(token("Ada", time.Hour, "dispatcher"))
	q.says("#row-van .say", "Silent for 30 min.")
	q.clean(r.origin, "status of 401")
	p.clean(r.origin, "status of 401", "net::ERR_")
}
