package journal

import (
	"errors"
	"fmt"
	"log/slog"
	"net/url"
	"strings"
	"time"
)

// Options say where a journal is and what it may take.
type Options struct {
	// Dir is a folder for a broker within this process. Without one, Broker is
	// that of another.
	Dir    string
	Broker Broker
	// MaxBytes bounds what the journal takes on the disk. Old records go when
	// it is three quarters full. Default 4 GiB.
	MaxBytes int64
	// FreeBytes is what is left free on the disk of Dir: below it new records
	// are refused. Default 256 MiB.
	FreeBytes int64
	// MaxAge is for how long records are kept at most, give or take a sixteenth;
	// what lines need is asked for anew in time. 0 is without end.
	MaxAge time.Duration
	// Partitions is in how many the lines are divided, of a journal that is new.
	// Default 1 with Dir, where the broker syncs one pack after the other whichever
	// partition it is of; else 4.
	Partitions int
	// Shared has several servers write one journal at a broker, each the partitions
	// that it takes (Journal.Take). Lost, if set, is told from another goroutine of a
	// partition that another server writes now.
	Shared bool
	Lost   func(partition int)
	// Log takes what the operator should know; nil is nothing.
	Log *slog.Logger
}

// Broker is a NATS server, or a cluster of them, with JetStream.
type Broker struct {
	// URL is nats://HOST:PORT, or tls://; several with commas between them.
	URL string
	// Credentials is a file of a user's JWT and key; Authority a file of the
	// certificates that sign the broker's own; Certificate and Key are the files
	// that this side shows.
	Credentials, Authority, Certificate, Key string
	// Replicas is how many brokers of a cluster keep each record, of a journal
	// that is new. Default 1.
	Replicas int
}

// address is the URL without what a user proves himself with.
func (b *Broker) address() string {
	parts := strings.Split(b.URL, ",")
	for i, p := range parts {
		if u, err := url.Parse(strings.TrimSpace(p)); err == nil {
			u.User = nil
			parts[i] = u.String()
		}
	}
	return strings.Join(parts, ",")
}

// The bounds of the options.
const (
	minBytes      = 32 << 20
	maxPartitions = 256
	maxReplicas   = 5
	minAge        = time.Second
)

func (o Options) withDefaults() Options {
	if o.MaxBytes == 0 {
		o.MaxBytes = 4 << 30
	}
	if o.FreeBytes == 0 {
		o.FreeBytes = 256 << 20
	}
	if o.Partitions == 0 && o.Dir != "" {
		o.Partitions = 1
	}
	if o.Partitions == 0 {
		o.Partitions = 4
	}
	if o.Broker.Replicas == 0 {
		o.Broker.Replicas = 1
	}
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	return o
}

// Validate lists everything that is wrong.
func (o *Options) Validate() error {
	var errs []error
	add := func(format string, args ...any) { errs = append(errs, fmt.Errorf("journal: "+format, args...)) }
	b := &o.Broker
	switch {
	case o.Dir == "" && b.URL == "":
		add("neither a folder nor a broker is given: give one of them")
	case o.Dir != "" && *b != Broker{}:
		add("both a folder (%s) and a broker are given: give one of them", o.Dir)
	case b.URL != "":
		if u, err := url.Parse(b.URL); err != nil || u.Host == "" {
			add("%q is no broker's address: give nats://HOST:PORT", b.URL)
		}
	}
	if o.Shared && o.Dir != "" {
		add("a folder (%s) is one server's: give a broker that servers can share", o.Dir)
	}
	if (b.Certificate == "") != (b.Key == "") {
		add("of certificate and key only one is given: give both")
	}
	if o.MaxBytes != 0 && o.MaxBytes < minBytes {
		add("at most %d bytes are too few: give %d (32 MiB) or more", o.MaxBytes, minBytes)
	}
	if o.FreeBytes < 0 {
		add("%d bytes to be left free is negative", o.FreeBytes)
	}
	if o.MaxAge < 0 || o.MaxAge > 0 && o.MaxAge < minAge {
		add("records are to be kept for %v: give %v or more, or 0", o.MaxAge, minAge)
	}
	if o.Partitions < 0 || o.Partitions > maxPartitions {
		add("%d partitions: give 1 to %d", o.Partitions, maxPartitions)
	}
	if b.Replicas < 0 || b.Replicas > maxReplicas {
		add("%d replicas: give 1 to %d", b.Replicas, maxReplicas)
	}
	return errors.Join(errs...)
}
