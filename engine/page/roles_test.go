package page_test

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"leadline/engine/server"
	"leadline/engine/server/identity"
	"leadline/fixtures/credentials"
	leadlinev1 "leadline/proto/leadline/v1"
)

// issuing is a server's access by tokens, and who issues those: for a name, for so long, with
// roles.
func issuing(t *testing.T) (*server.Access, func(name string, lasts time.Duration, roles ...string) string) {
	t.Helper()
	issuer := credentials.NewIssuer(t, "k")
	keys := filepath.Join(t.TempDir(), "keys.json")
	if err := os.WriteFile(keys, issuer.Keys(t), 0o600); err != nil {
		t.Fatal(err)
	}
	tokens, err := identity.NewTokens(identity.TokenConfig{Issuer: "https://issuer.example", Audience: "leadline", Keys: keys})
	if err != nil {
		t.Fatal(err)
	}
	return &server.Access{Tokens: tokens}, func(name string, lasts time.Duration, roles ...string) string {
		return issuer.Token(t, map[string]any{"iss": "https://issuer.example", "aud": "leadline", "sub": name, "exp": time.Now().Add(lasts).Unix(), "roles": roles})
	}
}

// show enters a token in the page by keyboard.
func (p *tab) show(token string) {
	p.t.Helper()
	p.await("the question for a token", "document.querySelector('[name=token]')")
	p.tabTo("document.querySelector('[name=token]')")
	p.write(token)
	p.press("Enter")
}

// TestEnding has drives ended from the page, by keyboard and by mouse, and compares with what the
// server then holds: by nobody without the role, by nobody who says no, of a drive that is watched.
// What the watcher has shown expires meanwhile.
func TestEnding(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	access, token := issuing(t)
	r := serve(t, "127.0.0.1:0", func(c *server.Config) { c.Access = access })
	r.shown = map[string]string{}
	w, _ := invented()
	for _, vehicle := range []string{"<b>craft</b>", "van"} {
		r.shown[vehicle] = token(vehicle, time.Hour, "vehicle")
		r.send(r.open(w.van, vehicle, nearStart(w.van)), upTo(w.van, 5))
	}
	keeper := token("Kay", time.Hour, "administrator")
	ended := func() (names []string) {
		t.Helper()
		resp, err := r.calls.ListVehicles(r.as(keeper), &leadlinev1.ListVehiclesRequest{})
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range resp.GetVehicles() {
			if v.GetEnded() {
				names = append(names, v.GetVehicle())
			}
		}
		return names
	}

	p := b.open(t, r.origin+"/#now/van", 1440, 900, false)
	p.says(".identity", "enter your token")
	late := p.hold("*/Trail")
	// A token that ends soon, but, however slow the machine, not before the vehicle's past is asked for.
	for lasts := 2 * time.Second; p.holds() == 0; lasts *= 2 {
		if lasts > patience {
			t.Fatal("the vehicle's past is not asked for")
		}
		p.show(token("Ada", lasts-10*time.Second, "dispatcher", "administrator")) // clocks may differ by 10 s
		p.await("the token is taken or refused", "!document.querySelector('.identity') || document.querySelector('.identity').innerText.includes('has expired')")
		p.says(".identity", "Your identity has expired or is not known here: enter a new token.")
	}
	// What was asked for while it was taken is answered after: that says nothing of now.
	late()
	p.await("it is answered", "document.querySelector('.plot') && new Promise(done => setTimeout(done, 100, true))")
	if !eval[bool](p, "!!document.querySelector('[name=token]')") {
		t.Error("an answer of before has put the question for a token away")
	}
	p.show(token("Ada", time.Hour, "dispatcher"))
	p.says(".connection", "Live.")

	// Without the role, by mouse.
	button := func(vehicle string) string {
		return fmt.Sprintf("[...document.querySelectorAll('button')].find(e => e.ariaLabel === 'End this drive: drive of %s')", vehicle)
	}
	answer := func(words string) string {
		return fmt.Sprintf("[...document.querySelectorAll('dialog button')].find(e => e.innerText === %q)", words)
	}
	p.click(button("van"))
	p.says("dialog", "End the drive “drive” of van?")
	p.audit("a question")
	p.shoot("ending-light")
	p.click(answer("End it"))
	p.says("#end-trouble", "Ending a drive needs the role administrator, which you have not.")
	if got := ended(); got != nil {
		t.Errorf("ended without the role: %q", got)
	}

	// With it, by keyboard, under the eyes of one who watches. Who is asked may say no, and has
	// the focus again.
	p.show(token("Ada", time.Hour, "dispatcher", "administrator"))
	p.await("the token is taken", "!document.querySelector('.identity')")
	p.tabTo(button("van"))
	p.press("Enter")
	p.await("the harmless answer has the focus", "document.activeElement === "+answer("Leave it"))
	p.press("Enter")
	p.await("the button has the focus again", "document.activeElement === "+button("van"))
	if got := ended(); got != nil {
		t.Errorf("ended though left: %q", got)
	}
	p.press("Enter")
	p.await("the harmless answer has the focus again", "document.activeElement === "+answer("Leave it"))
	p.tabTo(answer("End it"))
	p.press("Enter")
	p.says("#end-answer", fmt.Sprintf("The drive “drive” of van has ended: %d measurements taken, 0 refused,", len(upTo(w.van, 5))))
	p.says("main .side", "The drive has ended.")
	p.says("main .list", "ended")
	if got := ended(); !slices.Equal(got, []string{"van"}) {
		t.Errorf("the server has ended %q", got)
	}
	p.clean(r.origin, "status of 401", "status of 403")

	// By one who sees no positions, by mouse.
	p = b.open(t, r.origin+"/#maps", 1440, 900, true)
	p.show(keeper)
	p.says(".connection", "Positions are not shown.")
	p.says("#drives", "<b>craft</b>")
	p.click(button("<b>craft</b>"))
	p.audit("a question, dark")
	p.click(answer("End it"))
	p.says("#end-answer", "The drive “drive” of <b>craft</b> has ended:")
	p.await("the table says so", "[...document.querySelectorAll('#drives tbody tr')].every(e => e.innerText.includes('ended'))")
	if got := ended(); !slices.Equal(got, []string{"<b>craft</b>", "van"}) {
		t.Errorf("the server has ended %q", got)
	}
	p.click("document.querySelector('nav a[href^=\"#now\"]')")
	p.says(".list", "Seeing positions needs the role dispatcher or analyst, which you have not.")
	p.clean(r.origin, "status of 401", "status of 403")
}
