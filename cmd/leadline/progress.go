package main

import (
	"fmt"
	"io"
	"os"
	"sync"
	"time"

	"github.com/vbauerster/mpb/v8"
	"github.com/vbauerster/mpb/v8/decor"
)

// progress returns a function that shows how far a task is, and one that ends
// it. Both do nothing unless w is a terminal.
func progress(w io.Writer, task string) (show func(done, total int), end func()) {
	f, ok := w.(*os.File)
	if !ok || !terminal(f) {
		return nil, func() {}
	}
	p := mpb.New(mpb.WithOutput(f), mpb.WithWidth(40))
	bar := p.AddBar(0, mpb.BarRemoveOnComplete(),
		mpb.PrependDecorators(decor.Name(task+" ")),
		mpb.AppendDecorators(decor.Percentage(), decor.Name("  "), decor.AverageETA(decor.ET_STYLE_GO)),
	)
	show = func(done, total int) {
		bar.SetTotal(int64(total), false)
		bar.SetCurrent(int64(done))
	}
	return show, func() {
		bar.SetTotal(-1, true)
		bar.Abort(true)
		p.Wait()
	}
}

// meter shows how far a job is: one bar with what is done, the rate and the time
// left. It shows nothing unless w is a terminal.
type meter struct {
	w, lines io.Writer
	task     string

	mu           sync.Mutex
	p            *mpb.Progress
	bar          *mpb.Bar
	total, done  int64
	runs, ran    int
	measurements int
	began        time.Time
}

func newMeter(w io.Writer, task string) *meter {
	lines := w
	f, ok := w.(*os.File)
	if !ok || !terminal(f) {
		w = nil
	}
	return &meter{w: w, lines: lines, task: task, began: time.Now()}
}

// Begin says how much there is.
func (m *meter) Begin(bytes int64, runs int) {
	m.mu.Lock()
	defer m.mu.Unlock()
	m.total, m.runs = bytes, runs
	m.show()
}

// show draws the bar; mu is held.
func (m *meter) show() {
	if m.w == nil || m.bar != nil {
		return
	}
	m.p = mpb.New(mpb.WithOutput(m.w), mpb.WithWidth(30))
	text := func(decor.Statistics) string {
		m.mu.Lock()
		defer m.mu.Unlock()
		return fmt.Sprintf(" %d/%d runs, %.0f measurements/s, ", m.ran, m.runs, float64(m.measurements)/max(time.Since(m.began).Seconds(), 1e-3))
	}
	left := func(decor.Statistics) string {
		m.mu.Lock()
		defer m.mu.Unlock()
		if m.done == 0 {
			return "time left unknown"
		}
		s := time.Since(m.began).Seconds() * float64(m.total-m.done) / float64(m.done)
		return (time.Duration(s) * time.Second).String() + " left"
	}
	m.bar = m.p.AddBar(max(m.total, 1), mpb.BarRemoveOnComplete(),
		mpb.PrependDecorators(decor.Name(m.task+" ")),
		mpb.AppendDecorators(decor.Percentage(), decor.Any(text), decor.Any(left)),
	)
	m.bar.SetCurrent(m.done)
}

// Read says how much more was read.
func (m *meter) Read(bytes int64, measurements int) { m.add(bytes, measurements, 0) }

// Done says that a run is through.
func (m *meter) Done(unread int64) { m.add(unread, 0, 1) }

func (m *meter) add(bytes int64, measurements, runs int) {
	m.mu.Lock()
	m.done, m.measurements, m.ran = m.done+bytes, m.measurements+measurements, m.ran+runs
	bar, done := m.bar, m.done
	m.mu.Unlock()
	if bar != nil { // the bar asks for mu
		bar.SetCurrent(done)
	}
}

// resume brings the bar back that end took away for something to be printed.
func (m *meter) resume() {
	m.mu.Lock()
	defer m.mu.Unlock()
	m.show()
}

// say prints a line above the bar.
func (m *meter) say(line string) {
	m.mu.Lock()
	p := m.p
	m.mu.Unlock()
	if p != nil {
		if _, err := fmt.Fprintln(p, oneLine(line)); err == nil {
			return
		}
	}
	fmt.Fprintln(m.lines, oneLine(line))
}

// end takes the bar away.
func (m *meter) end() {
	m.mu.Lock()
	p, bar := m.p, m.bar
	m.p, m.bar = nil, nil
	m.mu.Unlock()
	if bar != nil {
		bar.Abort(true)
		p.Wait()
	}
}

// terminal reports whether a file is a character device such as a terminal.
func terminal(f *os.File) bool {
	info, err := f.Stat()
	return err == nil && info.Mode()&os.ModeCharDevice != 0 && os.Getenv("TERM") != "dumb"
}
