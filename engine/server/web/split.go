package web

import (
	"context"
	"crypto/tls"
	"errors"
	"io"
	"net"
	"sync"
	"time"
)

const (
	// preface is what every HTTP/2 connection begins with (RFC 9113, section
	// 3.4), and no request of HTTP/1.1.
	preface = "PRI * HTTP/2.0\r\n\r\nSM\r\n\r\n"
	// patience is how long a connection may take to say what it speaks.
	patience = 5 * time.Second
	// undecided is the number of connections that may be about to. While there
	// are that many, further ones wait to be accepted.
	undecided = 1024
)

// Split parts the connections of a listener: those that begin with the preface
// of HTTP/2 and all others. It takes the listener over; closing either part
// closes it and the other part. A connection that says nothing for some seconds,
// or stops within the preface, is closed. With secure they are encrypted, and
// what is in them is parted.
func Split(l net.Listener, secure *tls.Config) (http2, others net.Listener) {
	return split(l, secure, patience)
}

func split(l net.Listener, secure *tls.Config, patience time.Duration) (http2, others *part) {
	ctx, stop := context.WithCancelCause(context.Background())
	s := &splitter{l: l, secure: secure, patience: patience, ctx: ctx, stop: stop, undecided: make(chan struct{}, undecided), close: sync.OnceValue(l.Close)}
	s.http2 = &part{splitter: s, conns: make(chan net.Conn)}
	s.others = &part{splitter: s, conns: make(chan net.Conn)}
	s.running.Go(s.run)
	return s.http2, s.others
}

// splitter is what the two parts of a listener share.
type splitter struct {
	l             net.Listener
	secure        *tls.Config // nil for plain text
	patience      time.Duration
	http2, others *part

	ctx       context.Context // done when closed; its cause is Accept's error
	stop      context.CancelCauseFunc
	undecided chan struct{} // holds a token for each connection in question
	running   sync.WaitGroup
	close     func() error // the listener, once
}

// run accepts connections until the listener is closed.
func (s *splitter) run() {
	for {
		select {
		case s.undecided <- struct{}{}:
		case <-s.ctx.Done():
			return
		}
		c, err := s.l.Accept()
		if err != nil {
			<-s.undecided
			if passing, ok := err.(interface{ Temporary() bool }); ok && passing.Temporary() {
				time.Sleep(10 * time.Millisecond)
				continue
			}
			s.stop(err)
			return
		}
		s.running.Go(func() {
			defer func() { <-s.undecided }()
			s.part(c)
		})
	}
}

// part hands a connection on once it is known what it speaks.
func (s *splitter) part(c net.Conn) {
	raw := c
	hurry := context.AfterFunc(s.ctx, func() { _ = raw.SetDeadline(time.Unix(1, 0)) })
	_ = raw.SetDeadline(time.Now().Add(s.patience))
	c, err := s.encrypt(raw)
	var head []byte
	var isHTTP2 bool
	if err == nil {
		head, isHTTP2, err = sniff(c)
	}
	if !hurry() || err != nil {
		_ = c.Close()
		return
	}
	_ = raw.SetDeadline(time.Time{})
	to := s.others
	if isHTTP2 {
		to = s.http2
	}
	select {
	case to.conns <- &begun{Conn: c, head: head}:
	case <-s.ctx.Done():
		_ = c.Close()
	}
}

// inTheClear is the answer to a request of HTTP/1.1 where encryption is wanted.
const inTheClear = "HTTP/1.0 400 Bad Request\r\nContent-Type: text/plain\r\n\r\nthis port is encrypted: ask by https\n"

// encrypt shakes hands. Who speaks HTTP in the clear is told so.
func (s *splitter) encrypt(c net.Conn) (net.Conn, error) {
	if s.secure == nil {
		return c, nil
	}
	t := tls.Server(c, s.secure)
	err := t.HandshakeContext(s.ctx)
	var plain tls.RecordHeaderError
	if errors.As(err, &plain) && plain.Conn != nil {
		switch string(plain.RecordHeader[:]) {
		case "GET /", "HEAD ", "POST ", "OPTIO":
			_, _ = io.WriteString(c, inTheClear)
		}
	}
	return t, err
}

// sniff reads until it is certain whether a connection begins with the preface
// of HTTP/2, and returns what it has read.
func sniff(r io.Reader) (head []byte, isHTTP2 bool, err error) {
	head = make([]byte, 0, len(preface))
	for len(head) < len(preface) {
		n, err := r.Read(head[len(head):cap(head)])
		head = head[:len(head)+n]
		if string(head) != preface[:len(head)] {
			return head, false, nil
		}
		if err != nil && len(head) < len(preface) {
			return head, false, err
		}
	}
	return head, true, nil
}

// part is one of the listeners that Split returns.
type part struct {
	*splitter
	conns chan net.Conn
}

// Accept waits for the next connection of this part.
func (p *part) Accept() (net.Conn, error) {
	select {
	case c := <-p.conns:
		return c, nil
	case <-p.ctx.Done():
		return nil, context.Cause(p.ctx)
	}
}

// Close closes both parts and waits until no connection is in question.
func (p *part) Close() error {
	p.stop(net.ErrClosed)
	err := p.close()
	p.running.Wait()
	return err
}

// Addr is the address of the whole listener.
func (p *part) Addr() net.Addr { return p.l.Addr() }

// begun is a connection whose first bytes have been read.
type begun struct {
	net.Conn
	head []byte
}

func (c *begun) Read(b []byte) (int, error) {
	if len(c.head) == 0 {
		return c.Conn.Read(b)
	}
	n := copy(b, c.head)
	c.head = c.head[n:]
	return n, nil
}

// Encryption returns what was agreed with the other end; nil in plain text.
func (c *begun) Encryption() *tls.ConnectionState { return encryption(c.Conn) }

// encryption looks through what wraps a connection.
func encryption(c net.Conn) *tls.ConnectionState {
	switch c := c.(type) {
	case *tls.Conn:
		state := c.ConnectionState()
		return &state
	case interface{ Encryption() *tls.ConnectionState }:
		return c.Encryption()
	}
	return nil
}

// CloseWrite is what net/http looks for, so that its last word arrives where
// the client has sent more than was read.
func (c *begun) CloseWrite() error { return closeWrite(c.Conn) }

func closeWrite(c net.Conn) error {
	if c, ok := c.(interface{ CloseWrite() error }); ok {
		return c.CloseWrite()
	}
	return nil
}
