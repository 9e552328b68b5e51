package identity

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"os"
	"sync"
	"time"

	"github.com/coreos/go-oidc/v3/oidc"
	"github.com/go-jose/go-jose/v4"
	"github.com/golang-jwt/jwt/v5"
)

// How long a key set counts, in common practice; one that was replaced or
// withdrawn is noticed within keysFor.
const (
	keysFor      = 5 * time.Minute  // from when a set was read until it is read again
	keysAtMost   = time.Hour        // until a set counts no more that cannot be read again
	betweenReads = 10 * time.Second // whoever sends tokens of unknown keys
	maxKeysBytes = 1 << 20
	maxKeys      = 1000
	readTimeout  = 10 * time.Second
)

// algorithms are the signatures that count: none of a shared secret, since a
// key set is public.
var algorithms = []string{"RS256", "RS384", "RS512", "PS256", "PS384", "PS512", "ES256", "ES384", "ES512", "EdDSA"}

// keySet is a JWK set (RFC 7517) that is read again from where it came.
type keySet struct {
	read  func(context.Context) ([]byte, error)
	now   func() time.Time
	log   *slog.Logger
	fresh time.Duration // how long a set counts without being read again
	// quick is for a file: everybody waits until it is read. Otherwise those
	// whose key is known go on meanwhile, so that nobody's unknown key holds
	// them up.
	quick bool

	mu      sync.Mutex
	keys    []jose.JSONWebKey
	readAt  time.Time     // when keys were read
	triedAt time.Time     // when that was tried last
	failed  error         // of the last try
	reading chan struct{} // closed at the end of the try that goes on; nil if none does
}

// candidates are the keys that may have signed a token by what its header says
// (RFC 7515, section 4.1). A key that is not known may have come since.
func (s *keySet) candidates(ctx context.Context, id, algorithm string) (out []jwt.VerificationKey, err error) {
	for _, again := range []bool{false, true} {
		keys, err := s.current(ctx, again)
		if err != nil {
			return nil, err
		}
		for _, k := range keys {
			if k.Use != "enc" && (id == "" || k.KeyID == id) && (k.Algorithm == "" || k.Algorithm == algorithm) {
				out = append(out, k.Key)
			}
		}
		if len(out) > 0 {
			return out, nil
		}
	}
	return nil, errors.New("its key is not one of the issuer's")
}

// current returns the keys; anew asks for what has come since the last time,
// which is had only now and then.
func (s *keySet) current(ctx context.Context, anew bool) ([]jose.JSONWebKey, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	now := s.now()
	if s.reading == nil && (anew || now.Sub(s.readAt) >= s.fresh) && now.Sub(s.triedAt) >= min(betweenReads, s.fresh) {
		s.triedAt, s.reading = now, make(chan struct{})
		go s.renew(now, s.reading)
	}
	if wait := s.reading; wait != nil && (anew || s.quick || s.useless(now)) {
		s.mu.Unlock()
		select {
		case <-wait:
		case <-ctx.Done():
		}
		s.mu.Lock()
	}
	if s.useless(now) {
		return nil, ErrUnchecked
	}
	return s.keys, nil
}

// useless reports whether the keys are none, or too old to count.
func (s *keySet) useless(now time.Time) bool {
	return s.keys == nil || !s.quick && now.Sub(s.readAt) > keysAtMost
}

// renew reads the keys and says when it has.
func (s *keySet) renew(now time.Time, done chan struct{}) {
	// No caller's time bounds it: others wait, too.
	ctx, cancel := context.WithTimeout(context.Background(), readTimeout)
	defer cancel()
	keys, err := s.take(ctx)
	s.mu.Lock()
	defer s.mu.Unlock()
	s.reading = nil
	defer close(done)
	if err != nil {
		if s.failed == nil {
			s.log.Error("keys of tokens cannot be read, those from before go on for a while", "error", err)
		}
		s.failed = err
		return
	}
	s.keys, s.readAt, s.failed = keys, now, nil
}

// take reads the keys.
func (s *keySet) take(ctx context.Context) ([]jose.JSONWebKey, error) {
	text, err := s.read(ctx)
	if err != nil {
		return nil, err
	}
	return parseKeys(text)
}

// parseKeys reads a JWK set. Keys of kinds that are not known are passed over,
// as RFC 7517, section 5, has it; private ones are an error.
func parseKeys(text []byte) ([]jose.JSONWebKey, error) {
	var set struct {
		Keys []json.RawMessage `json:"keys"`
	}
	if err := json.Unmarshal(text, &set); err != nil {
		return nil, fmt.Errorf("no JWK set (RFC 7517): %w", err)
	}
	if n := len(set.Keys); n > maxKeys {
		return nil, fmt.Errorf("a JWK set of %d keys: at most %d", n, maxKeys)
	}
	var keys []jose.JSONWebKey
	for i, raw := range set.Keys {
		var k jose.JSONWebKey
		if k.UnmarshalJSON(raw) != nil {
			continue
		}
		if !k.IsPublic() {
			return nil, fmt.Errorf("key %d of the JWK set is private or secret: give the public keys alone", i+1)
		}
		if !k.Valid() {
			continue
		}
		keys = append(keys, k)
	}
	if len(keys) == 0 {
		return nil, errors.New("a JWK set without a public key that can be used")
	}
	return keys, nil
}

// ofFile reads a file whenever it has changed.
func ofFile(path string) func(context.Context) ([]byte, error) {
	return func(context.Context) ([]byte, error) {
		f, err := os.Open(path)
		if err != nil {
			return nil, err
		}
		defer f.Close()
		text, err := bounded(f)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", path, err)
		}
		return text, nil
	}
}

// ofIssuer finds the issuer's keys by OpenID Connect Discovery 1.0 and fetches
// them.
func ofIssuer(issuer string) func(context.Context) ([]byte, error) {
	return func(ctx context.Context) ([]byte, error) {
		provider, err := oidc.NewProvider(ctx, issuer)
		if err != nil {
			return nil, err
		}
		var found struct {
			URL string `json:"jwks_uri"`
		}
		if err := provider.Claims(&found); err != nil {
			return nil, err
		}
		if err := encrypted("the issuer's jwks_uri", found.URL); err != nil {
			return nil, err
		}
		req, err := http.NewRequestWithContext(ctx, http.MethodGet, found.URL, nil)
		if err != nil {
			return nil, err
		}
		r, err := http.DefaultClient.Do(req)
		if err != nil {
			return nil, err
		}
		defer r.Body.Close()
		if r.StatusCode != http.StatusOK {
			return nil, fmt.Errorf("%s answers %s", found.URL, r.Status)
		}
		return bounded(r.Body)
	}
}

func bounded(r io.Reader) ([]byte, error) {
	text, err := io.ReadAll(io.LimitReader(r, maxKeysBytes+1))
	if err == nil && len(text) > maxKeysBytes {
		err = fmt.Errorf("it is longer than %d bytes", maxKeysBytes)
	}
	return text, err
}
