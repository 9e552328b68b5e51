package journal

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"strconv"
	"sync"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
)

// The stream and its subjects, one a partition.
const (
	streamName    = "LEADLINE"
	subjectPrefix = "leadline.journal."
)

func subject(partition int) string { return subjectPrefix + strconv.Itoa(partition) }

// copySubject is where packs are that stand for those of a partition from which
// something was erased.
func copySubject(partition int) string { return subjectPrefix + "copy-" + strconv.Itoa(partition) }

// startTimeout bounds how long the broker may take to be ready: it reads its
// files then.
const startTimeout = 2 * time.Minute

// callTimeout is for how long one call to the broker is waited for.
const callTimeout = 10 * time.Second

// askTimeout is for how long an answer is waited for before it is asked again: the
// broker of a cluster that should have answered may be gone, and another one in its
// place.
const askTimeout = 2 * time.Second

// dialTimeout is for how long one broker is waited for when a connection is made:
// there may be others.
const dialTimeout = 2 * time.Second

// broker is a connection to one, and the broker itself where it is within this
// process.
type broker struct {
	within *server.Server
	conn   *nats.Conn
	js     jetstream.JetStream

	mu     sync.Mutex
	whole  context.Context // ends when the connection breaks
	breaks context.CancelFunc
}

// A broker that is cut off says nothing, and the connection to it would last for a
// quarter of an hour: it is asked so often, and left after as many questions without
// an answer, for another one of its cluster.
const (
	askEvery = 500 * time.Millisecond
	asksMost = 3
)

// connect starts a broker, or connects to one.
func connect(o *Options) (*broker, error) {
	if o.Dir != "" {
		return startWithin(o)
	}
	conn, err := o.Broker.Dial("leadline journal")
	if err != nil {
		return nil, fmt.Errorf("journal: %w", err)
	}
	b := &broker{conn: conn}
	return b, b.open()
}

// Dial connects to the broker, which calls the connection by a name.
func (b *Broker) Dial(name string) (*nats.Conn, error) {
	opts := []nats.Option{nats.Name(name), nats.MaxReconnects(-1), nats.ReconnectWait(200 * time.Millisecond), nats.Timeout(dialTimeout), nats.PingInterval(askEvery), nats.MaxPingsOutstanding(asksMost)}
	if f := b.Credentials; f != "" {
		if _, err := os.Stat(f); err != nil {
			return nil, fmt.Errorf("credentials: %w", err)
		}
		opts = append(opts, nats.UserCredentials(f))
	}
	if f := b.Authority; f != "" {
		opts = append(opts, nats.RootCAs(f))
	}
	if f := b.Certificate; f != "" {
		opts = append(opts, nats.ClientCert(f, b.Key))
	}
	conn, err := nats.Connect(b.URL, opts...)
	if err != nil {
		return nil, fmt.Errorf("broker %s: %w", b.address(), err)
	}
	return conn, nil
}

// startWithin starts a broker that nobody outside this process can reach, and
// that has each message on the disk before it says so.
func startWithin(o *Options) (*broker, error) {
	ns, err := server.NewServer(&server.Options{
		ServerName: "leadline", DontListen: true, NoSigs: true,
		JetStream: true, StoreDir: o.Dir, SyncAlways: true, DisableJetStreamBanner: true,
		MaxPayload: maxMessage + 4096,
		// What the journal may take is checked against the disk as it fills; the
		// broker would want all of it free at the start.
		JetStreamMaxStore: 2 * o.MaxBytes,
	})
	if err != nil {
		return nil, fmt.Errorf("journal: %s: %w", o.Dir, err)
	}
	ns.SetLoggerV2(brokerLog{o.Log}, false, false, false)
	ns.Start()
	b := &broker{within: ns}
	if !ns.ReadyForConnections(startTimeout) || !ns.JetStreamEnabled() {
		b.close()
		return nil, fmt.Errorf("journal: %s: the broker within this process did not start: see the log for why", o.Dir)
	}
	if b.conn, err = nats.Connect("", nats.InProcessServer(ns), nats.MaxReconnects(-1), nats.ReconnectWait(50*time.Millisecond)); err != nil {
		b.close()
		return nil, fmt.Errorf("journal: %s: %w", o.Dir, err)
	}
	return b, b.open()
}

func (b *broker) open() error {
	b.whole, b.breaks = context.WithCancel(context.Background())
	b.conn.SetDisconnectErrHandler(func(*nats.Conn, error) {
		b.mu.Lock()
		defer b.mu.Unlock()
		b.breaks()
		b.whole, b.breaks = context.WithCancel(context.Background())
	})
	var err error
	if b.js, err = jetstream.New(b.conn, jetstream.WithDefaultTimeout(callTimeout)); err != nil {
		b.close()
	}
	return err
}

