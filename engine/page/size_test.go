package page_test

import (
	"encoding/base64"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// wideRoads is a packed belief on 20 000 cells of 1 m: forty streets each way,
// driven both ways, 250 m of each.
func wideRoads() *leadlinev1.Belief {
	rng := rand.New(rand.NewPCG(1, 2))
	b := &leadlinev1.Belief{PeakMass: 1e-3}
	for street := range 80 {
		s := &leadlinev1.BeliefStretch{CellM: 1}
		for i := range 250 {
			e, n := int32(2000*street), int32(100*i) // cm
			de, dn := int32(0), int32(100)
			if street >= 40 {
				e, n, de, dn = n, int32(2000*(street-40)), dn, de
			}
			if i == 0 {
				de, dn = e, n
			}
			s.EastCm, s.NorthCm = append(s.EastCm, de), append(s.NorthCm, dn)
			s.Mass = append(s.Mass, byte(255-rng.IntN(140)))
		}
		b.Stretches = append(b.Stretches, s)
	}
	return b
}

// widePlane is a packed belief on 1000 × 1000 cells of 5 m: a hill without an edge.
func widePlane() *leadlinev1.Belief {
	g := &leadlinev1.BeliefGrid{Columns: 1000, Rows: 1000, CellM: 5, Runs: []uint32{0, 1_000_000}}
	for i := range 1_000_000 {
		d := math.Hypot(float64(i%1000-500), float64(i/1000-500)) / 500 * 2.5
		g.Mass = append(g.Mass, byte(max(255-16*d*d/2, 1)))
	}
	corner := func(lon, lat float64) *leadlinev1.Position { return &leadlinev1.Position{Lon: &lon, Lat: &lat} }
	g.First, g.FirstLast, g.LastFirst, g.Last = corner(-30, 45), corner(-29.937, 45), corner(-30, 45.045), corner(-29.937, 45.045)
	return &leadlinev1.Belief{PeakMass: 1e-5, Grid: g}
}

// threadMs is how long the page's thread has run, ms of the processor.
func (p *tab) threadMs() float64 {
	p.t.Helper()
	var r struct {
		Metrics []struct {
			Name  string
			Value float64
		}
	}
	p.do("Performance.getMetrics", nil, &r)
	for _, m := range r.Metrics {
		if m.Name == "ThreadTime" {
			return 1000 * m.Value
		}
	}
	p.t.Fatalf("no time of the thread in %v", r.Metrics)
	return 0
}

// TestRedraw draws the greatest beliefs that the page is made for, and proves that
// they are drawn: some pixels have a belief's colour where the belief is, and none
// where it is not. How long it takes, from bytes to pixels, is logged and written
// to build/page/redraw.json: by the clock, and of the processor, which does not
// depend on what else the machine does.
func TestRedraw(t *testing.T) {
	b := startBrowser(t)
	r := serve(t, "127.0.0.1:0")
	p := b.open(t, r.origin+"/", 1000, 800, false)
	p.says(".list", "No vehicle is here yet")
	const rounds = 7
	figures := map[string]map[string]float64{}
	for _, c := range []struct {
		name   string
		belief *leadlinev1.Belief
		// The canvas looks at here, m, with so many metres a pixel.
		e, n, mPerPx float64
		share        float64 // of the pixels that are drawn on, at least
		bound        float64 // ms
	}{
		{"20 000 road cells, all in view", wideRoads(), 400, 400, 1, 0.2, 100},
		{"20 000 road cells, from near", wideRoads(), 60, 60, 0.15, 0.1, 100},
		{"1000 x 1000 cells, all in view", widePlane(), 2480, 2500, 6.5, 0.5, 100},
		{"1000 x 1000 cells, from near", widePlane(), 2480, 2500, 1, 0.9, 100},
	} {
		bytes, err := proto.Marshal(c.belief)
		if err != nil {
			t.Fatal(err)
		}
		before := p.threadMs()
		got := eval[map[string]float64](p, fmt.Sprintf(`import(document.querySelector('script[type=module]').src).then(m => {
			const bytes = Uint8Array.from(atob(%q), c => c.charCodeAt(0));
			const rounds = %d;
			const canvas = document.createElement("canvas");
			[canvas.width, canvas.height] = [1000, 800];
			const ctx = canvas.getContext("2d");
			const frame = new m.Frame({lon: -30, lat: 45});
			const v = {e: %v, n: %v, mPerPx: %v, width: 1000, height: 800};
			const all = {read: [], place: [], draw: [], total: []};
			for (let i = 0; i < rounds; i++) {
				const [t0, belief] = [performance.now(), m.readBelief(bytes)];
				const [t1, placed] = [performance.now(), m.placeBelief(belief, frame, false)];
				const t2 = performance.now();
				ctx.clearRect(0, 0, 1000, 800);
				m.drawBelief(ctx, v, placed, false);
				ctx.getImageData(500, 400, 1, 1); // not before all is drawn
				const t3 = performance.now();
				for (const [k, ms] of [["read", t1 - t0], ["place", t2 - t1], ["draw", t3 - t2], ["total", t3 - t0]]) all[k].push(ms);
			}
			const out = {};
			for (const k in all) out[k] = all[k].sort((a, b) => a - b)[rounds >> 1];
			const pixels = ctx.getImageData(0, 0, 1000, 800).data;
			let drawn = 0;
			for (let i = 3; i < pixels.length; i += 4) if (pixels[i]) drawn++;
			return {...out, share: drawn / 800_000};
		})`, base64.StdEncoding.EncodeToString(bytes), rounds, c.e, c.n, c.mPerPx))
		got["processor"] = (p.threadMs() - before) / rounds
		if !(got["share"] >= c.share && got["share"] < 1.0001) {
			t.Errorf("%s: drawn on %.3f of the pixels, want at least %v", c.name, got["share"], c.share)
		}
		if got["processor"] > c.bound {
			t.Errorf("%s: takes %.1f ms of the processor, want at most %v", c.name, got["processor"], c.bound)
		}
		t.Logf("%s: %d bytes, median %.1f ms to read them, %.1f ms to place, %.1f ms to draw, %.1f ms in all; %.1f ms of the processor, bound %v ms", c.name, len(bytes), got["read"], got["place"], got["draw"], got["total"], got["processor"], c.bound)
		got["bytes"], got["bound"] = float64(len(bytes)), c.bound
		figures[c.name] = got
	}
	text, err := json.MarshalIndent(figures, "", "  ")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join("..", "..", "build", "page", "redraw.json"), text, 0o644); err != nil {
		t.Fatal(err)
	}
	p.clean(r.origin)
}
