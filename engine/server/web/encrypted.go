package web

import (
	"context"
	"crypto/tls"
	"errors"
	"net"

	"google.golang.org/grpc/credentials"
)

// AuthInfo is what a call's peer says of its encryption, over either protocol.
func AuthInfo(state tls.ConnectionState) credentials.AuthInfo {
	return credentials.TLSInfo{State: state, CommonAuthInfo: credentials.CommonAuthInfo{SecurityLevel: credentials.PrivacyAndIntegrity}}
}

// Credentials tell a grpc.Server of the encryption of connections that Split
// has encrypted; plain ones pass.
func Credentials() credentials.TransportCredentials { return handed{} }

type handed struct{}

func (handed) ServerHandshake(c net.Conn) (net.Conn, credentials.AuthInfo, error) {
	if state := encryption(c); state != nil {
		return c, AuthInfo(*state), nil
	}
	return c, plain{credentials.CommonAuthInfo{SecurityLevel: credentials.NoSecurity}}, nil
}

func (handed) ClientHandshake(context.Context, string, net.Conn) (net.Conn, credentials.AuthInfo, error) {
	return nil, nil, errors.New("web: these credentials are a server's")
}

func (handed) Info() credentials.ProtocolInfo {
	return credentials.ProtocolInfo{SecurityProtocol: "tls"}
}

func (h handed) Clone() credentials.TransportCredentials { return h }

func (handed) OverrideServerName(string) error { return nil }

// plain is nothing that was agreed.
type plain struct{ credentials.CommonAuthInfo }

func (plain) AuthType() string { return "none" }

type encryptionKey struct{}

// withEncryption puts a connection's encryption into the context of its
// requests, where net/http, which is handed decrypted connections, has none.
func withEncryption(ctx context.Context, c net.Conn) context.Context {
	if state := encryption(c); state != nil {
		return context.WithValue(ctx, encryptionKey{}, state)
	}
	return ctx
}

func encryptionOf(ctx context.Context) *tls.ConnectionState {
	state, _ := ctx.Value(encryptionKey{}).(*tls.ConnectionState)
	return state
}
