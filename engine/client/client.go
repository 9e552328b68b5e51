// Package client feeds a vehicle's measurements to a Leadline server and asks
// where it is.
//
//	conn, err := client.Dial("127.0.0.1:7700")
//	feed, err := client.Open(ctx, conn, client.Drive{Header: header})
//	err = feed.Send(measurement) // as often as there are some
//	closed, err := feed.Close()
//
// To ask, use leadlinev1.NewPositionServiceClient(conn).Where.
package client

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"sync/atomic"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/backoff"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/keepalive"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// overhead bounds what a batch's message has beside its measurements: tags,
// lengths and the sequence; perMeasurement what each adds.
const (
	overhead       = 32
	perMeasurement = 6
)

// maxMessage bounds a reply; a posterior with its largest regions takes less.
const maxMessage = 16 << 20

// Dial prepares a connection to host:port, in the clear; of several with commas
// between them, whichever answers, and another one when that is gone. Nothing is sent
// before the first call, so an address where nobody listens is an error there.
// DialSecure encrypts, and says who calls.
func Dial(target string) (*grpc.ClientConn, error) { return DialSecure(target, Security{}) }

// silentTimeout is for how long the other side's machine may say nothing to what it
// was sent.
const silentTimeout = 5 * time.Second

// dialOptions are those of every connection.
func dialOptions() []grpc.DialOption {
	return []grpc.DialOption{
		grpc.WithDefaultCallOptions(grpc.MaxCallRecvMsgSize(maxMessage)),
		// What is sent and not taken by the other side's machine for as long as the
		// timeout ends the connection, too: a server that is cut off ends none.
		grpc.WithKeepaliveParams(keepalive.ClientParameters{Time: 30 * time.Second, Timeout: silentTimeout}),
		// A server that is started again is found soon.
		grpc.WithConnectParams(grpc.ConnectParams{
			Backoff:           backoff.Config{BaseDelay: shortestWait, Multiplier: 1.6, Jitter: 0.3, MaxDelay: longestWait},
			MinConnectTimeout: 5 * time.Second,
		}),
	}
}

// Drive says what a feed carries, and how.
type Drive struct {
	Header *leadlinev1.DriveHeader
	// Name is the name of the drive; "" makes one up. Open the same name again
	// and send the same measurements from the start with the same Batch: what
	// the server has is not sent twice.
	Name string
	// Continue says that what is sent goes on after what the server has, in
	// place of sending that again.
	Continue bool
	// Replace gives up another drive that the vehicle has not finished.
	Replace bool
	// Acknowledged is the highest batch for which a feed of the same drive had a
	// receipt that said durable, 0 for none: a server that has less is then an
	// error (JOURNAL_DAMAGED), since it has lost what it acknowledged.
	Acknowledged uint64
	// Batch is the number of measurements sent together, at most what the
	// server takes; 0 is 64. Window is the number of batches that may be
	// unacknowledged; 0 is 16.
	Batch, Window int

	// Reply says which posteriors are wanted. Those that OnWithdrawn gets the
	// times of hold no more; with REPLY_EVERY it is one order for both, and a
	// client that drops what is withdrawn and replaces what is revised ends
	// with the posteriors that Closed has the hash of. OnPosterior, OnWithdrawn
	// and OnRefusal, if set, are called one at a time, from another goroutine,
	// and must not call the feed; a slow one slows the feed down.
	Reply       leadlinev1.Reply
	OnPosterior func(*leadlinev1.Posterior)
	OnWithdrawn func(*leadlinev1.Withdrawn)
	OnRefusal   func(*leadlinev1.Refusal)

	// OnLost and OnOpened, if set, are called by a Courier or Carrier: when the server
	// cannot be fed, with the reason, before each wait for another try, and when it has
	// opened the drive, again too.
	OnLost   func(error)
	OnOpened func()
}

// defaultBatch is the number of measurements that are sent together unless said.
const defaultBatch = 64

// Feed is an open drive. One goroutine may use it.
type Feed struct {
	drive  Drive
	stream grpc.BidiStreamingClient[leadlinev1.FeedRequest, leadlinev1.FeedResponse]
	cancel context.CancelFunc

	batch  []*leadlinev1.SensorMeasurement
	bytes  int           // of batch, encoded
	most   int           // bytes of a batch
	sent   uint64        // sequence of the last batch made
	have   uint64        // sequence of the last batch that the server had at the start
	window chan struct{} // one token a batch without receipt

	receipts, durable atomic.Uint64 // the last batch with a receipt, and with one that said durable

	done   chan struct{} // closed when nothing more is received; then:
	closed *leadlinev1.Closed
	err    error
}

