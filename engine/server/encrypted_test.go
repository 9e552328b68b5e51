package server

import (
	"context"
	"crypto/tls"
	"io"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/server/identity"
	"leadline/fixtures/credentials"
	leadlinev1 "leadline/proto/leadline/v1"
)

// encrypted is a server that encrypts, knows callers by certificates, and also
// by tokens.
type encrypted struct {
	address string
	ca      *credentials.Authority
	folder  string
	caFile  string
	token   maker
}

func encryptedServer(t *testing.T, cfg Config) *encrypted {
	t.Helper()
	e := &encrypted{ca: credentials.NewAuthority(t), folder: t.TempDir()}
	e.caFile = e.ca.File(t, filepath.Join(e.folder, "ca.pem"))
	files := e.ca.Server(t, e.folder, "fleet.example")
	tls := &identity.Encryption{Certificate: files.Certificate, Key: files.Key, Clients: e.caFile}
	if err := tls.Open(); err != nil {
		t.Fatal(err)
	}
	cfg.Encryption = tls.Config()
	cfg.Access, e.token = byToken(t)
	cfg.Access.Certificates = true
	_, conn := serve(t, cfg)
	e.address = conn.Target()
	return e
}

// as connects with a client certificate for a name.
func (e *encrypted) as(t *testing.T, ca *credentials.Authority, until time.Time, name string) *grpc.ClientConn {
	t.Helper()
	files := ca.Client(t, t.TempDir(), until, name)
	return e.dial(t, client.Security{AuthorityFile: e.caFile, CertificateFile: files.Certificate, KeyFile: files.Key})
}

func (e *encrypted) dial(t *testing.T, s client.Security) *grpc.ClientConn {
	t.Helper()
	conn, err := client.DialSecure(e.address, s)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { conn.Close() })
	return conn
}

// TestClientCertificates proves that a certificate names a vehicle, over gRPC and
// HTTP; that one of another authority, or one that has ended, makes no
// connection; and that a token counts before it.
func TestClientCertificates(t *testing.T) {
	e := encryptedServer(t, Config{NewSession: newTally})
	soon := time.Now().Add(time.Hour)
	van := e.as(t, e.ca, soon, "leadline://vehicle/v")
	if _, err := fed(limited(t), van, client.Drive{Header: header("v")}, voyage(1, 3)); err != nil {
		t.Errorf("its own drive: %v", err)
	}
	if _, err := fed(limited(t), van, client.Drive{Header: header("w")}, voyage(1, 3)); saidBy(err).reason != leadlinev1.Reason_REASON_NOT_ALLOWED {
		t.Errorf("another's drive: %v", err)
	}
	maps := func(conn *grpc.ClientConn, ctx context.Context) error {
		_, err := leadlinev1.NewPositionServiceClient(conn).ListMaps(ctx, &leadlinev1.ListMapsRequest{})
		return err
	}
	nobody := e.dial(t, client.Security{AuthorityFile: e.caFile})
	// What breaks in the handshake has the words of whoever notices first.
	for _, c := range []struct {
		what   string
		err    error
		reason leadlinev1.Reason
		words  string
	}{
		{"nobody", maps(nobody, limited(t)), leadlinev1.Reason_REASON_NO_IDENTITY, "or a client certificate"},
		{"a token alone", maps(nobody, showing(t, e.token("anna", "roles", "dispatcher"))), 0, ""},
		{"a token that does not count, beside a certificate that does", maps(van, showing(t, "token")), leadlinev1.Reason_REASON_BAD_IDENTITY, "no signed JWT"},
		{"no name", maps(e.as(t, e.ca, soon, "https://v.example"), limited(t)), leadlinev1.Reason_REASON_BAD_IDENTITY, "0 names"},
		{"another authority", maps(e.as(t, credentials.NewAuthority(t), soon, "leadline://vehicle/v"), limited(t)), 0, " "},
		{"ended", maps(e.as(t, e.ca, time.Now().Add(-time.Minute), "leadline://vehicle/v"), limited(t)), 0, " "},
	} {
		if got := saidBy(c.err); (c.err == nil) != (c.words == "") || got.reason != c.reason || !strings.Contains(got.message, c.words) {
			t.Errorf("%s: %v, want %v with %q", c.what, c.err, c.reason, c.words)
		}
	}
	// The dispatcher's token with the van's certificate: the token is who calls.
	resp, err := leadlinev1.NewPositionServiceClient(van).ListVehicles(showing(t, e.token("anna", "roles", "dispatcher")), &leadlinev1.ListVehiclesRequest{})
	if err != nil || len(resp.GetVehicles()) != 1 {
		t.Errorf("a token beside a certificate: %v, %v", resp, err)
	}
}

