//go:build unix

package diagnose

import (
	"math"
	"syscall"
	"testing"
)

// BenchmarkWork compares the work that is counted with the time that it takes.
func BenchmarkWork(b *testing.B) {
	for _, p := range unspoiled {
		b.Run(p.name, func(b *testing.B) {
			s := p.scene(b, 1)
			c, err := newCourse(s.drive, s.config, Options{MaxCells: 1000})
			must(b, c, err)
			work, before := 0.0, processorS()
			for b.Loop() {
				r, err := newRun(c.config, c.suite, c.events, &Mistake{})
				must(b, r, err)
				if err := r.advance(0, true, math.Inf(1), c.stop); err != nil {
					b.Fatal(err)
				}
				work += r.log.work
			}
			b.ReportMetric(work/(processorS()-before), "work/s")
		})
	}
}

// processorS is the seconds of processor time that this process has had.
func processorS() float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		panic(err)
	}
	return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e9
}