// Open opens a drive and waits until the server has taken it. The feed ends
// with ctx; Close must be called in any case.
func Open(ctx context.Context, conn grpc.ClientConnInterface, d Drive) (*Feed, error) {
	if d.Name == "" {
		d.Name = rand.Text()
	}
	if d.Batch == 0 {
		d.Batch = defaultBatch
	}
	if d.Window == 0 {
		d.Window = 16
	}
	if d.Batch < 1 || d.Window < 1 {
		return nil, fmt.Errorf("client: batch %d and window %d must be positive", d.Batch, d.Window)
	}
	ctx, cancel := context.WithCancel(ctx)
	opened, stream, err := open(ctx, conn, d)
	if err != nil {
		cancel()
		return nil, err
	}
	d.Batch = min(d.Batch, int(opened.GetMaxBatch()))
	f := &Feed{
		drive: d, stream: stream, cancel: cancel, have: opened.GetSequence(),
		most:   int(opened.GetMaxMessageBytes()) - overhead,
		window: make(chan struct{}, d.Window), done: make(chan struct{}),
	}
	if d.Continue {
		f.sent = f.have
	}
	f.receipts.Store(f.have)
	f.durable.Store(d.Acknowledged)
	go f.receive()
	return f, nil
}

func open(ctx context.Context, conn grpc.ClientConnInterface, d Drive) (*leadlinev1.Opened, grpc.BidiStreamingClient[leadlinev1.FeedRequest, leadlinev1.FeedResponse], error) {
	stream, err := leadlinev1.NewPositionServiceClient(conn).Feed(ctx)
	if err != nil {
		return nil, nil, err
	}
	req := &leadlinev1.Open{Header: d.Header, Drive: d.Name, Replace: d.Replace, Reply: d.Reply, Acknowledged: d.Acknowledged}
	// An error of Send is told by Recv.
	_ = stream.Send(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Open{Open: req}})
	m, err := stream.Recv()
	if err != nil {
		return nil, nil, err
	}
	if m.GetOpened().GetMaxBatch() == 0 {
		return nil, nil, errors.New("client: the server did not answer opened: is it of another version?")
	}
	return m.GetOpened(), stream, nil
}

// Name returns the drive's name.
func (f *Feed) Name() string { return f.drive.Name }

// Send sends a measurement, with its batch once that is full, and waits while
// Window batches have no receipt. It keeps m. An error ends the feed.
func (f *Feed) Send(m *leadlinev1.SensorMeasurement) error {
	size := proto.Size(m) + perMeasurement
	if f.bytes+size > f.most {
		if err := f.Flush(); err != nil {
			return err
		}
	}
	f.batch = append(f.batch, m)
	f.bytes += size
	if len(f.batch) < f.drive.Batch {
		return nil
	}
	return f.Flush()
}

// Flush sends the measurements that wait for their batch to fill.
func (f *Feed) Flush() error {
	if len(f.batch) == 0 {
		return nil
	}
	f.sent++
	b := &leadlinev1.Batch{Sequence: f.sent, Measurements: f.batch}
	f.batch, f.bytes = nil, 0
	if f.sent <= f.have {
		return nil
	}
	select {
	case f.window <- struct{}{}:
	case <-f.done:
		return f.failure()
	}
	return f.send(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Batch{Batch: b}})
}

func (f *Feed) send(m *leadlinev1.FeedRequest) error {
	if f.stream.Send(m) != nil {
		<-f.done // where the reason arrives
		return f.failure()
	}
	return nil
}

// failure is why the feed ended, if not by Close.
func (f *Feed) failure() error {
	switch {
	case f.err != nil:
		return f.err
	case f.closed != nil:
		return f.endedElsewhere()
	}
	return errors.New("client: the feed is closed")
}

// broken is why the feed has ended, nil while it has not, or if that was with
// everything that was sent.
func (f *Feed) broken() error {
	select {
	case <-f.done:
		if f.closed != nil && f.receipts.Load() >= f.sent {
			return nil
		}
		return f.failure()
	default:
		return nil
	}
}

