package operate

import (
	"runtime"
	"runtime/debug"
	"testing"
)

// Of a process with little in use garbage is collected as often as it has the bytes
// that are allowed, and after that as Go does it.
func TestLetGarbageGather(t *testing.T) {
	t.Setenv("GOGC", "")
	t.Setenv("GOMEMLIMIT", "")
	const piece, all = 64 << 10, 512 << 20
	var keep []byte
	count := func() uint32 {
		runtime.GC()
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		for range all / piece {
			keep = make([]byte, piece)
		}
		runtime.ReadMemStats(&after)
		return after.NumGC - before.NumGC
	}
	plain := count()
	stop := LetGarbageGather(64 << 20)
	gathered := count()
	stop()
	runtime.KeepAlive(keep)
	if most := uint32(all/(64<<20)) + 4; gathered > most || plain < 3*gathered {
		t.Errorf("%d collections for %d MiB, %d at most with 64 MiB of garbage; without %d", gathered, all>>20, most, plain)
	}
	if got := debug.SetGCPercent(defaultGarbage); got != defaultGarbage {
		t.Errorf("afterwards the share is %d %%", got)
	}
	// Who set it knows why.
	t.Setenv("GOGC", "50")
	debug.SetGCPercent(50)
	defer debug.SetGCPercent(defaultGarbage)
	LetGarbageGather(64 << 20)()
	if got := debug.SetGCPercent(50); got != 50 {
		t.Errorf("GOGC of 50 has become %d", got)
	}
}
