package identity

import (
	"crypto/x509"
	"errors"
	"fmt"
	"net/url"
	"slices"
	"strings"
	"time"
)

// Role is what a caller is to the fleet.
type Role string

// The roles. What each may do is in engine/server.
const (
	Vehicle       Role = "vehicle"
	Dispatcher    Role = "dispatcher"
	Analyst       Role = "analyst"
	Administrator Role = "administrator"
)

// Roles lists them.
func Roles() []Role { return []Role{Vehicle, Dispatcher, Analyst, Administrator} }

// Caller is somebody who has shown who they are.
type Caller struct {
	// Name is the vehicle's for a vehicle, and anybody's for the others.
	Name  string
	Roles []Role
	// Until is when what they have shown holds no more.
	Until time.Time
}

// Is reports whether the caller has a role.
func (c *Caller) Is(r Role) bool { return slices.Contains(c.Roles, r) }

// Errors that Tokens.Check and OfCertificate wrap.
var (
	// ErrExpired is for what was good once.
	ErrExpired = errors.New("it has expired")
	// ErrUnchecked is for a token that may be good: no keys could be had.
	ErrUnchecked = errors.New("it cannot be checked now")
)

// Scheme is that of the name in a client certificate.
const Scheme = "leadline"

// maxName bounds a name, as the API does.
const maxName = 256

// OfCertificate returns who a client certificate names. Its subject alternative
// names (RFC 5280, section 4.2.1.6) must hold exactly one URI of the form
// leadline://ROLE/NAME; the name is percent-encoded. The subject counts for
// nothing. The chain must have been verified.
func OfCertificate(cert *x509.Certificate, now time.Time) (*Caller, error) {
	var names []*url.URL
	for _, u := range cert.URIs {
		if u.Scheme == Scheme {
			names = append(names, u)
		}
	}
	if len(names) != 1 {
		return nil, fmt.Errorf("the client certificate has %d names of the form %s://ROLE/NAME: issue it with one URI of that form among its subject alternative names", len(names), Scheme)
	}
	u := names[0]
	role, name := Role(u.Host), strings.TrimPrefix(u.Path, "/")
	if !slices.Contains(Roles(), role) || name == "" || len(name) > maxName || u.RawQuery != "" || u.Fragment != "" || u.User != nil {
		return nil, fmt.Errorf("the client certificate is for %.300q: give %s://ROLE/NAME, ROLE one of %s", u.String(), Scheme, words())
	}
	if now.After(cert.NotAfter) {
		return nil, fmt.Errorf("the client certificate of %q ended at %s: %w", name, cert.NotAfter.UTC().Format(time.RFC3339), ErrExpired)
	}
	return &Caller{Name: name, Roles: []Role{role}, Until: cert.NotAfter}, nil
}

func words() string {
	var out []string
	for _, r := range Roles() {
		out = append(out, string(r))
	}
	return strings.Join(out, ", ")
}
