package operate

import (
	"os"
	"runtime"
	"runtime/debug"
	"runtime/metrics"
	"sync"
)

// defaultGarbage is what GOGC is if nobody sets it.
const defaultGarbage = 100

// LetGarbageGather has this process collect its garbage only once there are so many
// bytes of it, or as many as are in use if those are more, until stop is called. Go
// looks at the latter alone: a server of few vehicles, which has some MB in use, would
// collect ten times a second, and have those wait meanwhile who allocate. Where GOGC or
// GOMEMLIMIT is set nothing is changed. One call at a time may be in effect.
func LetGarbageGather(bytes uint64) (stop func()) {
	if os.Getenv("GOGC") != "" || os.Getenv("GOMEMLIMIT") != "" {
		return func() {}
	}
	g := &gathering{bytes: bytes}
	g.adjust()
	g.again()
	return func() {
		g.mu.Lock()
		defer g.mu.Unlock()
		g.over = true
		debug.SetGCPercent(defaultGarbage)
	}
}

type gathering struct {
	bytes uint64

	mu   sync.Mutex
	now  int // in per cent of what is in use
	over bool
}

// again has adjust called after each collection.
func (g *gathering) again() {
	type sentinel struct{ _ *byte } // with a pointer, so that it has a place of its own
	runtime.AddCleanup(new(sentinel), func(g *gathering) {
		if g.adjust() {
			g.again()
		}
	}, g)
}

// adjust sets the share of what is in use that makes the bytes, and reports whether
// it still may.
func (g *gathering) adjust() bool {
	s := []metrics.Sample{{Name: "/gc/heap/live:bytes"}, {Name: "/gc/scan/stack:bytes"}, {Name: "/gc/scan/globals:bytes"}}
	metrics.Read(s)
	inUse := uint64(1)
	for i := range s {
		if s[i].Value.Kind() == metrics.KindUint64 {
			inUse += s[i].Value.Uint64()
		}
	}
	want := max(defaultGarbage, int(min(100*g.bytes/inUse, 100_000)))
	g.mu.Lock()
	defer g.mu.Unlock()
	if g.over {
		return false
	}
	if want*10 > g.now*11 || want*11 < g.now*10 { // setting it stops everybody for a moment
		g.now = want
		debug.SetGCPercent(want)
	}
	return true
}
