package main

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"net"
	"os"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/journal"
	"leadline/engine/server"
)

// keepOptions say where a server keeps what is to be durable.
type keepOptions struct {
	data   string
	broker journal.Broker
	// In MiB.
	mostMiB, freeMiB int64
	keepFor          time.Duration
	// How the journal is shared with other servers.
	shareAt, shareAuthority string
	partitions              int
}

// defaultShared is in how many partitions a journal is divided that servers share:
// enough that a handful of them have about the same.
const defaultShared = 64

// flags adds the options' flags.
func (o *keepOptions) flags(c *cobra.Command) {
	f := c.Flags()
	f.StringVar(&o.data, "data", "", "folder that keeps measurements durable; nothing is durable without it or --broker")
	f.StringVar(&o.broker.URL, "broker", "", "NATS servers with JetStream that keep them in place of a folder, as nats://HOST:PORT or tls://HOST:PORT, several with commas")
	brokerFlags(c, &o.broker)
	f.IntVar(&o.broker.Replicas, "broker-replicas", 1, "how many of the broker's servers keep each record, of a journal that is new")
	f.Int64Var(&o.mostMiB, "journal-mib", 4096, "greatest size of the journal, MiB; old records that no drive needs go first")
	f.Int64Var(&o.freeMiB, "journal-free-mib", 256, "what is left free on the disk of --data, MiB: with less, new measurements are refused")
	f.DurationVar(&o.keepFor, "keep-for", 720*time.Hour, "for how long what was measured is kept at most, and drives that are silent; 0 is without end")
	f.StringVar(&o.shareAt, "share", "", "share the broker's journal with other servers, which reach this one at HOST:PORT: each serves a part of the vehicles")
	f.StringVar(&o.shareAuthority, "share-authority", "", "file with the certificates that sign those of the other servers (default: the system's)")
	f.IntVar(&o.partitions, "partitions", 0, "in how many parts the vehicles are divided, of a journal that is new: 1 with --data, 4 with --broker, 64 to share")
	settable(c, "share", "share-authority", "partitions", "keep-for", "data", "broker", "broker-replicas", "journal-mib", "journal-free-mib")
}

// brokerFlags adds the flags of how a broker is reached, beside its address.
func brokerFlags(c *cobra.Command, b *journal.Broker) {
	f := c.Flags()
	f.StringVar(&b.Credentials, "broker-credentials", "", "file with the user's credentials for the broker")
	f.StringVar(&b.Authority, "broker-authority", "", "file with the certificates that sign the broker's")
	f.StringVar(&b.Certificate, "broker-certificate", "", "file with the certificate that is shown to the broker")
	f.StringVar(&b.Key, "broker-key", "", "file with that certificate's key")
	settable(c, "broker-credentials", "broker-authority", "broker-certificate", "broker-key")
}

// options are those of the journal; nil where nothing is kept.
func (o *keepOptions) options() (*journal.Options, error) {
	if o.keepFor != 0 && o.keepFor < time.Second {
		return nil, fmt.Errorf("--keep-for is %v: give a second or more, such as 720h, or 0", o.keepFor)
	}
	if o.data == "" && o.broker.URL == "" {
		b := o.broker
		if o.shareAt != "" {
			return nil, errors.New("--share is given and no broker: give --broker nats://HOST:PORT, whose journal is shared")
		}
		if b.Replicas = 0; b != (journal.Broker{}) {
			return nil, errors.New("something is said of a broker and none is given: give --broker nats://HOST:PORT")
		}
		return nil, nil
	}
	if o.data != "" && o.broker.URL != "" {
		return nil, errors.New("--data and --broker are both given: a journal is in one place; give one of them")
	}
	if o.mostMiB < 32 || o.mostMiB > 1<<40 {
		return nil, fmt.Errorf("--journal-mib is %d: give 32 or more", o.mostMiB)
	}
	if o.freeMiB < 1 || o.freeMiB > 1<<40 {
		return nil, fmt.Errorf("--journal-free-mib is %d: give 1 or more", o.freeMiB)
	}
	out := &journal.Options{Dir: o.data, MaxBytes: o.mostMiB << 20, FreeBytes: o.freeMiB << 20, Partitions: o.partitions}
	if o.data == "" {
		out.Broker = o.broker
	}
	if o.shareAt != "" {
		if host, port, err := net.SplitHostPort(o.shareAt); err != nil || host == "" || port == "" {
			return nil, fmt.Errorf("--share %s: give HOST:PORT, at which the other servers reach this one", o.shareAt)
		}
		if out.Shared = true; out.Partitions == 0 {
			out.Partitions = defaultShared
		}
	}
	return out, out.Validate()
}

// share is how the server shares its journal; nil if it does not.
func (o *keepOptions) share(encrypted bool) *server.Share {
	if o.shareAt == "" {
		return nil
	}
	how := client.Security{Encrypted: encrypted, AuthorityFile: o.shareAuthority}
	return &server.Share{Address: o.shareAt, OpenMap: openServed, Dial: func(address string) (*grpc.ClientConn, error) { return client.DialSecure(address, how) }}
}

// buildIdentity is the SHA-256 of the program's file: another one may compute
// other bits.
func buildIdentity() (string, error) {
	path, err := os.Executable()
	if err != nil {
		return "", fmt.Errorf("the program's own file: %w", err)
	}
	f, err := os.Open(path)
	if err != nil {
		return "", fmt.Errorf("the program's own file: %w", err)
	}
	defer f.Close()
	h := sha256.New()
	if _, err := io.Copy(h, f); err != nil {
		return "", fmt.Errorf("the program's own file: %w", err)
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}
