package web

import (
	"bytes"
	"errors"
	"io"
	"net"
	"os"
	"strings"
	"testing"
	"testing/iotest"
	"time"

	"go.uber.org/goleak"
)

// TestSniff proves that a connection is told by as few bytes as can be, however
// they come.
func TestSniff(t *testing.T) {
	for _, c := range []struct {
		what, input string
		http2       bool
		err         error
	}{
		{"HTTP/2", preface + "rest", true, nil},
		{"the preface alone", preface, true, nil},
		{"GET", "GET / HTTP/1.1\r\n\r\n", false, nil},
		{"POST, which begins as the preface does", "POST / HTTP/1.1\r\n\r\n", false, nil},
		{"garbage", "\x16\x03\x01\x00\xff", false, nil},
		{"a wrong version", "PRI * HTTP/3.0\r\n\r\nSM\r\n\r\n", false, nil},
		{"nothing", "", false, io.EOF},
		{"a part of the preface", preface[:23], false, io.EOF},
	} {
		for how, r := range map[string]io.Reader{
			"at once": strings.NewReader(c.input), "byte by byte": iotest.OneByteReader(strings.NewReader(c.input)),
			"error with the last": iotest.DataErrReader(strings.NewReader(c.input)),
		} {
			head, http2, err := sniff(r)
			if http2 != c.http2 || !errors.Is(err, c.err) || !strings.HasPrefix(c.input, string(head)) {
				t.Errorf("%s, %s: read %q, HTTP/2 %v, %v", c.what, how, head, http2, err)
			}
		}
	}
}

// FuzzSniff: whatever comes in whatever pieces, nothing is lost, and only what
// begins with the preface is HTTP/2.
func FuzzSniff(f *testing.F) {
	for _, s := range []string{preface, preface + "x", preface[:5], "GET / HTTP/1.1\r\n", "P", ""} {
		f.Add([]byte(s), uint8(1))
		f.Add([]byte(s), uint8(7))
	}
	f.Fuzz(func(t *testing.T, input []byte, piece uint8) {
		here, there := net.Pipe()
		go func() {
			for rest := input; len(rest) > 0; {
				n, err := there.Write(rest[:min(len(rest), 1+int(piece))])
				if err != nil {
					break
				}
				rest = rest[n:]
			}
			there.Close()
		}()
		head, http2, err := sniff(here)
		got, _ := io.ReadAll(&begun{Conn: here, head: head})
		here.Close()
		if !bytes.Equal(got, input) {
			t.Errorf("%q became %q", input, got)
		}
		if begins := strings.HasPrefix(string(input), preface); http2 != begins {
			t.Errorf("%q is HTTP/2: %v", input, http2)
		}
		if within := strings.HasPrefix(preface, string(input)) && len(input) < len(preface); within != (err != nil) {
			t.Errorf("%q: %v", input, err)
		}
	})
}

// splitHere splits a listener until the test ends, and proves then that nothing
// is left.
func splitHere(t *testing.T, patience time.Duration) (address string, http2, others *part) {
	t.Helper()
	before := goleak.IgnoreCurrent()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	http2, others = split(l, nil, patience)
	t.Cleanup(func() {
		_ = others.Close()
		_ = http2.Close()
		for _, p := range []*part{http2, others} {
			if _, err := p.Accept(); !errors.Is(err, net.ErrClosed) {
				t.Errorf("a closed part accepts: %v", err)
			}
		}
		goleak.VerifyNone(t, before)
	})
	return l.Addr().String(), http2, others
}

func dial(t *testing.T, address, words string) net.Conn {
	t.Helper()
	c, err := net.Dial("tcp", address)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Close() })
	if _, err := io.WriteString(c, words); err != nil {
		t.Fatal(err)
	}
	return c
}

// ended waits until the other side has closed a connection.
func ended(t *testing.T, what string, c net.Conn) {
	t.Helper()
	_ = c.SetReadDeadline(time.Now().Add(30 * time.Second))
	if b, err := io.ReadAll(c); errors.Is(err, os.ErrDeadlineExceeded) {
		t.Errorf("%s: still open after %q", what, b)
	}
}

// TestSplitParts proves that each kind comes out at its side with all its bytes,
// while others have said nothing or too little, and that those are given up.
func TestSplitParts(t *testing.T) {
	address, http2, others := splitHere(t, 300*time.Millisecond)
	idle := map[string]net.Conn{
		"silence":                dial(t, address, ""),
		"a byte":                 dial(t, address, "P"),
		"a part of the preface":  dial(t, address, preface[:20]),
		"and another part of it": dial(t, address, preface[:23]),
	}
	gone := dial(t, address, "PR")
	gone.Close()
	for words, p := range map[string]*part{preface + "abc": http2, "GET /": others, "\x00": others} {
		c := dial(t, address, words)
		got, err := p.Accept()
		if err != nil {
			t.Fatal(err)
		}
		_ = c.(*net.TCPConn).CloseWrite()
		if b, err := io.ReadAll(got); string(b) != words || err != nil {
			t.Errorf("%q arrived as %q, %v", words, b, err)
		}
		if got.RemoteAddr().String() != c.LocalAddr().String() || p.Addr().String() != address {
			t.Errorf("addresses %v and %v", got.RemoteAddr(), p.Addr())
		}
		got.Close()
	}
	for what, c := range idle {
		ended(t, what, c)
	}
}

// TestSplitCloses proves that closing does not wait for those who say nothing,
// nor for those that nobody accepts.
func TestSplitCloses(t *testing.T) {
	address, http2, _ := splitHere(t, time.Hour)
	silent, full := dial(t, address, "P"), dial(t, address, preface)
	time.Sleep(20 * time.Millisecond) // both are likely in now; it must hold anyhow
	if err := http2.Close(); err != nil {
		t.Error(err)
	}
	ended(t, "a byte", silent)
	ended(t, "an HTTP/2 connection that nobody accepted", full)
	if c, err := net.Dial("tcp", address); err == nil {
		c.Close()
		t.Error("a closed listener takes connections")
	}
}

// failing is a listener that fails for a while, then for good.
type failing struct {
	net.Listener
	errs []error
}

func (l *failing) Accept() (net.Conn, error) {
	err := l.errs[0]
	l.errs = l.errs[1:]
	return nil, err
}

type passing struct{ error }

func (passing) Temporary() bool { return true }

// TestSplitAcceptFails proves that a passing failure of a listener is passed
// over and that another ends both parts.
func TestSplitAcceptFails(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	broken := errors.New("broken")
	http2, others := split(&failing{l, []error{passing{io.EOF}, passing{io.EOF}, broken}}, nil, time.Hour)
	for _, p := range []*part{http2, others} {
		if _, err := p.Accept(); !errors.Is(err, broken) {
			t.Errorf("accept: %v", err)
		}
	}
	if err := others.Close(); err != nil {
		t.Error(err)
	}
}
