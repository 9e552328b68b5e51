package livelog

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"net"
	"sync"
	"time"

	"go.bug.st/serial"

	"leadline/engine/logfile"
)

// Options say how to read; the zero value is useful.
type Options struct {
	// MaxLine is the longest line; 0 is logfile.MaxSentenceLine.
	MaxLine int
	// FirstWait and MaxWait are how long to wait before a lost source is opened
	// again: twice as long each time, until it brings a line; 0 is half a
	// second and half a minute.
	FirstWait, MaxWait time.Duration
	// Report, if set, is told in a line that the source was lost and found. It
	// is called from another goroutine.
	Report func(text string)
}

// Line is one line as it came.
type Line struct {
	Text    []byte
	Whole   bool // false for the beginning of one that was too long
	Arrived time.Time
}

// queued is how many lines wait for the one who takes them: some seconds of
// the fastest instruments. Beyond, a serial port and a connection wait, and
// datagrams are lost.
const queued = 1024

// Stream is an open source.
type Stream struct {
	source Source
	o      Options
	lines  chan Line
	addr   net.Addr
}

// Open opens a source. It ends with ctx; until then one goroutine reads it.
func (s Source) Open(ctx context.Context, o Options) (*Stream, error) {
	if o.MaxLine == 0 {
		o.MaxLine = logfile.MaxSentenceLine
	}
	if o.FirstWait == 0 {
		o.FirstWait = 500 * time.Millisecond
	}
	if o.MaxWait == 0 {
		o.MaxWait = 30 * time.Second
	}
	st := &Stream{source: s, o: o, lines: make(chan Line, queued)}
	in, err := s.open(ctx)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", s, err)
	}
	if p, ok := in.(*packets); ok {
		st.addr = p.LocalAddr()
	}
	go st.run(ctx, in)
	return st, nil
}

// Lines gives the lines; it is closed when the context has ended.
func (st *Stream) Lines() <-chan Line { return st.lines }

// Addr is where datagrams are listened for; nil for other sources.
func (st *Stream) Addr() net.Addr { return st.addr }

// open opens the source once.
func (s Source) open(ctx context.Context) (io.ReadCloser, error) {
	switch s.kind {
	case tcp:
		d := net.Dialer{Timeout: 10 * time.Second}
		c, err := d.DialContext(ctx, "tcp", s.target)
		if err != nil {
			return nil, fmt.Errorf("nobody answers (%w): is it switched on?", reason(err))
		}
		return c, nil
	case udp:
		var l net.ListenConfig
		c, err := l.ListenPacket(ctx, "udp", s.target)
		if err != nil {
			return nil, fmt.Errorf("it cannot be listened on (%w): give another address or port", reason(err))
		}
		return &packets{PacketConn: c}, nil
	}
	p, err := serial.Open(s.target, &serial.Mode{BaudRate: s.baud})
	if errors.Is(err, fs.ErrNotExist) {
		return nil, errors.New("there is no such device: is it plugged in?")
	}
	if err != nil {
		return nil, fmt.Errorf("it cannot be opened (%w): is it a serial port, free, and are you allowed to?", err)
	}
	return p, nil
}

// reason is the innermost word of a network error.
func reason(err error) error {
	var op *net.OpError
	if errors.As(err, &op) {
		return op.Err
	}
	return err
}

// run is a goroutine; it ends with the context.
func (st *Stream) run(ctx context.Context, in io.ReadCloser) {
	defer close(st.lines)
	wait := st.o.FirstWait
	for {
		lines, err := st.read(ctx, in)
		if ctx.Err() != nil {
			return
		}
		if lines > 0 {
			wait = st.o.FirstWait
		}
		if errors.Is(err, io.EOF) {
			err = errors.New("the other side ended it")
		}
		st.report("%s is lost: %v; trying again in %v", st.source, err, wait)
		for in = nil; in == nil; {
			select {
			case <-time.After(wait):
			case <-ctx.Done():
				return
			}
			wait = min(2*wait, st.o.MaxWait)
			if in, err = st.source.open(ctx); err != nil {
				in = nil
			}
		}
		st.report("%s is back", st.source)
	}
}

func (st *Stream) report(format string, args ...any) {
	if st.o.Report != nil {
		st.o.Report(fmt.Sprintf(format, args...))
	}
}

// read passes lines on until in fails or the context ends, and closes in.
func (st *Stream) read(ctx context.Context, in io.ReadCloser) (n int, err error) {
	var once sync.Once
	shut := func() { once.Do(func() { _ = in.Close() }) }
	defer shut()
	defer context.AfterFunc(ctx, shut)()
	r := logfile.NewLines(in, st.o.MaxLine)
	for {
		text, whole, err := r.Next()
		if err != nil {
			return n, err
		}
		n++
		select {
		case st.lines <- Line{append([]byte(nil), text...), whole, time.Now()}:
		case <-ctx.Done():
			return n, ctx.Err()
		}
	}
}

// packets reads datagrams as a stream in which each ends its last line.
type packets struct {
	net.PacketConn
	buf  []byte
	rest []byte
}

// maxDatagram is the largest there is.
const maxDatagram = 64 << 10

// Read implements io.Reader.
func (p *packets) Read(b []byte) (int, error) {
	for len(p.rest) == 0 {
		if p.buf == nil {
			p.buf = make([]byte, maxDatagram+1)
		}
		n, _, err := p.ReadFrom(p.buf[:maxDatagram])
		if err != nil {
			return 0, err
		}
		if n > 0 && p.buf[n-1] != '\n' {
			p.buf[n] = '\n'
			n++
		}
		p.rest = p.buf[:n]
	}
	n := copy(b, p.rest)
	p.rest = p.rest[n:]
	return n, nil
}
