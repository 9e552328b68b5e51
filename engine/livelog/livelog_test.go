package livelog

import (
	"context"
	"fmt"
	"net"
	"os"
	"strings"
	"sync"
	"testing"
	"time"

	"go.uber.org/goleak"
	"golang.org/x/sys/unix"
)

// patience is how long anything may take before it counts as hanging.
const patience = 30 * time.Second

func TestParse(t *testing.T) {
	for text, want := range map[string]string{
		"serial:/dev/ttyUSB0":          "serial:/dev/ttyUSB0",
		"serial:/dev/ttyS1?baud=38400": "serial:/dev/ttyS1?baud=38400",
		"serial:COM3?baud=4800":        "serial:COM3",
		"tcp:plotter.example:10110":    "tcp:plotter.example:10110",
		"tcp:[::1]:10110":              "tcp:[::1]:10110",
		"udp::10110":                   "udp::10110",
		"udp:127.0.0.1:0":              "udp:127.0.0.1:0",
		"serial:":                      "names no device",
		"serial:/dev/x?speed=3":        `"speed" is no setting`,
		"serial:/dev/x?baud=1&baud=2":  "give baud once",
		"serial:/dev/x?baud=fast":      `"fast" is no rate`,
		"serial:/dev/x?baud=0":         `"0" is no rate`,
		"serial:/dev/x?%zz":            "invalid URL escape",
		"tcp::10110":                   "it is no address",
		"tcp:host":                     "it is no address",
		"tcp:host:0":                   "it is no address",
		"tcp:host:http":                "it is no address",
		"udp:10110":                    "it is no address",
		"udp::70000":                   "it is no address",
		"http://x":                     "it is no source",
	} {
		s, err := Parse(text)
		got := s.String()
		if err != nil {
			got = err.Error()
			if !strings.HasPrefix(got, text+": ") {
				t.Errorf("%s: %s", text, got)
			}
		}
		if !strings.Contains(got, want) || (err == nil) != (got == want) {
			t.Errorf("%s: %s, want %s", text, got, want)
		}
		if err == nil && !Is(text) {
			t.Errorf("%s is no source", text)
		}
	}
	for _, text := range []string{"", "drive.jsonl", "/data/a:b", "serial", "C:drive"} {
		if Is(text) {
			t.Errorf("%q is a source", text)
		}
	}
}

// opened opens a source until the test ends, and proves then that no goroutine
// is left.
func opened(t *testing.T, source string, o Options) (*Stream, context.CancelFunc) {
	t.Helper()
	before := goleak.IgnoreCurrent()
	s, err := Parse(source)
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	o.FirstWait, o.MaxWait = time.Millisecond, 10*time.Millisecond
	st, err := s.Open(ctx, o)
	if err != nil {
		cancel()
		t.Fatal(err)
	}
	t.Cleanup(func() {
		cancel()
		for range st.Lines() { // until it is closed
		}
		goleak.VerifyNone(t, before)
	})
	return st, cancel
}

// next waits for a line.
func next(t *testing.T, st *Stream) string {
	t.Helper()
	select {
	case l, ok := <-st.Lines():
		switch {
		case !ok:
			return "closed"
		case l.Arrived.IsZero():
			t.Error("a line without a time")
		case !l.Whole:
			return string(l.Text) + "…"
		}
		return string(l.Text)
	case <-time.After(patience):
		t.Fatal("no line")
		return ""
	}
}

func want(t *testing.T, st *Stream, lines ...string) {
	t.Helper()
	for _, l := range lines {
		if got := next(t, st); got != l {
			t.Fatalf("%q, want %q", got, l)
		}
	}
}

// TestTCP: lines arrive, long ones are cut, garbage does no harm, and a
// connection that ends is made again, also after the server was away.
func TestTCP(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	accept := func() net.Conn {
		t.Helper()
		c, err := l.Accept()
		if err != nil {
			t.Fatal(err)
		}
		return c
	}
	var mu sync.Mutex
	var told []string
	st, cancel := opened(t, "tcp:"+l.Addr().String(), Options{MaxLine: 20, Report: func(s string) {
		mu.Lock()
		defer mu.Unlock()
		told = append(told, s)
	}})
	c := accept()
	fmt.Fprintf(c, "one\r\ntwo\n\xff\x00\n%s\nthree", strings.Repeat("x", 100_000))
	c.Close()
	want(t, st, "one", "two", "\xff\x00", strings.Repeat("x", 20)+"…", "three")
	c = accept()
	fmt.Fprint(c, "four\n")
	want(t, st, "four")
	address := l.Addr().String()
	l.Close()
	c.Close()
	time.Sleep(20 * time.Millisecond) // some attempts fail
	if l, err = net.Listen("tcp", address); err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	c = accept()
	defer c.Close()
	fmt.Fprint(c, "five\n")
	want(t, st, "five")
	cancel()
	want(t, st, "closed")
	mu.Lock()
	defer mu.Unlock()
	all := strings.Join(told, "\n")
	if strings.Count(all, "is lost") != 2 || strings.Count(all, "is back") != 2 || !strings.Contains(all, "the other side ended it") {
		t.Errorf("told:\n%s", all)
	}
}

