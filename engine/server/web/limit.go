package web

import (
	"crypto/tls"
	"io"
	"log/slog"
	"net"
	"net/http"
	"sync"
	"time"
)

// limit bounds the size of a request's body, the time that its sender may take
// for it, and the time that a reader may take for each part of the answer. An
// answer as a whole may take as long as it likes: it may be a stream. The writer
// must be extended when the request is answered.
func (s *Server) limit(w http.ResponseWriter, r *http.Request) *writer {
	c := http.NewResponseController(w)
	out := &writer{ResponseWriter: w, c: c, patience: s.cfg.times.write}
	out.extend()
	if r.Body != http.NoBody {
		_ = c.SetReadDeadline(time.Now().Add(s.cfg.times.body))
		r.Body = &body{ReadCloser: http.MaxBytesReader(w, r.Body, int64(s.cfg.MessageBytes)), c: c}
	}
	return out
}

// body is a request's body. Once it has been read nothing is late any more:
// the connection is then only watched for its end.
type body struct {
	io.ReadCloser
	c *http.ResponseController
}

func (b *body) Read(p []byte) (int, error) {
	n, err := b.ReadCloser.Read(p)
	if err == io.EOF {
		_ = b.c.SetReadDeadline(time.Time{})
	}
	return n, err
}

// writer is an answer's.
type writer struct {
	http.ResponseWriter
	c        *http.ResponseController
	patience time.Duration
}

// extend gives the reader its time anew.
func (w *writer) extend() { _ = w.c.SetWriteDeadline(time.Now().Add(w.patience)) }

func (w *writer) Write(p []byte) (int, error) {
	w.extend()
	return w.ResponseWriter.Write(p)
}

func (w *writer) Flush() {
	w.extend()
	_ = w.c.Flush()
}

// Unwrap is for http.ResponseController.
func (w *writer) Unwrap() http.ResponseWriter { return w.ResponseWriter }

// bounded is a listener with at most as many connections as free holds tokens.
// Further ones are told so and closed.
type bounded struct {
	net.Listener
	free chan struct{}
	log  *slog.Logger
	said time.Time // when the log last heard of it
}

const full = "HTTP/1.1 503 Service Unavailable\r\nConnection: close\r\nRetry-After: 10\r\nContent-Type: text/plain\r\nContent-Length: 52\r\n\r\n" +
	"the server has all its HTTP connections: try later.\n"

func (b *bounded) Accept() (net.Conn, error) {
	for {
		c, err := b.Listener.Accept()
		if err != nil {
			return nil, err
		}
		select {
		case b.free <- struct{}{}:
			return &counted{Conn: c, free: sync.OnceFunc(func() { <-b.free })}, nil
		default:
		}
		if now := time.Now(); now.Sub(b.said) > time.Minute {
			b.said = now
			b.log.Warn("HTTP connection refused: too many at once", "limit", cap(b.free), "from", c.RemoteAddr())
		}
		_ = c.SetWriteDeadline(time.Now().Add(time.Second))
		_, _ = io.WriteString(c, full)
		_ = c.Close()
	}
}

// counted gives its token back when it is closed.
type counted struct {
	net.Conn
	free func()
}

func (c *counted) Close() error {
	c.free()
	return c.Conn.Close()
}

// Encryption is what was agreed with the other end; nil in plain text.
func (c *counted) Encryption() *tls.ConnectionState { return encryption(c.Conn) }

func (c *counted) CloseWrite() error { return closeWrite(c.Conn) }