// TestEncryptedHTTP proves that browsers' protocols are served on the encrypted
// port, to whom ALPN offers HTTP/1.1; that a certificate counts there; and what
// becomes of those that speak in the clear.
func TestEncryptedHTTP(t *testing.T) {
	e := encryptedServer(t, Config{NewSession: newTally})
	files := e.ca.Client(t, t.TempDir(), time.Now().Add(time.Hour), "leadline://vehicle/v")
	own, err := tls.LoadX509KeyPair(files.Certificate, files.Key)
	if err != nil {
		t.Fatal(err)
	}
	pool, err := identity.Authorities(e.caFile)
	if err != nil {
		t.Fatal(err)
	}
	ask := func(cfg *tls.Config, url, method string) (int, string) {
		cfg.RootCAs = pool
		c := &http.Client{Transport: &http.Transport{TLSClientConfig: cfg, DisableKeepAlives: true, ForceAttemptHTTP2: true}}
		req, err := http.NewRequestWithContext(limited(t), http.MethodPost, url+"/leadline.v1.PositionService/"+method, strings.NewReader("{}"))
		if err != nil {
			t.Fatal(err)
		}
		req.Header.Set("Content-Type", "application/json")
		r, err := c.Do(req)
		if err != nil {
			return 0, err.Error()
		}
		defer r.Body.Close()
		text, err := io.ReadAll(r.Body)
		if err != nil {
			t.Fatal(err)
		}
		if r.ProtoMajor != 1 {
			t.Errorf("%s was answered by %s", method, r.Proto)
		}
		return r.StatusCode, string(text)
	}
	https := "https://" + e.address
	if code, body := ask(&tls.Config{Certificates: []tls.Certificate{own}}, https, "ListMaps"); code != 200 || !strings.Contains(body, `"sea"`) {
		t.Errorf("with a certificate: %d %s", code, body)
	}
	if code, body := ask(&tls.Config{Certificates: []tls.Certificate{own}}, https, "ListVehicles"); code != 403 || !strings.Contains(body, "NOT_ALLOWED") {
		t.Errorf("what a vehicle may not: %d %s", code, body)
	}
	if code, body := ask(&tls.Config{}, https, "ListMaps"); code != 401 || !strings.Contains(body, "NO_IDENTITY") {
		t.Errorf("nobody: %d %s", code, body)
	}
	if code, body := ask(&tls.Config{ServerName: "fleet.example"}, https, "ListMaps"); code != 401 || !strings.Contains(body, "NO_IDENTITY") {
		t.Errorf("under the certificate's name: %d %s", code, body)
	}
	if code, body := ask(&tls.Config{}, "http://"+e.address, "ListMaps"); code != 400 || !strings.Contains(body, "https") {
		t.Errorf("in the clear: %d %s", code, body)
	}
	if _, err := leadlinev1.NewPositionServiceClient(e.dial(t, client.Security{})).ListMaps(limited(t), &leadlinev1.ListMapsRequest{}); err == nil {
		t.Error("gRPC in the clear was answered")
	}
	silent, err := net.Dial("tcp", e.address) // shakes no hands, and holds up nobody
	if err != nil {
		t.Fatal(err)
	}
	defer silent.Close()
	if code, _ := ask(&tls.Config{}, https, "ListMaps"); code != 401 {
		t.Errorf("beside one that is silent: %d", code)
	}
	old, err := tls.Dial("tcp", e.address, &tls.Config{RootCAs: pool, MaxVersion: tls.VersionTLS11, MinVersion: tls.VersionTLS10})
	if err == nil {
		old.Close()
		t.Error("TLS 1.1 was taken")
	}
}

