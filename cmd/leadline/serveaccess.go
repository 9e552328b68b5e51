package main

import (
	"errors"
	"fmt"
	"log/slog"
	"net"
	"strings"

	"github.com/spf13/cobra"

	"leadline/engine/server"
	"leadline/engine/server/identity"
)

// accessOptions say how connections are encrypted and callers known.
type accessOptions struct {
	plainBeyondLoopback, noLoginBeyondLoopback bool
	encryption                                 identity.Encryption
	tokens                                     identity.TokenConfig
}

func (o *accessOptions) flags(c *cobra.Command) {
	f := c.Flags()
	f.BoolVar(&o.plainBeyondLoopback, "plain-text-beyond-loopback", false, "listen without encryption, and without login if there is none, on an address that other machines reach")
	f.BoolVar(&o.noLoginBeyondLoopback, "without-login-beyond-loopback", false, "let whoever reaches the port from other machines do everything, encrypted")
	f.StringVar(&o.encryption.Certificate, "tls-cert", "", "PEM file with the server's certificate and those up to its root; encrypts every connection")
	f.StringVar(&o.encryption.Key, "tls-key", "", "PEM file with its key")
	f.StringVar(&o.encryption.Clients, "client-ca", "", "PEM file with the authorities of client certificates, which say who calls")
	f.StringVar(&o.tokens.Issuer, "token-issuer", "", "who issues the tokens that say who calls")
	f.StringVar(&o.tokens.Audience, "token-audience", "", "what its tokens for this server have as aud")
	f.StringVar(&o.tokens.Keys, "token-keys", "", "file with the issuer's public keys, a JWK set (default: found at the issuer by OpenID Connect)")
	f.StringVar(&o.tokens.RolesClaim, "token-roles", "roles", "claim of a token that holds its roles")
	f.StringVar(&o.tokens.NameClaim, "token-name", "sub", "claim of a token that holds its name, a vehicle's for one")
	settable(c, "plain-text-beyond-loopback", "without-login-beyond-loopback", "tls-cert", "tls-key", "client-ca",
		"token-issuer", "token-audience", "token-keys", "token-roles", "token-name")
}

func (o *accessOptions) encrypts() bool {
	return o.encryption.Certificate != "" || o.encryption.Key != ""
}

// knows reports whether callers are to say who they are.
func (o *accessOptions) knows() bool { return o.encryption.Clients != "" || o.tokens.Issuer != "" }

// check says what does not go together.
func (o *accessOptions) check() error {
	switch {
	case o.encrypts() && (o.encryption.Certificate == "" || o.encryption.Key == ""):
		return errors.New("--tls-cert and --tls-key go together: give both")
	case o.encryption.Clients != "" && !o.encrypts():
		return errors.New("--client-ca goes with --tls-cert and --tls-key: client certificates are shown when encryption begins")
	case o.tokens.Issuer == "" && (o.tokens.Audience != "" || o.tokens.Keys != ""):
		return errors.New("--token-issuer is missing: --token-audience and --token-keys are of its tokens")
	case o.tokens.Issuer != "" && o.tokens.Audience == "":
		return errors.New("--token-audience is missing: say what tokens of --token-issuer have as aud if they are for this server")
	}
	return nil
}

// mayListen refuses an address that other machines can reach, unless it is as
// safe as was asked for.
func (o *accessOptions) mayListen(address string) error {
	host, _, err := net.SplitHostPort(address)
	if err != nil {
		return fmt.Errorf("--listen %s is no address: give HOST:PORT, such as %s", address, defaultAddress)
	}
	if host == "localhost" || net.ParseIP(host).IsLoopback() {
		return nil
	}
	switch {
	case !o.encrypts() && !o.plainBeyondLoopback:
		return fmt.Errorf("--listen %s can be reached from other machines, and traffic is neither encrypted nor authenticated: give --tls-cert and --tls-key, listen on 127.0.0.1, or say --plain-text-beyond-loopback", address)
	case o.encrypts() && !o.knows() && !o.noLoginBeyondLoopback:
		return fmt.Errorf("--listen %s can be reached from other machines, and whoever reaches it could do everything: give --client-ca or --token-issuer, listen on 127.0.0.1, or say --without-login-beyond-loopback", address)
	}
	return nil
}

// apply opens what says who callers are.
func (o *accessOptions) apply(cfg *server.Config, log *slog.Logger) error {
	plainly := func(err error) error {
		return errors.New(strings.TrimPrefix(oneLine(err.Error()), "identity: "))
	}
	if o.encrypts() {
		o.encryption.Log = log
		if err := o.encryption.Open(); err != nil {
			return fmt.Errorf("--tls-cert, --tls-key or --client-ca: %w", plainly(err))
		}
		cfg.Encryption = o.encryption.Config()
	}
	if !o.knows() {
		return nil
	}
	cfg.Access = &server.Access{Certificates: o.encryption.Clients != ""}
	if o.tokens.Issuer != "" {
		o.tokens.Log = log
		var err error
		if cfg.Access.Tokens, err = identity.NewTokens(o.tokens); err != nil {
			return fmt.Errorf("--token-issuer or --token-keys: %w", plainly(err))
		}
	}
	return nil
}
