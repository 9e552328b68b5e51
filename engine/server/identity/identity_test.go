package identity

import (
	"crypto/tls"
	"crypto/x509"
	"encoding/base64"
	"encoding/json"
	"errors"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"net/url"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"go.uber.org/goleak"

	"leadline/fixtures/credentials"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// TestCertificateNames proves which names of a certificate count, and that
// nothing else in it does.
func TestCertificateNames(t *testing.T) {
	now := time.Now()
	for _, c := range []struct {
		uris, role, name, words string
	}{
		{"leadline://vehicle/van-1", "vehicle", "van-1", ""},
		{"https://other.example/ leadline://dispatcher/anna%20b", "dispatcher", "anna b", ""},
		{"leadline://vehicle/depot%2F7", "vehicle", "depot/7", ""},
		{"leadline://administrator/x", "administrator", "x", ""},
		{"", "", "", "0 names"},
		{"https://vehicle/van-1", "", "", "0 names"},
		{"leadline://vehicle/van-1 leadline://vehicle/van-2", "", "", "2 names"},
		{"leadline://vehicle/van-1 leadline://administrator/van-1", "", "", "2 names"},
		{"leadline://captain/van-1", "", "", "ROLE one of vehicle"},
		{"leadline://vehicle/", "", "", "ROLE/NAME"},
		{"leadline:vehicle", "", "", "ROLE/NAME"},
		{"leadline://vehicle/van-1?role=administrator", "", "", "ROLE/NAME"},
		{"leadline://administrator@vehicle/van-1", "", "", "ROLE/NAME"},
		{"leadline://vehicle/" + strings.Repeat("v", 257), "", "", "ROLE/NAME"},
	} {
		cert := &x509.Certificate{NotAfter: now.Add(time.Hour)}
		for _, text := range strings.Fields(c.uris) {
			u, err := url.Parse(text)
			if err != nil {
				t.Fatal(err)
			}
			cert.URIs = append(cert.URIs, u)
		}
		got, err := OfCertificate(cert, now)
		if c.words != "" {
			if err == nil || !strings.Contains(err.Error(), c.words) || strings.Contains(err.Error(), "\n") {
				t.Errorf("%s: %v, want %q", c.uris, err, c.words)
			}
			continue
		}
		if err != nil || got.Name != c.name || !slices.Equal(got.Roles, []Role{Role(c.role)}) || !got.Until.Equal(cert.NotAfter) {
			t.Errorf("%s: %+v, %v", c.uris, got, err)
		}
		if _, err := OfCertificate(cert, now.Add(2*time.Hour)); !errors.Is(err, ErrExpired) {
			t.Errorf("%s, later: %v", c.uris, err)
		}
	}
}

// clock is a time that a test sets.
type clock struct{ at time.Time }

func (c *clock) now() time.Time { return c.at }

func claims(c *clock, change ...any) map[string]any {
	out := map[string]any{"iss": "https://issuer.example", "aud": "leadline", "sub": "van-1", "roles": []string{"vehicle"}, "exp": c.at.Add(time.Hour).Unix(), "iat": c.at.Unix()}
	for i := 0; i < len(change); i += 2 {
		if out[change[i].(string)] = change[i+1]; change[i+1] == nil {
			delete(out, change[i].(string))
		}
	}
	return out
}

// TestTokens proves what a token must be, by tokens that another library signs.
func TestTokens(t *testing.T) {
	c := &clock{time.Date(2030, 5, 1, 12, 0, 0, 0, time.UTC)}
	issuer, stranger := credentials.NewIssuer(t, "k1"), credentials.NewIssuer(t, "k1")
	keys := filepath.Join(t.TempDir(), "keys.json")
	if err := os.WriteFile(keys, issuer.Keys(t), 0o600); err != nil {
		t.Fatal(err)
	}
	tokens, err := NewTokens(TokenConfig{Issuer: "https://issuer.example", Audience: "leadline", Keys: keys, Now: c.now})
	if err != nil {
		t.Fatal(err)
	}
	good := issuer.Token(t, claims(c))
	head, rest, _ := strings.Cut(good, ".")
	body, signature, _ := strings.Cut(rest, ".")
	forged := func(header string, claims map[string]any, signature string) string {
		text, err := json.Marshal(claims)
		if err != nil {
			t.Fatal(err)
		}
		e := base64.RawURLEncoding
		return e.EncodeToString([]byte(header)) + "." + e.EncodeToString(text) + "." + signature
	}
	for _, k := range []struct {
		what, token string
		roles       []Role
		words       string
	}{
		{"a good one", good, []Role{Vehicle}, ""},
		{"one role as a text", issuer.Token(t, claims(c, "roles", "analyst")), []Role{Analyst}, ""},
		{"several roles, some unknown", issuer.Token(t, claims(c, "roles", []any{"captain", "administrator", 7, map[string]any{}, "dispatcher"})), []Role{Dispatcher, Administrator}, ""},
		{"several audiences", issuer.Token(t, claims(c, "aud", []string{"other", "leadline"})), []Role{Vehicle}, ""},
		{"within the leeway", issuer.Token(t, claims(c, "exp", c.at.Add(-5*time.Second).Unix())), []Role{Vehicle}, ""},
		{"nothing", "", nil, "no signed JWT"},
		{"no JWT", "abc", nil, "no signed JWT"},
		{"half of one", head + "." + body, nil, "no signed JWT"},
		{"too long", good + strings.Repeat("A", 8<<10), nil, "at most 8192"},
		{"another body", head + "." + body[:len(body)-4] + "AAAA." + signature, nil, "token"},
		{"another one's key", stranger.Token(t, claims(c)), nil, "does not count"},
		{"an unknown key", credentials.NewIssuer(t, "k9").Token(t, claims(c)), nil, "key is not one of the issuer's"},
		{"no signature", forged(`{"alg":"none","typ":"JWT"}`, claims(c), ""), nil, "does not count"},
		{"a shared secret", forged(`{"alg":"HS256","kid":"k1"}`, claims(c), "AAAA"), nil, "does not count"},
		{"the other kind of key", forged(`{"alg":"RS256","kid":"k1"}`, claims(c), signature), nil, "does not count"},
		{"another issuer", issuer.Token(t, claims(c, "iss", "https://other.example")), nil, "another issuer"},
		{"no issuer", issuer.Token(t, claims(c, "iss", nil)), nil, "does not count"},
		{"another audience", issuer.Token(t, claims(c, "aud", "other")), nil, "another audience"},
		{"no audience", issuer.Token(t, claims(c, "aud", nil)), nil, "does not count"},
		{"no end", issuer.Token(t, claims(c, "exp", nil)), nil, "does not count"},
		{"not yet", issuer.Token(t, claims(c, "nbf", c.at.Add(time.Hour).Unix())), nil, "does not count"},
		{"no roles", issuer.Token(t, claims(c, "roles", nil)), nil, "no role"},
		{"no role of ours", issuer.Token(t, claims(c, "roles", []string{"Vehicle"})), nil, "no role"},
		{"roles of another kind", issuer.Token(t, claims(c, "roles", map[string]any{"vehicle": true})), nil, "no role"},
		{"nobody", issuer.Token(t, claims(c, "sub", nil)), nil, "names nobody"},
		{"a number for a name", issuer.Token(t, claims(c, "sub", 7)), nil, "names nobody"},
		{"a long name", issuer.Token(t, claims(c, "sub", strings.Repeat("v", 257))), nil, "names nobody"},
	} {
		got, err := tokens.Check(t.Context(), k.token)
		if k.words == "" {
			if err != nil || got.Name != "van-1" || !slices.Equal(got.Roles, k.roles) || got.Until.Before(c.at) {
				t.Errorf("%s: %+v, %v", k.what, got, err)
			}
			continue
		}
		if err == nil || !strings.Contains(err.Error(), k.words) || strings.Contains(err.Error(), "\n") || errors.Is(err, ErrExpired) || k.token != "" && strings.Contains(err.Error(), k.token) {
			t.Errorf("%s: %v, want %q", k.what, err, k.words)
		}
	}
	c.at = c.at.Add(time.Hour + leeway + time.Second)
	if _, err := tokens.Check(t.Context(), good); !errors.Is(err, ErrExpired) {
		t.Errorf("an hour later: %v", err)
	}
}

// TestKeysRotate proves that a file of keys and an issuer's keys may be
// replaced, that what was withdrawn counts no more, and that an issuer which is
// away is waited for.
func TestKeysRotate(t *testing.T) {
	c := &clock{time.Date(2030, 5, 1, 12, 0, 0, 0, time.UTC)}
	issuer := credentials.NewIssuer(t, "k1")
	var handler http.Handler
	srv := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) { handler.ServeHTTP(w, r) }))
	defer http.DefaultClient.CloseIdleConnections()
	defer srv.Close()
	handler = issuer.Discovery(t, srv.URL)
	file := filepath.Join(t.TempDir(), "keys.json")
	publish := func() {
		if err := os.WriteFile(file, issuer.Keys(t), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	publish()
	for _, keys := range []string{file, ""} {
		issuer.SetAway(keys == "")
		tokens, err := NewTokens(TokenConfig{Issuer: srv.URL, Audience: "leadline", Keys: keys, Now: c.now})
		if err != nil {
			t.Fatal(err)
		}
		check := func(what, token string, want error, words string) {
			t.Helper()
			_, err := tokens.Check(t.Context(), token)
			if (err == nil) != (words == "") || want != nil && !errors.Is(err, want) || err != nil && !strings.Contains(err.Error(), words) {
				t.Errorf("keys %q, %s: %v, want %q", keys, what, err, words)
			}
		}
		token := func() string { return issuer.Token(t, claims(c, "iss", srv.URL, "exp", c.at.Add(24*time.Hour).Unix())) }
		old := token()
		if keys == "" {
			check("the issuer is away", old, ErrUnchecked, "try again later")
			issuer.SetAway(false)
			c.at = c.at.Add(betweenReads)
		}
		check("the first key", old, nil, "")
		issuer.Rotate(t, "next "+keys)
		publish()
		c.at = c.at.Add(betweenReads)
		check("the second key", token(), nil, "")
		check("the first key is withdrawn", old, nil, "not one of the issuer's")
		if keys == "" {
			issuer.SetAway(true)
			c.at = c.at.Add(keysFor)
			check("away for a moment", token(), nil, "")
			check("the same", token(), nil, "")
			c.at = c.at.Add(keysAtMost)
			check("away for long", token(), ErrUnchecked, "try again later")
			continue
		}
		if err := os.WriteFile(file, []byte("{"), 0o600); err != nil {
			t.Fatal(err)
		}
		c.at = c.at.Add(time.Minute)
		check("a damaged file", token(), nil, "")
		publish()
	}
}

// TestBadTokenConfig proves that a configuration without sense is an error in
// words.
func TestBadTokenConfig(t *testing.T) {
	folder := t.TempDir()
	write := func(name, text string) string {
		path := filepath.Join(folder, name)
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	for _, c := range []struct {
		cfg   TokenConfig
		words string
	}{
		{TokenConfig{}, "need an issuer"},
		{TokenConfig{Issuer: "https://issuer.example"}, "need an audience"},
		{TokenConfig{Issuer: "http://issuer.example", Audience: "a"}, "by https"},
		{TokenConfig{Issuer: "issuer", Audience: "a"}, "give a URL"},
		{TokenConfig{Issuer: "i", Audience: "a", Keys: filepath.Join(folder, "none")}, "no such file"},
		{TokenConfig{Issuer: "i", Audience: "a", Keys: write("text", "abc")}, "no JWK set"},
		{TokenConfig{Issuer: "i", Audience: "a", Keys: write("empty", `{"keys":[]}`)}, "without a public key"},
		{TokenConfig{Issuer: "i", Audience: "a", Keys: write("strange", `{"keys":[{"kty":"LATTICE"}]}`)}, "without a public key"},
		{TokenConfig{Issuer: "i", Audience: "a", Keys: write("secret", `{"keys":[{"kty":"oct","k":"c2VjcmV0"}]}`)}, "private or secret"},
		{TokenConfig{Issuer: "i", Audience: "a", Keys: write("long", `{"keys":[`+strings.Repeat(" ", 1<<20)+`]}`)}, "longer than"},
		{TokenConfig{Issuer: "i", Audience: "a", Keys: write("many", `{"keys":[{}`+strings.Repeat(",{}", 1000)+`]}`)}, "at most 1000"},
	} {
		if _, err := NewTokens(c.cfg); err == nil || !strings.Contains(err.Error(), c.words) {
			t.Errorf("%+v: %v, want %q", c.cfg, err, c.words)
		}
	}
}

// TestCertificatesRotate proves that a replaced certificate is taken, that a
// damaged one is passed over with one line in the log, and that it ends when it
// says.
func TestCertificatesRotate(t *testing.T) {
	folder, ca := t.TempDir(), credentials.NewAuthority(t)
	files := ca.Server(t, folder, "one.example")
	var log strings.Builder
	e := &Encryption{Certificate: files.Certificate, Key: files.Key, Clients: ca.File(t, filepath.Join(folder, "ca.pem")), Log: slog.New(slog.NewTextHandler(&log, nil))}
	if err := e.Open(); err != nil {
		t.Fatal(err)
	}
	names := func() string {
		c, err := e.Config().GetConfigForClient(&tls.ClientHelloInfo{})
		if err != nil {
			t.Fatal(err)
		}
		return strings.Join(c.Certificates[0].Leaf.DNSNames, " ")
	}
	if names() != "localhost one.example" || log.Len() != 0 {
		t.Errorf("first: %s; %s", names(), &log)
	}
	ca.Server(t, folder, "two.example")
	if names() != "localhost two.example" || strings.Count(log.String(), "certificate replaced") != 1 || !e.Until().After(time.Now()) {
		t.Errorf("second: %s, until %v; %s", names(), e.Until(), &log)
	}
	for _, damage := range []func() error{
		func() error { return os.WriteFile(files.Certificate, []byte("abc"), 0o600) },
		func() error { return os.Remove(files.Certificate) },
		func() error { ca.Server(t, folder, "three.example"); return os.WriteFile(e.Clients, nil, 0o600) },
	} {
		log.Reset()
		if err := damage(); err != nil {
			t.Fatal(err)
		}
		if names() != "localhost two.example" || names() == "" || strings.Count(log.String(), "passed over") != 1 {
			t.Errorf("damaged: %s; %s", names(), &log)
		}
	}
	ca.File(t, e.Clients)
	if names() != "localhost three.example" {
		t.Errorf("third: %s", names())
	}
	for words, bad := range map[string]*Encryption{
		"needs a certificate": {}, "no such file": {Certificate: "none", Key: "none"},
		"private key does not match":     {Certificate: files.Certificate, Key: credentials.NewAuthority(t).Server(t, t.TempDir(), "x").Key},
		"no certificate of an authority": {Certificate: files.Certificate, Key: files.Key, Clients: os.DevNull},
		"a EC PRIVATE KEY among":         {Certificate: files.Certificate, Key: files.Key, Clients: files.Key},
	} {
		if err := bad.Open(); err == nil || !strings.Contains(err.Error(), words) {
			t.Errorf("%v, want %q", err, words)
		}
	}
}
