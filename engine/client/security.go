package client

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	mathrand "math/rand/v2"
	"net"
	"os"
	"slices"
	"strings"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/resolver"
	"google.golang.org/grpc/resolver/manual"
)

// Security is how a server is reached and who calls it. The zero value is plain
// text and nobody, which a server takes on its own machine alone unless it was
// told otherwise.
type Security struct {
	// Encrypted asks for TLS; the fields below with a file ask for it, too, all
	// but TokenFile.
	Encrypted bool
	// AuthorityFile holds the authorities, PEM, of which the server's
	// certificate must be; "" is those of the system.
	AuthorityFile string
	// CertificateFile and KeyFile are the caller's certificate and its key,
	// PEM; they are read for each connection, and so may be replaced.
	CertificateFile, KeyFile string
	// TokenFile holds a bearer token; it is read for each call, and so may be
	// replaced. Without TLS it is sent to this machine alone.
	TokenFile string
}

// encrypted reports whether TLS is asked for.
func (s Security) encrypted() bool {
	return s.Encrypted || s.AuthorityFile != "" || s.CertificateFile != "" || s.KeyFile != ""
}

// DialSecure prepares a connection to host:port as Dial does.
func DialSecure(target string, s Security) (*grpc.ClientConn, error) {
	options := dialOptions()
	addresses := strings.Split(target, ",")
	if len(addresses) > 1 {
		t := &turning{r: manual.NewBuilderWithScheme("leadline"), all: inAnyOrder(addresses), aside: turnedFor}
		t.r.InitialState(resolver.State{Addresses: t.all})
		options = append(options, t.options()...)
		target = t.r.Scheme() + ":///servers"
	}
	if !s.encrypted() {
		options = append(options, grpc.WithTransportCredentials(insecure.NewCredentials()))
	} else {
		c, err := s.config()
		if err != nil {
			return nil, err
		}
		options = append(options, grpc.WithTransportCredentials(credentials.NewTLS(c)))
	}
	if s.TokenFile != "" {
		if _, err := readToken(s.TokenFile); err != nil {
			return nil, err
		}
		if !s.encrypted() && slices.ContainsFunc(addresses, func(a string) bool { return !onThisMachine(a) }) {
			return nil, errors.New("client: a token would go in the clear to another machine: ask for TLS")
		}
		options = append(options, grpc.WithPerRPCCredentials(tokenOf{s.TokenFile, s.encrypted()}))
	}
	return grpc.NewClient(target, options...)
}

// inAnyOrder are several servers' addresses, of which the first that answers is
// used: each client begins with another one.
func inAnyOrder(addresses []string) (out []resolver.Address) {
	for _, i := range mathrand.Perm(len(addresses)) {
		a := strings.TrimSpace(addresses[i])
		name, _, err := net.SplitHostPort(a)
		if err != nil {
			name = a
		}
		out = append(out, resolver.Address{Addr: a, ServerName: name})
	}
	return out
}

func (s Security) config() (*tls.Config, error) {
	c := &tls.Config{MinVersion: tls.VersionTLS12}
	if s.AuthorityFile != "" {
		text, err := os.ReadFile(s.AuthorityFile)
		if err != nil {
			return nil, fmt.Errorf("client: authorities: %w", err)
		}
		c.RootCAs = x509.NewCertPool()
		if !c.RootCAs.AppendCertsFromPEM(text) {
			return nil, fmt.Errorf("client: %s holds no certificate: give those of authorities, PEM", s.AuthorityFile)
		}
	}
	if s.CertificateFile == "" && s.KeyFile == "" {
		return c, nil
	}
	own := func(*tls.CertificateRequestInfo) (*tls.Certificate, error) {
		cert, err := tls.LoadX509KeyPair(s.CertificateFile, s.KeyFile)
		if err != nil {
			return nil, fmt.Errorf("client: certificate %q and key %q: %w", s.CertificateFile, s.KeyFile, err)
		}
		return &cert, nil
	}
	if _, err := own(nil); err != nil {
		return nil, err
	}
	c.GetClientCertificate = own
	return c, nil
}

// onThisMachine reports whether a target is a loopback address.
func onThisMachine(target string) bool {
	host, _, err := net.SplitHostPort(target)
	return err == nil && (host == "localhost" || net.ParseIP(host).IsLoopback())
}

// tokenOf shows the token of a file with each call.
type tokenOf struct {
	file      string
	encrypted bool
}

func (t tokenOf) GetRequestMetadata(context.Context, ...string) (map[string]string, error) {
	token, err := readToken(t.file)
	if err != nil {
		return nil, err
	}
	return map[string]string{"authorization": "Bearer " + token}, nil
}

func (t tokenOf) RequireTransportSecurity() bool { return t.encrypted }

func readToken(path string) (string, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return "", fmt.Errorf("client: token: %w", err)
	}
	token := strings.TrimSpace(string(text))
	if token == "" || strings.ContainsAny(token, " \t\r\n") {
		return "", fmt.Errorf("client: %s holds no token: give the token alone", path)
	}
	return token, nil
}