// TestStreamEndsWithToken proves that streams end when the token does with which
// they were opened, and that the vehicle goes on with another one.
func TestStreamEndsWithToken(t *testing.T) {
	conn, token := tokenServer(t, Config{NewSession: newTally})
	brief := showing(t, token("v", "roles", []string{"vehicle", "dispatcher"}, "exp", time.Now().Add(-8*time.Second).Unix())) // 2 s, with the leeway
	api := leadlinev1.NewPositionServiceClient(conn)
	feed, err := api.Feed(brief)
	if err != nil {
		t.Fatal(err)
	}
	for _, m := range []*leadlinev1.FeedRequest{opening(&leadlinev1.Open{Header: header("v"), Drive: "d"}), batch(1, voyage(1, 1)...)} {
		if err := feed.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	follow, err := api.Follow(brief, &leadlinev1.FollowRequest{Vehicles: []string{"v"}})
	if err != nil {
		t.Fatal(err)
	}
	for {
		if _, err = follow.Recv(); err != nil {
			break
		}
	}
	for what, err := range map[string]error{"Feed": ends(feed), "Follow": err} {
		if got := saidBy(err); got.reason != leadlinev1.Reason_REASON_IDENTITY_EXPIRED || !strings.Contains(got.message, "call again") {
			t.Errorf("%s ended with %+v", what, got)
		}
	}
	again, err := api.Feed(showing(t, token("v", "roles", "vehicle")))
	if err != nil {
		t.Fatal(err)
	}
	if err := again.Send(opening(&leadlinev1.Open{Header: header("v"), Drive: "d"})); err != nil {
		t.Fatal(err)
	}
	if m, err := again.Recv(); err != nil || m.GetOpened().GetSequence() != 1 {
		t.Errorf("with another token: %v, %v", m, err)
	}
}

// TestClientSecurity proves what the client refuses before it calls anybody.
func TestClientSecurity(t *testing.T) {
	folder := t.TempDir()
	file := func(name, text string) string {
		path := filepath.Join(folder, name)
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	token := file("token", "abc\n")
	for _, c := range []struct {
		target string
		s      client.Security
		words  string
	}{
		{"127.0.0.1:1", client.Security{TokenFile: token}, ""},
		{"[::1]:1", client.Security{TokenFile: token}, ""},
		{"localhost:1", client.Security{TokenFile: token}, ""},
		{"fleet.example:1", client.Security{TokenFile: token, Encrypted: true}, ""},
		{"fleet.example:1", client.Security{TokenFile: token}, "in the clear"},
		{"127.0.0.1:1", client.Security{TokenFile: filepath.Join(folder, "none")}, "no such file"},
		{"127.0.0.1:1", client.Security{TokenFile: file("two", "a b")}, "the token alone"},
		{"127.0.0.1:1", client.Security{TokenFile: file("no", " ")}, "the token alone"},
		{"127.0.0.1:1", client.Security{AuthorityFile: token}, "no certificate"},
		{"127.0.0.1:1", client.Security{AuthorityFile: filepath.Join(folder, "none")}, "no such file"},
		{"127.0.0.1:1", client.Security{CertificateFile: token, KeyFile: token}, "PEM"},
		{"127.0.0.1:1", client.Security{CertificateFile: token}, "no such file"},
	} {
		conn, err := client.DialSecure(c.target, c.s)
		if err == nil {
			conn.Close()
		}
		if (err == nil) != (c.words == "") || err != nil && (!strings.Contains(err.Error(), c.words) || strings.Contains(err.Error(), "\n")) {
			t.Errorf("%s, %+v: %v, want %q", c.target, c.s, err, c.words)
		}
	}
}
