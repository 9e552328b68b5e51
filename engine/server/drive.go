package server

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Everything here runs on the owner's goroutine.

// batch has a batch recorded and then takes it, unless it is in already. data is the
// batch as it came, if it is there.
func (o *owner) batch(b *leadlinev1.Batch, data []byte) {
	if b.GetSequence() > 0 && b.GetSequence() <= o.submitted {
		o.after(func() { o.receipt(&leadlinev1.Receipt{Sequence: o.sequence}) })
		return
	}
	if err := o.wrongBatch(b); err != nil {
		o.after(func() { o.hangup(err) })
		return
	}
	if data == nil {
		var err error
		if data, err = o.rec.encode(b); err != nil {
			o.after(func() { o.hangup(badField("batch", "batch %d: %v", b.GetSequence(), err)) })
			return
		}
	}
	o.submitted = b.GetSequence()
	o.record(kindBatch, data, func() { o.takeBatch(b) }, o.unrecorded)
}

// takeBatch takes the measurements of a batch that is recorded. One that the
// drive's end has overtaken is left out.
func (o *owner) takeBatch(b *leadlinev1.Batch) {
	if o.ended {
		o.hangup(o.tooLate(b))
		return
	}
	defer o.srv.load.work()()
	defer o.owes(time.Now())
	r := &leadlinev1.Receipt{Sequence: b.GetSequence()}
	var n news
	for i, m := range b.GetMeasurements() {
		if refused := o.enter(&n, i, m); refused != nil {
			r.Refusals = append(r.Refusals, refused)
			continue
		}
		r.Accepted++
	}
	o.sequence = b.GetSequence()
	o.measured()
	o.tell(&n)
	o.heard.tell()
	o.receipt(r)
}

// enter takes one measurement, the i-th of a batch, and passes on what it
// releases; or says why it is refused.
func (o *owner) enter(n *news, i int, m *leadlinev1.SensorMeasurement) *leadlinev1.Refusal {
	ps, err := o.measure(m)
	if err != nil {
		refused, ok := refusal(i, m, err)
		if !ok {
			panic(fmt.Sprintf("batch after %d, measurement %d: %v", o.sequence, i, err)) // only refusals are agreed
		}
		o.log.refused(refused)
		o.srv.cfg.Metrics.Refused(strings.TrimPrefix(refused.GetReason().String(), "REASON_"))
		o.subject.recent.add(m, refused)
		return refused
	}
	o.srv.cfg.Metrics.Accepted()
	o.subject.recent.add(m, nil)
	o.publish(n, ps)
	return nil
}

func (o *owner) tooLate(b *leadlinev1.Batch) error {
	return refuse(leadlinev1.Reason_REASON_DRIVE_ENDED, o.about(), "batch %d came after the end of drive %q: open another drive", b.GetSequence(), o.drive)
}

