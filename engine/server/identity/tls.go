package identity

import (
	"bytes"
	"crypto/sha256"
	"crypto/tls"
	"crypto/x509"
	"encoding/pem"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"slices"
	"sync"
	"time"
)

// Encryption is TLS from files that may be replaced at any time.
type Encryption struct {
	// Certificate and Key are the server's, PEM: its certificate first, then
	// those between it and the root.
	Certificate, Key string
	// Clients holds the authorities, PEM, whose client certificates say who
	// calls; empty asks for none. A certificate is taken if there is one: who
	// may do what without one is decided for each call.
	Clients string
	// Log takes what the operator should know; nil is nothing.
	Log *slog.Logger

	mu     sync.Mutex
	read   [sha256.Size]byte // of the files' contents that were tried last
	config *tls.Config       // of the last that were good
	until  time.Time
}

// Open reads the files for the first time.
func (e *Encryption) Open() error {
	if e.Log == nil {
		e.Log = slog.New(slog.DiscardHandler)
	}
	if e.Certificate == "" || e.Key == "" {
		return errors.New("identity: encryption needs a certificate and its key")
	}
	e.mu.Lock()
	defer e.mu.Unlock()
	return e.renew()
}

// Config is for a listener: each connection gets what the files hold then. A
// client that can speak HTTP/1.1 is a browser or the like and is answered in
// that; one that speaks HTTP/2 alone is gRPC's (RFC 7301).
func (e *Encryption) Config() *tls.Config {
	return &tls.Config{MinVersion: tls.VersionTLS12, GetConfigForClient: func(hello *tls.ClientHelloInfo) (*tls.Config, error) {
		c := e.current()
		if slices.Contains(hello.SupportedProtos, "http/1.1") {
			c = c.Clone()
			c.NextProtos = []string{"http/1.1"}
		}
		return c, nil
	}}
}

// Until is when the server's certificate ends.
func (e *Encryption) Until() time.Time {
	e.current()
	e.mu.Lock()
	defer e.mu.Unlock()
	return e.until
}

func (e *Encryption) current() *tls.Config {
	e.mu.Lock()
	defer e.mu.Unlock()
	if err := e.renew(); err != nil {
		e.Log.Error("replaced certificate passed over, the one before goes on", "error", err)
	}
	return e.config
}

// renew reads the files, a few kilobytes, and takes them if they have changed
// and are good. It says what is wrong once.
func (e *Encryption) renew() error {
	var texts [3][]byte
	var unread error
	for i, path := range []string{e.Certificate, e.Key, e.Clients} {
		if path == "" {
			continue
		}
		text, err := os.ReadFile(path)
		if err != nil {
			unread = err
			text = []byte(err.Error())
		}
		texts[i] = text
	}
	sum := sha256.Sum256(bytes.Join(texts[:], []byte{0}))
	if sum == e.read {
		return nil
	}
	e.read = sum
	if unread != nil {
		return unread
	}
	cert, err := tls.X509KeyPair(texts[0], texts[1])
	if err != nil {
		return fmt.Errorf("%s and %s: %w", e.Certificate, e.Key, err)
	}
	c := &tls.Config{
		MinVersion: tls.VersionTLS12, Certificates: []tls.Certificate{cert}, NextProtos: []string{"h2"},
		// A resumed session would be of a client whose authority may be gone.
		SessionTicketsDisabled: true,
	}
	if e.Clients != "" {
		if c.ClientCAs, err = authorities(texts[2]); err != nil {
			return fmt.Errorf("%s: %w", e.Clients, err)
		}
		c.ClientAuth = tls.VerifyClientCertIfGiven
	}
	if e.config != nil {
		e.Log.Info("certificate replaced", "until", cert.Leaf.NotAfter.UTC())
	}
	e.config, e.until = c, cert.Leaf.NotAfter
	return nil
}

// Authorities reads the certificates of authorities, PEM.
func Authorities(path string) (*x509.CertPool, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	pool, err := authorities(text)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return pool, nil
}

func authorities(text []byte) (*x509.CertPool, error) {
	pool, n := x509.NewCertPool(), 0
	for {
		var block *pem.Block
		if block, text = pem.Decode(text); block == nil {
			break
		}
		if block.Type != "CERTIFICATE" {
			return nil, fmt.Errorf("a %s among the certificates of authorities", block.Type)
		}
		cert, err := x509.ParseCertificate(block.Bytes)
		if err != nil {
			return nil, fmt.Errorf("certificate %d: %w", n+1, err)
		}
		pool.AddCert(cert)
		n++
	}
	if n == 0 {
		return nil, errors.New("no certificate of an authority: give PEM files")
	}
	return pool, nil
}
