package server

import (
	"crypto/rand"
	"encoding/base64"
	"encoding/binary"
	"slices"
	"time"

	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// resume gives a stream that broke another reader.
func (h *hub) resume(token string, request *leadlinev1.FollowRequest, reader chan struct{}) (*follower, error) {
	bad := func(what string) error {
		return refuse(leadlinev1.Reason_REASON_BAD_TOKEN, about{"field": "resume_token"}, "follow: resume_token %s: follow without one, the present state of every vehicle comes first", what)
	}
	id, number, err := h.readToken(token)
	if err != "" {
		return nil, bad(err)
	}
	f := h.streams[id]
	switch {
	case f == nil || f.err != nil:
		return nil, bad("is of a stream that ended too long ago, or was given up")
	case !proto.Equal(f.request, request):
		return nil, bad("is of a stream that followed otherwise")
	}
	if f.reader != nil {
		close(f.reader)
	} else {
		if err := h.mayRead(); err != nil {
			return nil, err
		}
		h.reading++
	}
	f.reader = reader
	if !f.rollBack(number, h.now()) {
		h.drop(f)
		return nil, bad("is too old")
	}
	f.signal()
	return f, nil
}

// leave takes the reader from a follower, which is kept to be resumed.
func (h *hub) leave(f *follower, reader chan struct{}) {
	h.mu.Lock()
	defer h.mu.Unlock()
	if f.reader != reader {
		return // another one has taken over, or it is gone
	}
	h.reading--
	f.reader, f.leftAt = nil, h.now()
	if f.err != nil || f.count == 0 {
		h.drop(f)
		return
	}
	h.expire()
	var oldest *follower
	waiting := 0
	for _, w := range h.streams {
		if w.reader == nil {
			waiting++
			if oldest == nil || w.leftAt.Before(oldest.leftAt) {
				oldest = w
			}
		}
	}
	if waiting > h.limits.Followers {
		h.drop(oldest)
	}
}

// expire drops followers that nobody has resumed for too long.
func (h *hub) expire() {
	if len(h.streams) == h.reading {
		return
	}
	now := h.now()
	for _, f := range h.streams {
		if f.reader == nil && now.Sub(f.leftAt) > h.limits.ResumeTimeout {
			h.drop(f)
		}
	}
}

// drop forgets a follower.
func (h *hub) drop(f *follower) {
	if f.reader != nil {
		f.reader = nil
		h.reading--
	}
	delete(h.streams, f.id)
	without := func(fs []*follower) []*follower {
		return slices.DeleteFunc(slices.Clone(fs), func(o *follower) bool { return o == f })
	}
	if f.vehicles == nil {
		h.all = without(h.all)
	}
	for v := range f.vehicles {
		if h.named[v] = without(h.named[v]); len(h.named[v]) == 0 {
			delete(h.named, v)
		}
	}
}

// streamID names a stream in its tokens. It cannot be guessed: who has it can
// take the stream over.
type streamID [16]byte

func newInstance() (id [8]byte) {
	_, _ = rand.Read(id[:])
	return id
}

// A token is the server's instance, the stream and the number of an update.
const tokenBytes = 8 + 16 + 8

func (h *hub) token(id streamID, number uint64) string {
	b := make([]byte, 0, tokenBytes)
	b = append(b, h.instance[:]...)
	b = append(b, id[:]...)
	return base64.RawURLEncoding.EncodeToString(binary.BigEndian.AppendUint64(b, number))
}

// readToken says what is wrong with a token, or nothing.
func (h *hub) readToken(token string) (id streamID, number uint64, wrong string) {
	if len(token) != base64.RawURLEncoding.EncodedLen(tokenBytes) {
		return id, 0, "is no token"
	}
	b, err := base64.RawURLEncoding.DecodeString(token)
	switch {
	case err != nil:
		return id, 0, "is no token"
	case [8]byte(b) != h.instance:
		return id, 0, "is another server's, or this one has been started again"
	}
	return streamID(b[8:24]), binary.BigEndian.Uint64(b[24:]), ""
}

// rollBack makes all updates after a number untold, and reports whether that
// many are remembered.
func (f *follower) rollBack(number uint64, now time.Time) bool {
	if number > f.count || number < f.cut {
		return false
	}
	lost := map[*slot]int64{} // the last posterior of each that was lost
	for len(f.sent) > 0 && f.sent[len(f.sent)-1].number > number {
		e := f.sent[len(f.sent)-1]
		f.sent = f.sent[:len(f.sent)-1]
		s := f.slots[e.of.vehicle]
		if s == nil {
			if s = e.slot; s.of != e.of {
				s = &slot{of: e.of}
			}
			f.slots[e.of.vehicle] = s
		}
		s.skipped += e.skipped
		if e.posterior {
			s.skipped++
		}
		if s.of != e.of { // an earlier drive's
			if s.past == nil {
				s.past = &slot{of: e.of}
			}
			if s = s.past; s.of != e.of {
				continue
			}
		}
		switch {
		case e.farewell:
			s.end, s.toldEnd = true, false
		case e.posterior:
			s.toldStatus, s.toldInside = e.status, e.inside
			if e.first {
				s.untell(e.time)
			} else {
				s.outdate(e.time)
			}
			if _, ok := lost[s]; !ok {
				lost[s] = e.time
			}
		default:
			s.withdrawn = append(slices.Clip(e.withdrawn), s.withdrawn...)
		}
	}
	for _, s := range f.slots {
		if t, ok := lost[s]; ok {
			f.retell(s, t, now)
			// That it left the area was lost, and then the drive has ended.
			if s.toldInside && s.of.end != nil && !s.toldEnd {
				s.end = true
			}
		}
		if s.stale > 0 && len(s.queue) == 0 {
			s.skipped += s.stale - 1
			s.stale = 0
			f.ask(s)
		}
		if s.asked {
			f.ask(s)
		}
		if s.tellable() {
			f.list(s)
		}
	}
	return true
}

// retell offers the latest posterior of a drive in place of those that were
// lost, the last of them at a time.
func (f *follower) retell(s *slot, last int64, now time.Time) {
	n := s.of.latest
	s.asWaiting()
	s.due = time.Time{}
	if n == nil || s.has(n.p.TimeNS) || s.waits(n.p) || s.stale > 0 || f.asking.anything() && s.of.gone {
		return
	}
	if n.p.TimeNS == last {
		s.skipped--
	}
	f.offer(n, now, true)
	if s.asked {
		f.ask(s)
	}
}
