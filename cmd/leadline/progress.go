package main

import (
	"io"
	"os"

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

// terminal reports whether a file is a character device such as a terminal.
func terminal(f *os.File) bool {
	info, err := f.Stat()
	return err == nil && info.Mode()&os.ModeCharDevice != 0 && os.Getenv("TERM") != "dumb"
}
