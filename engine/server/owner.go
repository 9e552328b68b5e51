package server

import (
	"fmt"
	"runtime/debug"
	"sync"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// owner runs one session in a goroutine of its own. Others reach it through
// its channels.
type owner struct {
	srv     *Server
	vehicle string
	drive   string
	header  *leadlinev1.DriveHeader
	m       Map

	attach    chan *attachment
	questions chan *question
	quit      chan struct{} // closed to stop it
	once      sync.Once
	dead      chan struct{} // closed when it has stopped, err set
	err       error

	// Guarded by srv.mu.
	streams   int // that use it
	finished  bool
	idleSince time.Time

	// Of the goroutine.
	sess       Session
	sequence   uint64 // highest batch that is in
	malformed  uint64 // measurements refused before they reached the session
	posteriors uint64
	ended      bool
	at         *attachment // the stream that feeds it, or nil
	out        []item      // replies that wait; no batch is taken while any do
}

// attachment joins a stream to an owner.
type attachment struct {
	reply leadlinev1.Reply
	in    chan work     // from the stream, bounded
	out   chan item     // to the stream
	gone  chan struct{} // closed by the stream when it is over
	taken chan struct{} // closed by the owner when another stream took over
}

// work is what a stream hands to its owner.
type work struct {
	batch  *leadlinev1.Batch
	end    bool
	hangup bool  // the stream wants to be over, with err, once the rest is done
	err    error // for hangup
}

// item is what an owner hands to its stream. The last one ends it, with err.
type item struct {
	message *leadlinev1.FeedResponse
	last    bool
	err     error
}

// stop ends the owner after the batch that it is at. Streams get err, the
// first one given.
func (o *owner) stop(err error) {
	o.once.Do(func() {
		o.err = err
		close(o.quit)
	})
}

// run is the owner's goroutine.
func (o *owner) run() {
	defer o.srv.ended.Done()
	defer close(o.dead)
	defer func() {
		if r := recover(); r != nil {
			// A session that broke its own rules is given up; the others go on.
			o.srv.cfg.Log.Error("session failed", "vehicle", o.vehicle, "drive", o.drive, "panic", r, "stack", string(debug.Stack()))
			o.stop(status.Errorf(codes.Internal, "the session of vehicle %q failed and was dropped: report it with the server's log", o.vehicle))
			o.srv.forget(o)
		}
	}()
	for {
		var (
			in   <-chan work
			out  chan<- item
			next item
			gone <-chan struct{}
		)
		if o.at != nil {
			gone = o.at.gone
			if len(o.out) > 0 {
				out, next = o.at.out, o.out[0]
			} else {
				in = o.at.in
			}
		}
		select {
		case <-o.quit:
			return
		case a := <-o.attach:
			o.take(a)
		case q := <-o.questions:
			q.answer <- o.answer(q)
		case w := <-in:
			o.work(w)
		case out <- next:
			o.out[0] = item{}
			o.out = o.out[1:]
			if next.last {
				o.at, o.out = nil, nil
			}
		case <-gone:
			o.at, o.out = nil, nil
		}
	}
}

// take makes a stream the one that feeds the session. What an earlier one had
// in its queue was not acknowledged, and is sent again.
func (o *owner) take(a *attachment) {
	if o.at != nil {
		close(o.at.taken)
	}
	o.at, o.out = a, nil
	opened := &leadlinev1.Opened{
		Sequence: o.sequence, MapFingerprint: o.m.Space.Fingerprint(),
		MaxBatch:        uint32(o.srv.cfg.Limits.BatchMeasurements),
		MaxMessageBytes: uint32(o.srv.cfg.Limits.MessageBytes),
	}
	o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Opened{Opened: opened}})
}

// say queues a reply. At most those of one batch wait.
func (o *owner) say(m *leadlinev1.FeedResponse) { o.out = append(o.out, item{message: m}) }

