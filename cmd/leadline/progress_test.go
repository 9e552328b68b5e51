package main

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"testing"
	"time"

	"golang.org/x/sys/unix"
)

// pseudoTerminal opens the two ends of one: where it is looked at, and the name
// of the device that programs write to.
func pseudoTerminal(t *testing.T) (screen *os.File, device string) {
	t.Helper()
	screen, err := os.OpenFile("/dev/ptmx", os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { screen.Close() })
	if err := unix.IoctlSetPointerInt(int(screen.Fd()), unix.TIOCSPTLCK, 0); err != nil {
		t.Fatal(err)
	}
	n, err := unix.IoctlGetInt(int(screen.Fd()), unix.TIOCGPTN)
	if err != nil {
		t.Fatal(err)
	}
	return screen, fmt.Sprintf("/dev/pts/%d", n)
}

// shown runs a task that shows how far it is, and returns what it wrote, and
// whether it wrote a text while it went on.
func shown(t *testing.T, at *os.File, on io.Reader, text string, task func(w *os.File) (end func())) (out string) {
	t.Helper()
	read, seen := make(chan string), make(chan struct{})
	go func() {
		var all bytes.Buffer
		part, told := make([]byte, 4096), false
		for {
			n, err := on.Read(part)
			all.Write(part[:n])
			if !told && text != "" && bytes.Contains(all.Bytes(), []byte(text)) {
				told = true
				close(seen)
			}
			if err != nil { // EIO of a terminal that nobody writes to any more
				read <- all.String()
				return
			}
		}
	}()
	end := task(at)
	if text != "" {
		select {
		case <-seen:
		case <-time.After(patience):
			t.Errorf("%q does not show", text)
		}
	}
	end()
	at.Close()
	return <-read
}

// TestProgress: how far a task is shows on a terminal and nowhere else.
func TestProgress(t *testing.T) {
	t.Setenv("TERM", "xterm")
	for name, task := range map[string]func(w *os.File) func(){
		"progress": func(w *os.File) func() {
			show, end := progress(w, "reading")
			if show != nil {
				show(1, 4)
			}
			return end
		},
		"meter": func(w *os.File) func() {
			m := newMeter(w, "reading")
			m.Begin(400, 2)
			m.Read(100, 7)
			return m.end
		},
	} {
		t.Run(name, func(t *testing.T) {
			screen, device := pseudoTerminal(t)
			if err := unix.IoctlSetWinsize(int(screen.Fd()), unix.TIOCSWINSZ, &unix.Winsize{Row: 24, Col: 120}); err != nil {
				t.Fatal(err)
			}
			tty, err := os.OpenFile(device, os.O_RDWR|unix.O_NOCTTY, 0)
			if err != nil {
				t.Fatal(err)
			}
			shown(t, tty, screen, "25 %", task)

			r, w, err := os.Pipe()
			if err != nil {
				t.Fatal(err)
			}
			defer r.Close()
			if out := shown(t, w, r, "", task); out != "" {
				t.Errorf("into a pipe: %q", out)
			}
			t.Setenv("TERM", "dumb")
			screen, device = pseudoTerminal(t)
			if tty, err = os.OpenFile(device, os.O_RDWR|unix.O_NOCTTY, 0); err != nil {
				t.Fatal(err)
			}
			if out := shown(t, tty, screen, "", task); out != "" {
				t.Errorf("on a terminal that can do nothing: %q", out)
			}
		})
	}
}
