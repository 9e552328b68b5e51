package page_test

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"leadline/engine/geo"
	"leadline/engine/journal"
	"leadline/engine/monitor"
	"leadline/engine/server"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// tableOf writes a study's table of a run to the north at 1 m/s from a place, with a radius and an
// error that are greatest at a time.
func tableOf(t *testing.T, dir, name string, from geo.LonLat, worstS int) string {
	t.Helper()
	path := filepath.Join(dir, name)
	f, err := os.Create(path)
	if err != nil {
		t.Fatal(err)
	}
	w, err := track.NewTable(f)
	if err != nil {
		t.Fatal(err)
	}
	for i := range 300 {
		off := 2.0
		if i > worstS-15 && i < worstS+15 {
			off = 40
		}
		at := geo.LonLat{Lon: from.Lon, Lat: from.Lat + float64(i)/6.37e6}
		var alarms []monitor.Alarm
		if i >= worstS && i < worstS+20 {
			alarms = []monitor.Alarm{{Kind: monitor.Bias, Key: monitor.Key{Sensor: "gyro"}}}
		}
		p := &summary.Posterior{Alarms: alarms, TimeNS: time.Date(2026, 1, 1, 0, 0, i, 0, time.UTC).UnixNano(), Status: summary.Located, Mean: at, Radius50M: off, Radius95M: 2 * off, Radius99M: 3 * off}
		if err := w.Add(track.Step{Posterior: p, Known: true, ErrorM: off, Truth: score.Truth{At: at}}); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

// TestPastRuns proves that the page finds the worst stretch of a study's tables
// and shows two side by side at one time, that a drive which has ended is shown as
// the server keeps it, and that what is no table is a sentence.
func TestPastRuns(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	folder := t.TempDir()
	kept := filepath.Join(folder, "wheels=poor", "van")
	if err := os.MkdirAll(kept, 0o755); err != nil {
		t.Fatal(err)
	}
	tableOf(t, kept, "track.csv", w.van.Truths[0].Position, 60)
	for file, text := range map[string]string{
		"run.json":   fmt.Sprintf(`{"drive": "van", "setting": "wheels=poor", "alert_limit_m": 25, "map_fingerprint": %q}`, w.maps[0].Space.Fingerprint()),
		"score.json": `{"drive": "van", "posteriors": 300, "p95_m": 40}`,
	} {
		if err := os.WriteFile(filepath.Join(kept, file), []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	hostile := filepath.Join(folder, "<img src=x onerror=alert(1)>")
	if err := os.Mkdir(hostile, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(hostile, "run.json"), []byte("{"), 0o600); err != nil {
		t.Fatal(err)
	}
	r := serve(t, "127.0.0.1:0", func(c *server.Config) { c.Results = folder })
	f := r.open(w.van, "van", nearStart(w.van))
	r.send(f, upTo(w.van, 15))
	closed, err := f.Close()
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	from := w.van.Truths[0].Position
	calm, rough := tableOf(t, dir, "calm.csv", from, 200), tableOf(t, dir, "rough.csv", from, 100)
	wrong := filepath.Join(dir, "wrong.csv")
	if err := os.WriteFile(wrong, []byte("a,b\n1,2\n"), 0o600); err != nil {
		t.Fatal(err)
	}

	p := b.open(t, r.origin+"/#past", 1440, 900, false)
	load := func(paths ...string) { p.choose("[name=table]", paths...) }
	p.await("the drive", "document.querySelectorAll('[name=first] option').length === 3")
	p.says(".note.bad", "onerror=alert(1)>/run.json: unexpected end of JSON input")
	load(wrong)
	p.says("#past-trouble", "wrong.csv is no track.csv: there is no column time")
	load(calm, rough)
	p.says("#past-figures", "rough.csv")
	p.await("nothing more is said of a bad file", "document.querySelector('#past-trouble').innerText === ''")
	byKey := func(element string) {
		p.tabTo(element)
		p.press("Enter")
	}
	worst := func(which string, second int, press func(element string)) {
		t.Helper()
		press(fmt.Sprintf("[...document.querySelectorAll('button')].find(e => e.innerText === 'To the worst stretch of %s')", which))
		p.says("#past-now", fmt.Sprintf("00:%02d:%02d UTC", second/60, second%60))
	}
	worst("the second", 99, p.click)
	if got := strings.Join(strings.Fields(p.text("#past-figures")), " "); !strings.Contains(got, "95 % within 4 m 80 m") || !strings.Contains(got, "Error 2 m 40 m") {
		t.Errorf("at its worst: %s", got)
	}
	p.await("the map", "document.querySelector('.legend')?.innerText.includes('truth')")
	p.audit("past runs")
	p.looks("past")
	worst("the first", 199, p.click)
	worst("the second", 99, byKey)
	worst("the first", 199, byKey)

	// By keyboard: the drive in place of the first, and through its time.
	p.tabTo("document.querySelector('[name=first]')")
	p.press("ArrowUp", "ArrowUp")
	p.says("#past-figures", "van")
	p.tabTo("document.getElementById('past-time')")
	p.press("End")
	p.says("#past-now", "00:04:59 UTC")
	p.tabTo("document.querySelector('[name=second]')")
	p.press("Home")
	p.await("the drive alone", "document.querySelectorAll('#past-figures thead th').length === 2")
	p.press("Tab")
	p.tabTo("document.getElementById('past-time')")
	p.press("End")
	p.says("#past-now", closed.GetPosterior().GetTime().AsTime().Format("15:04:05"))

	// A result of the server's folder beside it, by keyboard, and its alarm by mouse and key.
	p.tabTo("document.querySelector('[name=second]')")
	p.press("ArrowDown", "ArrowDown")
	p.says("#past-figures", "wheels=poor/van")
	p.says("section table:last-of-type", "bias gyro, until 00:01:20")
	alarm := "[...document.querySelectorAll('table button')].find(e => e.innerText === '00:01:00')"
	p.click(alarm)
	p.says("#past-now", "00:01:00 UTC")
	p.tabTo("document.getElementById('past-time')")
	p.press("End")
	p.await("another time", "!document.querySelector('#past-now').innerText.includes('00:01:00 UTC')")
	byKey(alarm)
	p.says("#past-now", "00:01:00 UTC")
	p.says("#past-figures", "80\u00a0m")
	p.resize(390, 844)
	p.do("Emulation.setEmulatedMedia", map[string]any{"features": []map[string]string{{"name": "prefers-color-scheme", "value": "dark"}}}, nil)
	p.shoot("past-alarm-narrow-dark")
	p.clean(r.origin)
}

// TestOlderDrives opens a drive that has ended and was followed by others, after the server has been
// killed and started anew on its journal, goes through it by keyboard, and is told when it is not
// kept any more.
func TestOlderDrives(t *testing.T) {
	t.Parallel() // it waits more than it works
	b := startBrowser(t)
	w, err := invented()
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	journalled := func(c *server.Config) {
		c.Journal = &journal.Options{Dir: dir, FreeBytes: 1}
		c.Build = "this"
	}
	r := serve(t, "127.0.0.1:0", journalled)
	const hostile = "<img src=x onerror=alert(1)>"
	for i, name := range []string{hostile, "second", "third"} {
		r.drive = name
		f := r.open(w.van, "van", nearStart(w.van))
		r.send(f, upTo(w.van, float64(20-5*i)))
		if _, err := f.Close(); err != nil {
			t.Fatal(err)
		}
	}
	want, err := r.calls.Trail(t.Context(), &leadlinev1.TrailRequest{Vehicle: "van", Drive: hostile})
	if err != nil {
		t.Fatal(err)
	}
	p := b.open(t, r.origin+"/#past", 390, 844, false)
	const option = "[...document.querySelectorAll('[name=first] option')].find(e => e.innerText.startsWith('van, drive <img src=x onerror=alert(1)>, ended'))"
	p.await("the older drive", option)
	r.stop()
	p.says(".connection", "The server does not answer")
	r = serve(t, r.address, journalled)
	p.says(".connection", "Live.")
	p.tabTo("document.querySelector('[name=first]')")
	for !eval[bool](p, option+".selected") {
		p.press("ArrowDown")
	}
	p.says("#past-figures", "van, drive "+hostile)
	p.tabTo("document.getElementById('past-time')")
	p.press("End")
	last := want.GetPoints()[len(want.GetPoints())-1]
	p.says("#past-now", last.GetTime().AsTime().Format("15:04:05")+" UTC")
	var metres float64
	if _, err := fmt.Sscanf(strings.ReplaceAll(p.text("#past-figures tbody tr:nth-child(2) td"), "\u00a0", " "), "%f m", &metres); err != nil || math.Abs(metres-last.GetRadius95M()) > 0.06*metres {
		t.Errorf("the page says %q, the server has %v", p.text("#past-figures"), last)
	}
	p.shoot("past-narrow-light")
	p.audit("an older drive, narrow")

	if _, err := r.calls.EraseVehicle(t.Context(), &leadlinev1.EraseVehicleRequest{Vehicle: "van"}); err != nil {
		t.Fatal(err)
	}
	// Chosen from a list of before: a page that has joined the server again meanwhile has another one.
	eval[any](p, `(() => { const s = document.querySelector("[name=first]"); s.add(new Option("second", 'drive ["van","second"]')); s.selectedIndex = s.length - 1; s.dispatchEvent(new Event("change", {bubbles: true})); })()`)
	p.says("#past-trouble", "Drive \"second\" of vehicle \"van\" is not kept any more, or was never here")
	p.clean(r.origin, "net::ERR_", "status of 4", "status of 501") // there is no folder of results
}