// Ended is what the server said at the end of the drive, nil as long as it has
// not ended: also where another one than this feed has ended it, which is then
// an error of the reason DRIVE_ENDED (WhyOf). It waits for nothing.
func (f *Feed) Ended() *leadlinev1.Closed {
	select {
	case <-f.done:
		return f.closed
	default:
		return nil
	}
}

// Had returns the number of batches that the server had of the drive when the
// feed began: 0 is a drive that is new there.
func (f *Feed) Had() uint64 { return f.have }

// Acknowledged returns the highest batch that the server has, with all before it,
// and the highest that it has durably: for Drive.Acknowledged.
func (f *Feed) Acknowledged() (batch, durable uint64) { return f.receipts.Load(), f.durable.Load() }

// endedElsewhere is what the server would say to another batch.
func (f *Feed) endedElsewhere() error {
	st := status.Newf(codes.FailedPrecondition, "drive %q was ended at the server and not by this feed: what it has not acknowledged is not part of it", f.drive.Name)
	with, err := st.WithDetails(&errdetails.ErrorInfo{
		Reason: "DRIVE_ENDED", Domain: domain,
		Metadata: map[string]string{"drive": f.drive.Name, "vehicle": f.drive.Header.GetVehicle()},
	})
	if err != nil { // only of a status that is OK
		return st.Err()
	}
	return with.Err()
}

// Close sends what waits, ends the drive and returns what the server says at
// its end, or why the feed failed.
func (f *Feed) Close() (*leadlinev1.Closed, error) {
	defer f.cancel()
	err := f.Flush()
	if err == nil {
		select {
		case <-f.done: // ended by the server, before it was asked to
			if f.closed == nil || f.receipts.Load() < f.sent {
				return nil, f.failure()
			}
			return f.closed, nil
		default:
		}
		err = f.send(&leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_End{End: &leadlinev1.End{}}})
	}
	if err != nil {
		f.Abort()
		return nil, err
	}
	<-f.done
	return f.closed, f.err
}

// Leave sends what waits and ends the stream once the server has taken it. The
// drive stays open at the server, and goes on when it is opened again under its
// name.
func (f *Feed) Leave() error {
	defer f.cancel()
	err := f.Flush()
	if err == nil {
		select {
		case <-f.done: // ended by the server, before it was asked to
			return f.failure()
		default:
		}
		_ = f.stream.CloseSend() // an error of it is told by Recv
		<-f.done
		if errors.Is(f.err, errSilent) {
			return nil
		}
		return f.failure()
	}
	f.Abort()
	return err
}

// errSilent ends a stream whose drive did not end.
var errSilent = errors.New("client: the server ended the stream without a word")

// Abort breaks the stream off. The drive stays open at the server, and goes on
// when it is opened again under its name.
func (f *Feed) Abort() {
	f.cancel()
	<-f.done
}

// receive is a goroutine; it ends with the stream.
func (f *Feed) receive() {
	defer close(f.done)
	last := f.have
	for {
		m, err := f.stream.Recv()
		switch {
		case errors.Is(err, io.EOF):
			if f.closed == nil {
				f.err = errSilent
			}
			return
		case err != nil:
			f.err = err
			return
		}
		switch k := m.GetMessage().(type) {
		case *leadlinev1.FeedResponse_Receipt:
			if f.drive.OnRefusal != nil {
				for _, r := range k.Receipt.GetRefusals() {
					f.drive.OnRefusal(r)
				}
			}
			if n := k.Receipt.GetSequence(); n > f.receipts.Load() {
				f.receipts.Store(n)
				if k.Receipt.GetDurable() {
					f.durable.Store(n)
				}
			}
			for ; last < k.Receipt.GetSequence() && len(f.window) > 0; last++ {
				<-f.window
			}
		case *leadlinev1.FeedResponse_Posterior:
			if f.drive.OnPosterior != nil {
				f.drive.OnPosterior(k.Posterior)
			}
		case *leadlinev1.FeedResponse_Withdrawn:
			if f.drive.OnWithdrawn != nil {
				f.drive.OnWithdrawn(k.Withdrawn)
			}
		case *leadlinev1.FeedResponse_Closed:
			f.closed = k.Closed
		}
	}
}
