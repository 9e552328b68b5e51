package page_test

import (
	"bufio"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

// patience is how long a test waits for what the page should show.
const patience = 60 * time.Second

// browser is a Chromium that is told what to do over a pipe, by the DevTools
// protocol: messages of JSON that end in a zero byte.
type browser struct {
	to *os.File

	mu      sync.Mutex
	last    int
	answers map[int]chan answer
	tabs    map[string]*tab // by session
}

type answer struct {
	Result json.RawMessage `json:"result"`
	Error  *struct {
		Message string `json:"message"`
	} `json:"error"`
}

// startBrowser starts one until the test ends.
func startBrowser(t *testing.T) *browser {
	t.Helper()
	path, err := exec.LookPath("chromium")
	if err != nil {
		t.Skipf("no browser is here: install chromium (%v)", err)
	}
	in, to, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	from, out, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(path, "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--hide-scrollbars",
		"--disable-background-networking", "--disable-component-update", "--disable-sync", "--remote-debugging-pipe",
		"--user-data-dir="+t.TempDir(), "about:blank")
	cmd.ExtraFiles = []*os.File{in, out} // as 3 and 4
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	_, _ = in.Close(), out.Close()
	b := &browser{to: to, answers: map[int]chan answer{}, tabs: map[string]*tab{}}
	done := make(chan struct{})
	go func() {
		defer close(done)
		b.read(from)
	}()
	t.Cleanup(func() {
		_ = syscall.Kill(-cmd.Process.Pid, syscall.SIGKILL) // with its children
		_ = cmd.Wait()
		_, _ = to.Close(), from.Close()
		<-done
	})
	return b
}

// read takes in what the browser says until it ends.
func (b *browser) read(from *os.File) {
	r := bufio.NewReaderSize(from, 1<<20)
	for {
		text, err := r.ReadBytes(0)
		if err != nil {
			b.mu.Lock()
			for _, a := range b.answers {
				close(a)
			}
			b.answers = nil
			b.mu.Unlock()
			return
		}
		var m struct {
			ID        int             `json:"id"`
			Method    string          `json:"method"`
			SessionID string          `json:"sessionId"`
			Params    json.RawMessage `json:"params"`
			answer
		}
		if json.Unmarshal(text[:len(text)-1], &m) != nil {
			continue
		}
		b.mu.Lock()
		if a := b.answers[m.ID]; a != nil {
			a <- m.answer
			delete(b.answers, m.ID)
		} else if t := b.tabs[m.SessionID]; t != nil {
			t.hear(m.Method, m.Params)
		}
		b.mu.Unlock()
	}
}

// call has the browser do something in a session.
func (b *browser) call(session, method string, params any, result any) error {
	a := make(chan answer, 1)
	b.mu.Lock()
	if b.answers == nil {
		b.mu.Unlock()
		return errors.New("the browser has ended")
	}
	b.last++
	b.answers[b.last] = a
	message, err := json.Marshal(map[string]any{"id": b.last, "sessionId": session, "method": method, "params": params})
	if session == "" {
		message, err = json.Marshal(map[string]any{"id": b.last, "method": method, "params": params})
	}
	if err == nil {
		_, err = b.to.Write(append(message, 0))
	}
	b.mu.Unlock()
	if err != nil {
		return err
	}
	select {
	case got, ok := <-a:
		switch {
		case !ok:
			return errors.New("the browser has ended")
		case got.Error != nil:
			return fmt.Errorf("%s: %s", method, got.Error.Message)
		case result != nil:
			return json.Unmarshal(got.Result, result)
		}
		return nil
	case <-time.After(patience):
		return fmt.Errorf("%s: no answer", method)
	}
}

// tab is a page that is open. What it asks for and complains of is kept.
type tab struct {
	*browser
	t       *testing.T
	session string

	// Guarded by browser.mu.
	complaints []string
	requests   []string
	held       []string // answers that are not let through
}

func (p *tab) hear(method string, params json.RawMessage) {
	var m struct {
		Type             string
		Args             []struct{ Value, Description any }
		Entry            struct{ Level, Text, URL string }
		ExceptionDetails struct {
			Text      string
			Exception struct{ Description string }
		}
		Request   struct{ URL string }
		RequestID string
	}
	_ = json.Unmarshal(params, &m)
	switch {
	case method == "Runtime.exceptionThrown":
		p.complaints = append(p.complaints, m.ExceptionDetails.Text+" "+m.ExceptionDetails.Exception.Description)
	case method == "Runtime.consoleAPICalled" && (m.Type == "error" || m.Type == "warning" || m.Type == "assert"):
		p.complaints = append(p.complaints, fmt.Sprint(m.Type, m.Args))
	case method == "Log.entryAdded" && m.Entry.Level == "error":
		p.complaints = append(p.complaints, m.Entry.Text+" "+m.Entry.URL)
	case method == "Network.requestWillBeSent":
		p.requests = append(p.requests, m.Request.URL)
	case method == "Fetch.requestPaused":
		p.held = append(p.held, m.RequestID)
	}
}

// open opens a page in a window of a size, with scripts that run before its own.
func (b *browser) open(t *testing.T, url string, width, height int, dark bool, before ...string) *tab {
	t.Helper()
	var profile struct{ BrowserContextID string }
	var target struct{ TargetID string }
	var attached struct{ SessionID string }
	for _, c := range []struct {
		method string
		params func() any
		result any
	}{
		{"Target.createBrowserContext", func() any { return struct{}{} }, &profile}, // nothing is remembered from tab to tab
		{"Target.createTarget", func() any {
			return map[string]any{"url": "about:blank", "browserContextId": profile.BrowserContextID}
		}, &target},
		{"Target.attachToTarget", func() any { return map[string]any{"targetId": target.TargetID, "flatten": true} }, &attached},
	} {
		if err := b.call("", c.method, c.params(), c.result); err != nil {
			t.Fatal(err)
		}
	}
	p := &tab{browser: b, t: t, session: attached.SessionID}
	b.mu.Lock()
	b.tabs[p.session] = p
	b.mu.Unlock()
	for _, domain := range []string{"Runtime", "Log", "Network", "Page"} {
		p.do(domain+".enable", nil, nil)
	}
	p.do("Performance.enable", map[string]any{"timeDomain": "threadTicks"}, nil) // counts from here on
	scheme := "light"
	if dark {
		scheme = "dark"
	}
	p.do("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{{"name": "prefers-color-scheme", "value": scheme}}}, nil)
	p.resize(width, height)
	for _, script := range before {
		p.do("Page.addScriptToEvaluateOnNewDocument", map[string]any{"source": script}, nil)
	}
	p.do("Page.navigate", map[string]any{"url": url}, nil)
	t.Cleanup(func() { _ = b.call("", "Target.closeTarget", map[string]any{"targetId": target.TargetID}, nil) })
	return p
}

func (p *tab) resize(width, height int) {
	p.do("Emulation.setDeviceMetricsOverride", map[string]any{"width": width, "height": height, "deviceScaleFactor": 1, "mobile": false}, nil)
}

// do is call, which must succeed.
func (p *tab) do(method string, params any, result any) {
	p.t.Helper()
	if params == nil {
		params = struct{}{}
	}
	if err := p.call(p.session, method, params, result); err != nil {
		p.t.Fatal(err)
	}
}

// eval is what a JavaScript expression comes to, promises awaited.
func eval[T any](p *tab, expression string) (out T) {
	p.t.Helper()
	var r struct {
		Result           struct{ Value json.RawMessage }
		ExceptionDetails *struct{ Exception struct{ Description string } }
	}
	p.do("Runtime.evaluate", map[string]any{"expression": expression, "awaitPromise": true, "returnByValue": true}, &r)
	if r.ExceptionDetails != nil {
		p.t.Fatalf("%s: %s", expression, r.ExceptionDetails.Exception.Description)
	}
	if len(r.Result.Value) > 0 {
		if err := json.Unmarshal(r.Result.Value, &out); err != nil {
			p.t.Fatalf("%s: %v in %s", expression, err, r.Result.Value)
		}
	}
	return out
}

// await waits until an expression is true.
func (p *tab) await(what, expression string) {
	p.t.Helper()
	end := time.Now().Add(patience)
	for !eval[bool](p, "!!("+expression+")") {
		if time.Now().After(end) {
			p.shoot("failed")
			p.t.Fatalf("%s: not within %v: %s\n%s", what, patience, expression, eval[string](p, "document.body.innerText.slice(0, 3000)"))
		}
		time.Sleep(20 * time.Millisecond)
	}
}

// text is what an element says.
func (p *tab) text(selector string) string {
	p.t.Helper()
	return eval[string](p, fmt.Sprintf("document.querySelector(%q)?.innerText ?? ''", selector))
}

// says waits until an element says something.
func (p *tab) says(selector, words string) {
	p.t.Helper()
	p.await(selector+" says "+words, fmt.Sprintf("document.querySelector(%q)?.innerText.includes(%q)", selector, words))
}

// click clicks on the middle of an element with the mouse.
func (p *tab) click(element string) {
	p.t.Helper()
	p.await(element, element)
	where := fmt.Sprintf("(() => { const e = %s; e.scrollIntoView({block: 'center'}); const r = e.getBoundingClientRect(); return [r.x + r.width / 2, r.y + r.height / 2]; })()", element)
	// It may move until it is pointed at.
	for range 100 {
		at := eval[[2]float64](p, where)
		p.pointAt(at[0], at[1])
		if eval[[2]float64](p, where) == at {
			p.clickAt(at[0], at[1])
			return
		}
	}
	p.t.Fatalf("%s: does not stand still when it is pointed at", element)
}

func (p *tab) pointAt(x, y float64) {
	p.t.Helper()
	p.do("Input.dispatchMouseEvent", map[string]any{"type": "mouseMoved", "x": x, "y": y, "button": "none"}, nil)
}

func (p *tab) clickAt(x, y float64) {
	p.t.Helper()
	for _, kind := range []string{"mouseMoved", "mousePressed", "mouseReleased"} {
		p.do("Input.dispatchMouseEvent", map[string]any{"type": kind, "x": x, "y": y, "button": "left", "clickCount": 1}, nil)
	}
}

// drop drags files over an element and lets them go there.
func (p *tab) drop(selector string, paths ...string) {
	p.t.Helper()
	at := eval[[2]float64](p, fmt.Sprintf("(() => { const r = document.querySelector(%q).getBoundingClientRect(); return [r.x + r.width / 2, r.y + 20]; })()", selector))
	for _, kind := range []string{"dragEnter", "dragOver", "drop"} {
		p.do("Input.dispatchDragEvent", map[string]any{"type": kind, "x": at[0], "y": at[1], "data": map[string]any{"items": []any{}, "files": paths, "dragOperationsMask": 1}}, nil)
	}
}

// codes are those of keys that write nothing, or of which it counts.
var codes = map[string]int{"Tab": 9, "Enter": 13, " ": 32, "ArrowUp": 38, "ArrowDown": 40, "ArrowLeft": 37, "ArrowRight": 39, "Home": 36, "End": 35}

// press presses keys one after another.
func (p *tab) press(keys ...string) {
	p.t.Helper()
	for _, k := range keys {
		text := k
		switch {
		case k == "Enter":
			text = "\r"
		case len(k) > 1:
			text = ""
		}
		m := map[string]any{"type": "keyDown", "key": k, "text": text, "windowsVirtualKeyCode": codes[k], "code": k}
		p.do("Input.dispatchKeyEvent", m, nil)
		m["type"] = "keyUp"
		p.do("Input.dispatchKeyEvent", m, nil)
	}
}

// write types text where the focus is, in place of what is there.
func (p *tab) write(text string) {
	p.t.Helper()
	eval[any](p, "document.activeElement.select?.()")
	p.do("Input.insertText", map[string]any{"text": text}, nil)
}

// tabTo presses the tab key until the focus is on an element.
func (p *tab) tabTo(element string) {
	p.t.Helper()
	for range 300 {
		if eval[bool](p, "document.activeElement === "+element) {
			return
		}
		p.press("Tab")
	}
	p.t.Fatalf("the tab key does not reach %s", element)
}

// shoot takes a picture of the page into build/page.
func (p *tab) shoot(name string) {
	p.t.Helper()
	var r struct{ Data string }
	p.do("Page.captureScreenshot", map[string]any{"format": "png"}, &r)
	image, err := base64.StdEncoding.DecodeString(r.Data)
	if err != nil {
		p.t.Fatal(err)
	}
	dir := filepath.Join("..", "..", "build", "page")
	if err := os.MkdirAll(dir, 0o755); err != nil {
		p.t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, name+".png"), image, 0o644); err != nil {
		p.t.Fatal(err)
	}
}

// looks takes four pictures of the page: in a wide window and a narrow one, light and dark. It
// leaves it wide and dark.
func (p *tab) looks(name string) {
	p.t.Helper()
	for _, scheme := range []string{"light", "dark"} {
		p.do("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{{"name": "prefers-color-scheme", "value": scheme}}}, nil)
		for _, size := range []struct {
			name          string
			width, height int
		}{{"narrow", 390, 844}, {"wide", 1440, 900}} {
			p.resize(size.width, size.height)
			p.await("the page has its size and light", fmt.Sprintf("innerWidth === %d && document.documentElement.dataset.lightness === %q && new Promise(done => requestAnimationFrame(() => requestAnimationFrame(() => done(true))))", size.width, scheme))
			p.await("maps are not stretched", "[...document.querySelectorAll('.map canvas')].every(c => Math.abs(c.width / c.clientWidth - c.height / c.clientHeight) < .02)")
			p.shoot(name + "-" + size.name + "-" + scheme)
		}
	}
}

// hold keeps answers from addresses of a pattern back until the function that it returns is
// called, which waits for one first.
func (p *tab) hold(pattern string) (release func()) {
	p.t.Helper()
	p.do("Fetch.enable", map[string]any{"patterns": []map[string]any{{"urlPattern": pattern, "requestStage": "Response"}}}, nil)
	return func() {
		p.t.Helper()
		var held []string
		for end := time.Now().Add(patience); p.holds() == 0; time.Sleep(10 * time.Millisecond) {
			if time.Now().After(end) {
				p.t.Fatalf("nothing came from %s", pattern)
			}
		}
		p.mu.Lock()
		held = slices.Clone(p.held)
		p.mu.Unlock()
		for _, id := range held {
			p.do("Fetch.continueRequest", map[string]any{"requestId": id}, nil)
		}
		p.do("Fetch.disable", nil, nil)
	}
}

// holds is how many answers are kept back.
func (p *tab) holds() int {
	p.mu.Lock()
	defer p.mu.Unlock()
	return len(p.held)
}

// asked are the addresses that the page has asked for.
func (p *tab) asked() []string {
	p.mu.Lock()
	defer p.mu.Unlock()
	return slices.Clone(p.requests)
}

// clean proves that the page complained of nothing, but for what has these
// words, and asked nobody but its own server.
func (p *tab) clean(origin string, but ...string) {
	p.t.Helper()
	p.mu.Lock()
	defer p.mu.Unlock()
complaints:
	for _, c := range p.complaints {
		for _, words := range but {
			if strings.Contains(c, words) {
				continue complaints
			}
		}
		p.t.Errorf("the page complains: %s", c)
	}
	for _, url := range p.requests {
		if !strings.HasPrefix(url, origin+"/") && !strings.HasPrefix(url, "data:") && url != "about:blank" {
			p.t.Errorf("the page asked for %s", url)
		}
	}
	if len(p.requests) == 0 {
		p.t.Error("the page's requests are not seen")
	}
}
