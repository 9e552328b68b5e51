package main

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"time"

	"github.com/spf13/cobra"

	"leadline/engine/journal"
)

// keepOptions say where a server keeps what is to be durable.
type keepOptions struct {
	data   string
	broker journal.Broker
	// In MiB.
	mostMiB, freeMiB int64
	keepFor          time.Duration
}

// flags adds the options' flags.
func (o *keepOptions) flags(c *cobra.Command) {
	f := c.Flags()
	f.StringVar(&o.data, "data", "", "folder that keeps measurements durable; nothing is durable without it or --broker")
	f.StringVar(&o.broker.URL, "broker", "", "NATS servers with JetStream that keep them in place of a folder, as nats://HOST:PORT or tls://HOST:PORT, several with commas")
	f.StringVar(&o.broker.Credentials, "broker-credentials", "", "file with the user's credentials for the broker")
	f.StringVar(&o.broker.Authority, "broker-authority", "", "file with the certificates that sign the broker's")
	f.StringVar(&o.broker.Certificate, "broker-certificate", "", "file with the certificate that is shown to the broker")
	f.StringVar(&o.broker.Key, "broker-key", "", "file with that certificate's key")
	f.IntVar(&o.broker.Replicas, "broker-replicas", 1, "how many of the broker's servers keep each record, of a journal that is new")
	f.Int64Var(&o.mostMiB, "journal-mib", 4096, "greatest size of the journal, MiB; old records that no drive needs go first")
	f.Int64Var(&o.freeMiB, "journal-free-mib", 256, "what is left free on the disk of --data, MiB: with less, new measurements are refused")
	f.DurationVar(&o.keepFor, "keep-for", 720*time.Hour, "for how long what was measured is kept at most, and drives that are silent; 0 is without end")
	settable(c, "keep-for", "data", "broker", "broker-credentials", "broker-authority", "broker-certificate", "broker-key", "broker-replicas", "journal-mib", "journal-free-mib")
}

// options are those of the journal; nil where nothing is kept.
func (o *keepOptions) options() (*journal.Options, error) {
	if o.keepFor != 0 && o.keepFor < time.Second {
		return nil, fmt.Errorf("--keep-for is %v: give a second or more, such as 720h, or 0", o.keepFor)
	}
	if o.data == "" && o.broker.URL == "" {
		b := o.broker
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
	out := &journal.Options{Dir: o.data, MaxBytes: o.mostMiB << 20, FreeBytes: o.freeMiB << 20}
	if o.data == "" {
		out.Broker = o.broker
	}
	return out, out.Validate()
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