// hangup ends the stream after the replies that wait.
func (o *owner) hangup(err error) { o.out = append(o.out, item{last: true, err: err}) }

func (o *owner) work(w work) {
	switch {
	case w.hangup:
		o.hangup(w.err)
	case w.end:
		o.end()
	default:
		o.batch(w.batch)
	}
}

// batch takes the measurements of one batch, unless it is in already.
func (o *owner) batch(b *leadlinev1.Batch) {
	seq, most := b.GetSequence(), o.srv.cfg.Limits.BatchMeasurements
	switch {
	case seq == 0:
		o.hangup(status.Error(codes.InvalidArgument, "batch: sequence is missing: count the batches of a drive from 1"))
		return
	case seq <= o.sequence:
		o.receipt(&leadlinev1.Receipt{Sequence: o.sequence})
		return
	case seq != o.sequence+1:
		o.hangup(status.Errorf(codes.FailedPrecondition, "batch %d came after batch %d: send %d next", seq, o.sequence, o.sequence+1))
		return
	case o.ended:
		o.hangup(status.Errorf(codes.FailedPrecondition, "batch %d came after the end of drive %q: open another drive", seq, o.drive))
		return
	case len(b.GetMeasurements()) > most:
		o.hangup(status.Errorf(codes.InvalidArgument, "batch %d holds %d measurements: at most %d; split it", seq, len(b.GetMeasurements()), most))
		return
	}
	r := &leadlinev1.Receipt{Sequence: seq}
	var released []*summary.Posterior
	for i, m := range b.GetMeasurements() {
		ps, err := o.measure(m)
		released = append(released, ps...)
		if err == nil {
			r.Accepted++
			continue
		}
		refused, ok := refusal(i, m, err)
		if !ok {
			panic(fmt.Sprintf("batch %d, measurement %d: %v", seq, i, err)) // only refusals are agreed
		}
		r.Refusals = append(r.Refusals, refused)
	}
	o.sequence = seq
	o.publish(released)
	o.receipt(r)
}

// measure takes one measurement.
func (o *owner) measure(m *leadlinev1.SensorMeasurement) ([]*summary.Posterior, error) {
	ev, err := wire.ToEvent(m)
	if err != nil {
		o.malformed++
		return nil, &session.Refusal{Reason: session.Unusable, Detail: err.Error()}
	}
	return o.sess.Add(ev)
}

// publish counts posteriors and sends those that the stream wants.
func (o *owner) publish(ps []*summary.Posterior) {
	for _, p := range ps {
		if !p.Revises { // those that do were counted when they were first
			o.posteriors++
		}
	}
	if len(ps) == 0 || o.at.reply == leadlinev1.Reply_REPLY_NONE {
		return
	}
	if o.at.reply != leadlinev1.Reply_REPLY_EVERY {
		ps = ps[len(ps)-1:]
	}
	for _, p := range ps {
		o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Posterior{Posterior: o.message(p)}})
	}
}

func (o *owner) receipt(r *leadlinev1.Receipt) {
	o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Receipt{Receipt: r}})
}

// end flushes the session, once, and closes the stream.
func (o *owner) end() {
	if !o.ended {
		o.publish(o.sess.Flush())
		o.ended = true
		o.srv.finish(o)
	}
	accepted, refused := o.sess.Counts()
	c := &leadlinev1.Closed{
		Posteriors: o.posteriors, PosteriorSha256: o.sess.Hash(),
		Accepted: accepted, Refused: refused + o.malformed,
	}
	if p := o.sess.Latest(); p != nil {
		c.Posterior = o.message(p)
	}
	o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Closed{Closed: c}})
	o.hangup(nil)
}

// message converts a posterior as of now.
func (o *owner) message(p *summary.Posterior) *leadlinev1.Posterior {
	m := message(p, o.vehicle, o.m, o.srv.cfg.Now())
	m.Counts.Refused += o.malformed
	return m
}
