package server

import (
	"context"
	"errors"
	"runtime/debug"
	"sync"
	"sync/atomic"
	"time"

	"golang.org/x/time/rate"
	"google.golang.org/grpc/status"

	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// owner runs one session in a goroutine of its own. Others reach it through
// its channels.
type owner struct {
	srv      *Server
	vehicle  string
	drive    string
	header   *leadlinev1.DriveHeader
	m        *mapUse
	openedAt time.Time

	attach chan *attachment
	asks   chan func()
	quit   chan struct{} // closed to stop it
	once   sync.Once
	dead   chan struct{} // closed when it has stopped, err set
	err    error
	// latest is the latest posterior, nil before the first. It is not changed.
	latest atomic.Pointer[summary.Posterior]
	cells  atomic.Int64  // of the belief
	ageing atomic.Bool   // its trail may hold what is too old
	pace   *rate.Limiter // of its measurements
	// subject is the drive as those see it who follow the vehicle.
	subject *subject

	// Guarded by srv.mu.
	streams   int // that use it
	finished  bool
	idleSince time.Time // without a stream, of this server's time
	// silentSince is when the last measurement may have come, before a restart,
	// too.
	silentSince time.Time

	// Of the goroutine.
	sess        Session
	beside      *searches
	rec         *recorder
	sequence    uint64 // highest batch that is in
	submitted   uint64 // and that is on its way there
	malformed   uint64 // measurements refused before they reached the session
	posteriors  uint64
	ended       bool
	at          *attachment // the stream that feeds it, or nil
	out         []item      // replies that wait; no batch is taken while any do
	log         driveLog
	extras      *extras // for those who follow
	trail       trail
	past        []byte              // what the drive was like, packed, once it has ended; srv.mu guards it
	alarms      map[alarmKey]uint64 // on record, with their numbers
	heard, over broadcast           // of a road: there is news; its drive has ended
}

// attachment joins a stream to an owner.
type attachment struct {
	reply        leadlinev1.Reply
	acknowledged uint64        // the highest batch that the client has a durable receipt for
	in           chan work     // from the stream, bounded
	out          chan item     // to the stream
	gone         chan struct{} // closed by the stream when it is over
	taken        chan struct{} // closed by the owner when another stream took over
}

// work is what a stream hands to its owner.
type work struct {
	batch  *leadlinev1.Batch
	bytes  []byte // of the batch, as it came; nil is that they are not there
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

// newOwner makes an owner that the caller's stream uses; go run starts it.
func newOwner(s *Server, req *leadlinev1.Open, m *mapUse, sess Session, beside *searches) *owner {
	o := &owner{
		srv: s, vehicle: req.GetHeader().GetVehicle(), drive: req.GetDrive(), header: req.GetHeader(), m: m, sess: sess, beside: beside,
		openedAt: s.cfg.Now(),
		attach:   make(chan *attachment), asks: make(chan func()),
		quit: make(chan struct{}), dead: make(chan struct{}),
		streams: 1, rec: newRecorder(nil),
	}
	o.subject, o.extras = o.newSubject(), newExtras(sess, m.Space)
	o.alarms = map[alarmKey]uint64{}
	o.pace = newPace(s.cfg.Limits.Rate, s.cfg.Limits)
	o.measured()
	o.log = newDriveLog(s.cfg.Log, s.cfg.Now, o.vehicle, o.drive)
	return o
}

// about says whose drive an error is about.
func (o *owner) about() about { return about{"vehicle": o.vehicle, "drive": o.drive} }

func (o *owner) takenOver() error {
	return refuse(leadlinev1.Reason_REASON_TAKEN_OVER, o.about(), "another stream has opened drive %q of vehicle %q: only one may feed it", o.drive, o.vehicle)
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
	defer o.srv.releaseMap(o.m)
	defer o.beside.wait()
	defer close(o.dead)
	defer o.leave()
	defer func() {
		if r := recover(); r != nil {
			// A session that broke its own rules is given up; the others go on.
			o.log.Error("session failed", "panic", r, "stack", string(debug.Stack()))
			o.stop(refuse(leadlinev1.Reason_REASON_SESSION_FAILED, o.about(), "the session of vehicle %q failed and was dropped: report it with the server's log", o.vehicle))
			o.srv.forget(o)
		}
	}()
	for {
		var (
			attach <-chan *attachment
			in     <-chan work
			out    chan<- item
			next   item
			gone   <-chan struct{}
		)
		if o.at != nil {
			gone = o.at.gone
			if len(o.out) > 0 {
				out, next = o.at.out, o.out[0]
			} else if o.mayWork() {
				in = o.at.in
			}
		}
		if o.mayAttach() {
			attach = o.attach
		}
		o.rest()
		select {
		case <-o.quit:
			return
		case a := <-attach:
			o.take(a)
		case <-o.rec.poke:
			o.settle()
			o.ageTrail()
		case f := <-o.asks:
			f()
		case <-o.subject.poke:
			o.srv.hub.present(o.subject, o.extras, false)
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

// mayWork reports whether the stream may hand over work, mayAttach whether another
// may come: it is told what is in.
func (o *owner) mayWork() bool   { return o.at != nil && len(o.out) == 0 && !o.rec.full() }
func (o *owner) mayAttach() bool { return !o.rec.busy() }

// rest has the session give back what it works with, unless who follows has yet to be
// told what it has just seen.
func (o *owner) rest() {
	if r, can := o.sess.(interface{ Rest() }); can && len(o.subject.poke) == 0 {
		r.Rest()
	}
}

// leave tells those who follow and the log that the owner has stopped.
func (o *owner) leave() {
	why := status.Convert(o.err).Message()
	if errors.Is(o.err, errMoved) || errors.Is(o.err, errLost) {
		if errors.Is(o.err, errMoved) {
			o.lastCheckpoint()
		}
		o.clearAlarms(why)
		o.srv.roads.drop(o, true)
		o.srv.hub.moved(o.subject)
		o.srv.hub.erase(o.subject) // what waits is told from there, or has been erased there
		return
	}
	if !o.ended {
		o.farewell(false, "", why)
		o.clearAlarms("the drive was dropped: " + why)
	}
	if errors.Is(o.err, errStopping) {
		o.lastCheckpoint()
	} else {
		o.srv.dropLine(o.rec.line)
	}
	o.srv.roads.drop(o, false)
	o.srv.hub.forget(o.subject)
	accepted, refused := o.counts()
	switch {
	case !o.ended:
		o.log.Info("drive dropped", "why", why, "posteriors", o.posteriors, "accepted", accepted, "refused", refused, o.log.reasons())
	case !errors.Is(o.err, errStopping):
		o.log.Info("ended drive forgotten", "why", why)
	}
}

// do runs f on the owner's goroutine and waits until it is done. The vehicle
// waits meanwhile, so f must be short and must not wait for anything. After an
// error f may be running still: leave alone what it writes.
func (o *owner) do(ctx context.Context, f func()) error {
	done := make(chan struct{})
	ask := func() { f(); close(done) }
	select {
	case o.asks <- ask:
	case <-o.dead:
		return o.err
	case <-ctx.Done():
		return status.FromContextError(ctx.Err()).Err()
	}
	select {
	case <-done:
		return nil
	case <-o.dead:
		return o.err
	case <-ctx.Done():
		return status.FromContextError(ctx.Err()).Err()
	}
}

// take makes a stream the one that feeds the session. What an earlier one had
// in its queue was not acknowledged, and is sent again.
func (o *owner) take(a *attachment) {
	o.log.attached(o.sequence, o.at != nil)
	if o.at != nil {
		close(o.at.taken)
	}
	o.at, o.out = a, nil
	if a.acknowledged > o.sequence {
		o.log.Error("acknowledged measurements are lost", "acknowledged", a.acknowledged, "here", o.sequence)
		o.hangup(lostAcknowledged(o.about(), a.acknowledged, o.sequence))
		return
	}
	o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Opened{Opened: &leadlinev1.Opened{
		Sequence: o.sequence, MapFingerprint: o.m.fingerprint(),
		MaxBatch:        uint32(o.srv.cfg.Limits.BatchMeasurements),
		MaxMessageBytes: uint32(o.srv.cfg.Limits.MessageBytes),
		Version:         o.srv.cfg.Version,
	}}})
}

// say queues a reply, if there is a stream. At most those of one batch wait.
func (o *owner) say(m *leadlinev1.FeedResponse) {
	if o.at != nil {
		o.out = append(o.out, item{message: m})
	}
}

// hangup ends the stream, if there is one, after the replies that wait.
func (o *owner) hangup(err error) {
	if o.at != nil {
		o.out = append(o.out, item{last: true, err: err})
	}
}

func (o *owner) work(w work) {
	switch {
	case w.hangup:
		o.after(func() { o.hangup(w.err) })
	case w.end:
		o.end(func(c *leadlinev1.Closed, err error) {
			if err != nil {
				o.unrecorded(err)
				return
			}
			o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Closed{Closed: c}})
			o.hangup(nil)
		})
	default:
		o.batch(w.batch, w.bytes)
	}
}