// TestUDP: datagrams of any sender, several lines in one, one without an end.
func TestUDP(t *testing.T) {
	st, _ := opened(t, "udp:127.0.0.1:0", Options{})
	for _, text := range []string{"one\r\ntwo\r\n", "", "three", "\n\nfour\n"} {
		c, err := net.Dial("udp", st.Addr().String())
		if err != nil {
			t.Fatal(err)
		}
		if _, err := c.Write([]byte(text)); err != nil {
			t.Fatal(err)
		}
		// Loopback keeps the order of one socket only: wait for each.
		switch text {
		case "one\r\ntwo\r\n":
			want(t, st, "one", "two")
		case "three":
			want(t, st, "three")
		case "\n\nfour\n":
			want(t, st, "", "", "four")
		}
		c.Close()
	}
	s, _ := Parse("udp:" + st.Addr().String())
	if _, err := s.Open(t.Context(), Options{}); err == nil || !strings.Contains(err.Error(), "in use") || !strings.Contains(err.Error(), "another") {
		t.Errorf("listening twice: %v", err)
	}
}

// pty opens a pair of pseudo-terminals: what is written to the first comes out
// of the second, which is a serial port to everybody.
func pty(t *testing.T) (instrument *os.File, device string) {
	t.Helper()
	f, err := os.OpenFile("/dev/ptmx", os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	fd := int(f.Fd())
	if err := unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0); err != nil {
		t.Fatal(err)
	}
	n, err := unix.IoctlGetInt(fd, unix.TIOCGPTN)
	if err != nil {
		t.Fatal(err)
	}
	return f, fmt.Sprintf("/dev/pts/%d", n)
}

// TestSerial: a real serial port brings lines at its rate, is lost when the
// instrument goes, and ends while it is silent.
func TestSerial(t *testing.T) {
	instrument, device := pty(t)
	lost := make(chan string, 100)
	st, cancel := opened(t, "serial:"+device+"?baud=38400", Options{Report: func(s string) {
		select {
		case lost <- s:
		default:
		}
	}})
	slave, err := os.Open(device)
	if err != nil {
		// The port is taken for this program alone: so it should be.
		if !strings.Contains(err.Error(), "busy") && os.Geteuid() != 0 {
			t.Error(err)
		}
	} else {
		// Root may look: raw, at the rate that was asked for.
		m, err := unix.IoctlGetTermios(int(slave.Fd()), unix.TCGETS)
		if err != nil {
			t.Fatal(err)
		}
		if m.Cflag&unix.CBAUD != unix.B38400 || m.Lflag&(unix.ICANON|unix.ECHO) != 0 {
			t.Errorf("mode %+v", m)
		}
		slave.Close()
	}
	fmt.Fprint(instrument, "$SDDPT,14.39,0.00*68\r\n$SDD")
	want(t, st, "$SDDPT,14.39,0.00*68")
	fmt.Fprint(instrument, "PT,1\x00\xfe\r\nlast\r\n")
	want(t, st, "$SDDPT,1\x00\xfe", "last")
	instrument.Close()
	select {
	case s := <-lost:
		if !strings.Contains(s, device) || !strings.Contains(s, "is lost") {
			t.Errorf("told: %s", s)
		}
	case <-time.After(patience):
		t.Fatal("nobody says that the port is lost")
	}
	cancel()
	want(t, st, "closed")

	// It ends while nothing comes.
	instrument, device = pty(t)
	defer instrument.Close()
	st, cancel = opened(t, "serial:"+device, Options{})
	cancel()
	want(t, st, "closed")
}

// The first opening must succeed, and says what to do otherwise.
func TestOpenErrors(t *testing.T) {
	before := goleak.IgnoreCurrent()
	defer goleak.VerifyNone(t, before)
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	address := l.Addr().String()
	l.Close()
	for text, words := range map[string]string{
		"serial:/dev/none":     "no such device",
		"serial:/etc/hostname": "serial port",
		"tcp:" + address:       "nobody answers",
		"udp:192.0.2.1:10110":  "cannot be listened on",
	} {
		s, err := Parse(text)
		if err != nil {
			t.Fatal(err)
		}
		_, err = s.Open(t.Context(), Options{})
		if err == nil || !strings.HasPrefix(err.Error(), text+": ") || !strings.Contains(err.Error(), words) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v, want %s", text, err, words)
		}
	}
}

// A stream that nobody takes from ends all the same.
func TestNobodyTakes(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	st, cancel := opened(t, "tcp:"+l.Addr().String(), Options{})
	c, err := l.Accept()
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	fmt.Fprint(c, strings.Repeat("x\n", 2*queued))
	for deadline := time.Now().Add(patience); len(st.lines) < queued; time.Sleep(time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatal("the queue does not fill")
		}
	}
	cancel()
	for deadline := time.After(patience); ; {
		select {
		case _, ok := <-st.Lines():
			if !ok {
				return
			}
		case <-deadline:
			t.Fatal("it does not end")
		}
	}
}
