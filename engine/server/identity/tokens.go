package identity

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/url"
	"slices"
	"time"

	"github.com/golang-jwt/jwt/v5"
)

// maxToken bounds a token; headers are bounded beside.
const maxToken = 8 << 10

// TokenConfig says whose tokens count.
type TokenConfig struct {
	// Issuer is the one whose tokens count, its iss, and where its keys are
	// found by OpenID Connect unless Keys is set.
	Issuer string
	// Audience must be in a token's aud.
	Audience string
	// Keys is a file with the issuer's public keys, a JWK set (RFC 7517).
	Keys string
	// RolesClaim holds a token's roles, a text or a list of texts; what is no
	// role of ours is passed over. "" is roles.
	RolesClaim string
	// NameClaim holds the name: of a vehicle, that under which it is fed. "" is
	// sub.
	NameClaim string
	// Now is the clock; nil is time.Now.
	Now func() time.Time
	// Log takes what the operator should know; nil is nothing.
	Log *slog.Logger
}

// Validate lists what is wrong.
func (c *TokenConfig) Validate() error {
	var errs []error
	if c.Issuer == "" {
		errs = append(errs, errors.New("identity: tokens need an issuer"))
	} else if c.Keys == "" {
		errs = append(errs, encrypted("the issuer", c.Issuer))
	}
	if c.Audience == "" {
		errs = append(errs, errors.New("identity: tokens need an audience: what the issuer puts into aud for this server"))
	}
	return errors.Join(errs...)
}

// encrypted refuses addresses from which keys could come forged.
func encrypted(what, address string) error {
	u, err := url.Parse(address)
	switch {
	case err != nil || u.Host == "":
		return fmt.Errorf("identity: %s is %.300q: give a URL", what, address)
	case u.Scheme == "https":
		return nil
	case u.Scheme == "http" && (u.Hostname() == "localhost" || net.ParseIP(u.Hostname()).IsLoopback()):
		return nil
	}
	return fmt.Errorf("identity: %s is %.300q: its keys must come by https", what, address)
}

// leeway is how far the issuer's clock and this one may differ.
const leeway = 10 * time.Second

// Tokens checks bearer tokens (RFC 6750) that are JWTs (RFC 7519). Its methods
// may be called from any goroutine.
type Tokens struct {
	cfg    TokenConfig
	keys   *keySet
	parser *jwt.Parser
}

// NewTokens makes a checker. A file of keys must be there; an issuer is asked
// when the first token comes, and may be away until then.
func NewTokens(cfg TokenConfig) (*Tokens, error) {
	if err := cfg.Validate(); err != nil {
		return nil, err
	}
	if cfg.RolesClaim == "" {
		cfg.RolesClaim = "roles"
	}
	if cfg.NameClaim == "" {
		cfg.NameClaim = "sub"
	}
	if cfg.Now == nil {
		cfg.Now = time.Now
	}
	if cfg.Log == nil {
		cfg.Log = slog.New(slog.DiscardHandler)
	}
	t := &Tokens{cfg: cfg}
	t.keys = &keySet{now: cfg.Now, log: cfg.Log, fresh: keysFor, read: ofIssuer(cfg.Issuer)}
	if cfg.Keys != "" {
		t.keys.fresh, t.keys.read, t.keys.quick = time.Second, ofFile(cfg.Keys), true
		var err error
		if t.keys.keys, err = t.keys.take(context.Background()); err != nil {
			return nil, fmt.Errorf("identity: keys of tokens: %w", err)
		}
	}
	t.parser = jwt.NewParser(jwt.WithValidMethods(algorithms), jwt.WithIssuer(cfg.Issuer), jwt.WithAudience(cfg.Audience),
		jwt.WithExpirationRequired(), jwt.WithIssuedAt(), jwt.WithLeeway(leeway), jwt.WithTimeFunc(cfg.Now))
	return t, nil
}

// Check returns who a token names. The error wraps ErrExpired or ErrUnchecked,
// or says what else is wrong with it; it never holds the token.
func (t *Tokens) Check(ctx context.Context, token string) (*Caller, error) {
	if len(token) > maxToken {
		return nil, fmt.Errorf("the token has %d bytes: at most %d", len(token), maxToken)
	}
	claims := jwt.MapClaims{}
	_, err := t.parser.ParseWithClaims(token, claims, func(token *jwt.Token) (any, error) {
		id, _ := token.Header["kid"].(string)
		keys, err := t.keys.candidates(ctx, id, token.Method.Alg())
		return jwt.VerificationKeySet{Keys: keys}, err
	})
	switch {
	case errors.Is(err, ErrUnchecked):
		return nil, fmt.Errorf("the token: %w, since its issuer's keys cannot be had: try again later", ErrUnchecked)
	case errors.Is(err, jwt.ErrTokenExpired):
		return nil, fmt.Errorf("the token: %w: get a new one from its issuer", ErrExpired)
	case errors.Is(err, jwt.ErrTokenMalformed):
		return nil, errors.New("the token is no signed JWT: give what the issuer gave, whole")
	case errors.Is(err, jwt.ErrTokenInvalidIssuer):
		return nil, errors.New("the token is of another issuer than this server's")
	case errors.Is(err, jwt.ErrTokenInvalidAudience):
		return nil, errors.New("the token is for another audience than this server")
	case err != nil:
		return nil, fmt.Errorf("the token does not count: %w", err)
	}
	until, err := claims.GetExpirationTime()
	if err != nil {
		return nil, fmt.Errorf("the token does not count: %w", err)
	}
	c := &Caller{Until: until.Add(leeway), Roles: t.roles(claims[t.cfg.RolesClaim])}
	if c.Name, _ = claims[t.cfg.NameClaim].(string); c.Name == "" || len(c.Name) > maxName {
		return nil, fmt.Errorf("the token names nobody: its claim %q must be a text of at most %d bytes", t.cfg.NameClaim, maxName)
	}
	if len(c.Roles) == 0 {
		return nil, fmt.Errorf("the token gives no role: its claim %q must hold one of %s", t.cfg.RolesClaim, words())
	}
	return c, nil
}

// roles takes those of ours out of a claim, in our order.
func (t *Tokens) roles(claim any) (out []Role) {
	said, ok := claim.([]any)
	if !ok {
		said = []any{claim}
	}
	for _, r := range Roles() {
		if slices.Contains(said, any(string(r))) {
			out = append(out, r)
		}
	}
	return out
}