// wrongBatch says what is wrong with a batch as a whole.
func (o *owner) wrongBatch(b *leadlinev1.Batch) error {
	seq, n, most := b.GetSequence(), len(b.GetMeasurements()), o.srv.cfg.Limits.BatchMeasurements
	switch {
	case seq == 0:
		return badField("batch.sequence", "batch: sequence is missing: count the batches of a drive from 1")
	case seq != o.submitted+1:
		return refuse(leadlinev1.Reason_REASON_OUT_OF_ORDER, o.about(), "batch %d came after batch %d: send %d next", seq, o.submitted, o.submitted+1)
	case o.ended:
		return o.tooLate(b)
	case n > most:
		return refuse(leadlinev1.Reason_REASON_BAD_FIELD, about{"field": "batch.measurements", "limit": "batch", "most": strconv.Itoa(most)},
			"batch %d holds %d measurements: at most %d; split it", seq, n, most)
	}
	return nil
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

// news is what the stream is still to be told, where it does not want every
// posterior.
type news struct {
	last      *summary.Posterior // the last one that was released and holds
	withdrawn []sensor.Time
}

// publish passes on what the session has just released, and what it took back
// with that: to those who follow at once, to the stream as it wants.
func (o *owner) publish(n *news, ps []*summary.Posterior) {
	gone := o.sess.Withdrawn()
	if len(ps) == 0 && len(gone) == 0 {
		return
	}
	for _, p := range ps {
		if !p.Revises { // those that do were counted when they were first
			o.posteriors++
		}
	}
	o.posteriors -= uint64(len(gone))
	o.srv.cfg.Metrics.Released(len(ps))
	o.latest.Store(o.sess.Latest())
	o.log.now(o.sess.Latest())
	o.trail.take(ps, gone)
	o.recordAlarms()
	o.told(ps, gone)
	if o.at == nil || o.at.reply == leadlinev1.Reply_REPLY_NONE {
		return
	}
	if o.at.reply == leadlinev1.Reply_REPLY_EVERY && !o.srv.load.thins() {
		for _, p := range ps {
			o.sayPosterior(p)
		}
		o.sayWithdrawn(gone)
		return
	}
	for _, p := range ps {
		if n.last != nil && o.at.reply == leadlinev1.Reply_REPLY_EVERY {
			o.srv.cfg.Metrics.Thinned()
		}
		n.last = p
		n.withdrawn = slices.DeleteFunc(n.withdrawn, func(t sensor.Time) bool { return int64(t) == p.TimeNS })
	}
	n.withdrawn = append(n.withdrawn, gone...)
	if n.last != nil && slices.Contains(n.withdrawn, sensor.Time(n.last.TimeNS)) {
		n.last = o.sess.Latest()
	}
}

// tell says to the stream what publish has kept.
func (o *owner) tell(n *news) {
	o.sayWithdrawn(n.withdrawn)
	if n.last != nil {
		o.sayPosterior(n.last)
	}
}

func (o *owner) sayPosterior(p *summary.Posterior) {
	o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Posterior{Posterior: o.message(p)}})
}

func (o *owner) sayWithdrawn(times []sensor.Time) {
	if len(times) > 0 {
		o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Withdrawn{Withdrawn: withdrawn(times)}})
	}
}

func withdrawn(times []sensor.Time) *leadlinev1.Withdrawn {
	w := &leadlinev1.Withdrawn{Times: make([]*timestamppb.Timestamp, len(times))}
	for i, t := range times {
		w.Times[i] = wire.FromTime(t)
	}
	return w
}

func (o *owner) receipt(r *leadlinev1.Receipt) {
	r.Durable = o.rec.line != nil
	o.say(&leadlinev1.FeedResponse{Message: &leadlinev1.FeedResponse_Receipt{Receipt: r}})
}

// counts are the measurements accepted and refused.
func (o *owner) counts() (accepted, refused uint64) {
	accepted, refused = o.sess.Counts()
	return accepted, refused + o.malformed
}

// end has the end of the drive recorded, once, ends it, and calls then, on the
// owner's goroutine, with how it ended or why that is not recorded.
func (o *owner) end(then func(*leadlinev1.Closed, error)) {
	if o.ended {
		o.after(func() { then(o.closing(), nil) })
		return
	}
	o.record(kindEnd, nil, func() { then(o.closing(), nil) }, func(err error) { then(nil, err) })
}

// closing ends the drive, once, and says how it ended.
func (o *owner) closing() *leadlinev1.Closed {
	accepted, refused := o.counts()
	if !o.ended {
		var n news
		o.publish(&n, o.sess.Flush())
		o.tell(&n)
		o.ended = true
		o.clearAlarms("the drive has ended")
		o.srv.finish(o, o.packPast())
		o.farewell(true, o.sess.Hash(), "the drive has ended")
		o.rec.checks.pressed.Store(true) // a checkpoint holds what it was like
		o.log.Info("drive ended", "posteriors", o.posteriors, "accepted", accepted, "refused", refused, o.log.reasons())
	}
	c := &leadlinev1.Closed{
		Posteriors: o.posteriors, PosteriorSha256: o.sess.Hash(),
		Accepted: accepted, Refused: refused, Version: o.srv.cfg.Version,
	}
	if p := o.sess.Latest(); p != nil {
		c.Posterior = o.message(p)
	}
	if r, ok := o.sess.(*roadSession); ok {
		c.Traffic, c.PosteriorSha256 = o.picture(r, briefly), ""
		o.heard.tell()
		o.over.tell()
	}
	return c
}

// message converts a posterior as of now.
func (o *owner) message(p *summary.Posterior) *leadlinev1.Posterior {
	m := o.srv.message(p, o.vehicle, o.m.Map, o.malformed, o.srv.cfg.Now())
	m.Recomputed = o.subject.recomputed
	return m
}
