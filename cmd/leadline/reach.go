package main

import (
	"context"
	"fmt"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"leadline/engine/client"
	leadlinev1 "leadline/proto/leadline/v1"
)

// reach is how a command reaches its server.
type reach struct {
	flag     string // that names the address
	address  string
	security client.Security
}

// flags adds the flag of the address, and those of how it is reached.
func (r *reach) flags(c *cobra.Command, flag string) {
	r.addressFlag(c, flag, defaultAddress, "address of the server")
	settable(c, flag+"=server", "tls", "ca", "cert", "key", "token-file")
}

func (r *reach) addressFlag(c *cobra.Command, flag, address, usage string) {
	r.flag = "--" + flag
	f := c.Flags()
	f.StringVar(&r.address, flag, address, usage)
	f.BoolVar(&r.security.Encrypted, "tls", false, "reach the server by TLS; the files below ask for it, too")
	f.StringVar(&r.security.AuthorityFile, "ca", "", "PEM file with the authorities of the server's certificate (default with --tls: the system's)")
	f.StringVar(&r.security.CertificateFile, "cert", "", "PEM file with the client certificate to show")
	f.StringVar(&r.security.KeyFile, "key", "", "PEM file with its key")
	f.StringVar(&r.security.TokenFile, "token-file", "", "file with the token to show; it is read again for each call")
}

// dial prepares a connection to the server.
func (r *reach) dial() (*grpc.ClientConn, error) {
	if err := checkAddresses(r.flag, r.address); err != nil {
		return nil, err
	}
	conn, err := client.DialSecure(r.address, r.security)
	if err != nil {
		return nil, fmt.Errorf("%s %s: %s", r.flag, r.address, strings.TrimPrefix(oneLine(err.Error()), "client: "))
	}
	return conn, nil
}

// asking calls a server once or a few times, and words what goes wrong.
func asking(r *reach, ask func(context.Context, leadlinev1.PositionServiceClient) error) error {
	return askingFor(patient, r, ask)
}

// askingFor is asking with another patience.
func askingFor(wait time.Duration, r *reach, ask func(context.Context, leadlinev1.PositionServiceClient) error) error {
	conn, err := r.dial()
	if err != nil {
		return err
	}
	defer conn.Close()
	ctx, cancel := context.WithTimeout(context.Background(), wait)
	defer cancel()
	if err := ask(ctx, leadlinev1.NewPositionServiceClient(conn)); err != nil {
		return serverError(err, r.address)
	}
	return nil
}