// asked is the context of a call to the broker: what a broken connection asked is
// not answered by the next one.
func (b *broker) asked(ctx context.Context) (context.Context, context.CancelFunc) {
	ctx, cancel := context.WithTimeout(ctx, askTimeout)
	b.mu.Lock()
	whole := b.whole
	b.mu.Unlock()
	stop := context.AfterFunc(whole, cancel)
	return ctx, func() { stop(); cancel() }
}

func (b *broker) close() {
	if b.conn != nil {
		b.conn.Close()
	}
	if b.within != nil {
		b.within.Shutdown()
		b.within.WaitForShutdown()
	}
}

// up reports whether the broker works at all: one within this process gives up
// when its disk is full.
func (b *broker) up() bool { return b.within == nil || b.within.JetStreamEnabled() }

// streamSoon is stream for a broker that may just have started: nobody answers while a
// cluster has no leader, and a question from then is never answered.
func (b *broker) streamSoon(ctx context.Context, o *Options) (jetstream.Stream, *jetstream.StreamInfo, error) {
	for {
		ask, asked := context.WithTimeout(ctx, callTimeout)
		st, info, err := b.stream(ask, o)
		asked()
		if !Unanswered(err) {
			return st, info, err
		}
		select {
		case <-time.After(longestPause):
		case <-ctx.Done():
			return nil, nil, err
		}
	}
}

// Unanswered reports whether an error is that a broker does not answer, or has no leader
// for what was asked, which may be over soon.
func Unanswered(err error) bool {
	var api *jetstream.APIError
	return errors.Is(err, nats.ErrNoResponders) || errors.Is(err, jetstream.ErrNoStreamResponse) || errors.Is(err, context.DeadlineExceeded) || errors.Is(err, nats.ErrTimeout) ||
		errors.As(err, &api) && api.Code == 503
}

// stream opens the journal's stream, or makes it.
func (b *broker) stream(ctx context.Context, o *Options) (jetstream.Stream, *jetstream.StreamInfo, error) {
	st, err := b.js.Stream(ctx, streamName)
	if errors.Is(err, jetstream.ErrStreamNotFound) {
		st, err = b.js.CreateStream(ctx, jetstream.StreamConfig{
			Name: streamName, Subjects: []string{subjectPrefix + "*"}, Description: "journal of a Leadline server",
			Storage: jetstream.FileStorage, Retention: jetstream.LimitsPolicy, Discard: jetstream.DiscardNew,
			MaxBytes: o.MaxBytes, MaxMsgSize: maxMessage, Replicas: o.Broker.Replicas, AllowDirect: true,
			Metadata: map[string]string{"leadline_format": strconv.Itoa(Format), "leadline_partitions": strconv.Itoa(o.Partitions)},
		})
	}
	if err != nil {
		return nil, nil, fmt.Errorf("journal: opening the broker's stream %s: %w", streamName, err)
	}
	info, err := st.Info(ctx)
	if err != nil {
		return nil, nil, fmt.Errorf("journal: asking for the broker's stream %s: %w", streamName, err)
	}
	if info.Config.MaxBytes != o.MaxBytes {
		c := info.Config
		c.MaxBytes = o.MaxBytes
		if st, err = b.js.UpdateStream(ctx, c); err != nil {
			return nil, nil, fmt.Errorf("journal: changing the bound of the broker's stream %s: %w", streamName, err)
		}
	}
	return st, info, nil
}

// partitions reads from the stream what format it has and into how many
// partitions it is divided.
func partitions(info *jetstream.StreamInfo) (int, error) {
	m := info.Config.Metadata
	if f := m["leadline_format"]; f != strconv.Itoa(Format) {
		return 0, fmt.Errorf("journal: the stream %s has format %q, and this program reads format %d: use the version that wrote it, or another folder or broker", streamName, f, Format)
	}
	n, err := strconv.Atoi(m["leadline_partitions"])
	if err != nil || n < 1 || n > maxPartitions {
		return 0, fmt.Errorf("journal: the stream %s says that it has %q partitions: its configuration is damaged", streamName, m["leadline_partitions"])
	}
	return n, nil
}

// brokerLog passes on what a broker within this process says.
type brokerLog struct{ *slog.Logger }

func (l brokerLog) Noticef(format string, v ...any) { l.Debug("broker: " + fmt.Sprintf(format, v...)) }

func (l brokerLog) Warnf(format string, v ...any) { l.Warn("broker: " + fmt.Sprintf(format, v...)) }

func (l brokerLog) Errorf(format string, v ...any) { l.Error("broker: " + fmt.Sprintf(format, v...)) }

func (l brokerLog) Fatalf(format string, v ...any) { l.Error("broker: " + fmt.Sprintf(format, v...)) }
func (l brokerLog) Debugf(string, ...any)          {}
func (l brokerLog) Tracef(string, ...any)          {}
