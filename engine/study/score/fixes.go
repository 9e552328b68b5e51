package score

import (
	"math"
	"slices"

	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// Fixes compares satellite fixes with what was known before each, from the first
// located on. The zero value is ready. One goroutine owns it.
type Fixes struct {
	list    []heldOut
	waiting []heldOut
	located bool
}

type heldOut struct {
	ns           int64
	sensor       string
	number       uint64
	errM, nees   float64
	sigmaM       float64
	counts, wide bool
}

// Add takes a fix with the posterior before it; one that comes again counts as it
// came last.
func (f *Fixes) Add(ev sensor.Event, before *summary.Posterior) {
	fix, ok := ev.Measurement.(sensor.Fix)
	if !ok {
		return
	}
	f.located = f.located || before.Status == summary.Located
	truth := Truth{TimeNS: int64(ev.Time), At: fix.Position, SigmaM: fix.SigmaM}
	e, err := errorOf(before, truth, nil)
	if err != nil {
		return
	}
	h := heldOut{ns: truth.TimeNS, sensor: ev.Sensor, number: ev.Number, errM: e.errM, nees: e.nees, sigmaM: fix.SigmaM, counts: f.located}
	h.wide = e.nees > radius95*radius95 // χ² with two degrees of freedom
	for i := len(f.waiting) - 1; i >= 0; i-- {
		if w := &f.waiting[i]; w.ns == h.ns && w.sensor == h.sensor && w.number == h.number {
			*w = h
			return
		}
	}
	f.waiting = append(f.waiting, h)
	if n := len(f.waiting); n > 8192 {
		f.list = append(f.list, f.waiting[:n/2]...)
		f.waiting = slices.Delete(f.waiting, 0, n/2)
	}
}

// End sums up.
func (f *Fixes) End() *HeldOut {
	out := &HeldOut{}
	var errM Sample
	var square, nees, sigma, outside float64
	for _, h := range append(f.list, f.waiting...) {
		if !h.counts || math.IsInf(h.nees, 0) {
			continue
		}
		errM.Add(h.errM)
		square, nees, sigma = square+h.errM*h.errM, nees+h.nees, sigma+h.sigmaM*h.sigmaM
		if h.wide {
			outside++
		}
	}
	n := float64(errM.Len())
	if out.Fixes = errM.Len(); n == 0 {
		return out
	}
	out.RMSEM, out.P50M, out.P95M = finite(math.Sqrt(square/n)), finite(errM.Quantile(0.5)), finite(errM.Quantile(0.95))
	out.ANEES, out.SigmaM, out.Outside = finite(nees/n), finite(math.Sqrt(sigma/n)), finite(outside/n)
	return out
}
