package server

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"

	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// script is what happens to one vehicle at one second: a status that is said,
// and, by the clock, whether the reader reads.
type script struct {
	at     int // seconds: of the posterior, and by the clock
	status summary.Status
	inside float64
	read   bool
}

// play runs a script and returns the seconds that were told, each with what was
// skipped before it as +n.
func play(t *testing.T, req *leadlinev1.FollowRequest, scripts []script) string {
	t.Helper()
	fl := newFleet(Limits{})
	sub := fl.open("a")
	r := fl.read(t, req)
	start := fl.clock
	for _, s := range scripts {
		fl.clock = start.Add(time.Duration(s.at) * time.Second)
		fl.inside = s.inside
		if s.status != 0 {
			fl.say(sub, s.status, s.at)
		}
		if s.read {
			r.all()
		}
	}
	var out []string
	for _, u := range r.updates {
		text := fmt.Sprint((u.posterior.p.TimeNS - int64(began)) / 1e9)
		if u.skipped > 0 {
			text += fmt.Sprintf("+%d", u.skipped)
		}
		out = append(out, text)
	}
	return strings.Join(out, " ")
}

var square = &leadlinev1.Polygon{Rings: []*leadlinev1.Ring{{Points: []*leadlinev1.Position{
	{Lon: proto.Float64(4.9), Lat: proto.Float64(52.9)}, {Lon: proto.Float64(5.1), Lat: proto.Float64(52.9)}, {Lon: proto.Float64(5.1), Lat: proto.Float64(53.1)},
}}}}

// TestFilters proves what interval, changes of status, area and detail let
// through, for readers fast and slow.
func TestFilters(t *testing.T) {
	const lost, here = summary.Unsure, summary.Located
	interval := &leadlinev1.FollowRequest{MinIntervalS: 3}
	changes := &leadlinev1.FollowRequest{StatusChangesOnly: true}
	regions := &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_REGION}
	within := &leadlinev1.FollowRequest{Area: square, AreaProbability: proto.Float64(0.5)}
	both := &leadlinev1.FollowRequest{Area: square, AreaProbability: proto.Float64(0.5), StatusChangesOnly: true}
	slowRegions := &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_REGION, MinIntervalS: 3}
	for _, c := range []struct {
		what    string
		req     *leadlinev1.FollowRequest
		scripts []script
		want    string
	}{
		{"everything", &leadlinev1.FollowRequest{}, []script{{0, lost, 0, true}, {1, lost, 0, false}, {2, here, 0, true}}, "0 1 2"},
		{"an interval", interval, []script{{0, lost, 0, true}, {1, lost, 0, true}, {2, lost, 0, true}, {3, lost, 0, true}, {4, lost, 0, true}, {6, 0, 0, true}}, "0 3 4"},
		{"an interval passes", interval, []script{{0, lost, 0, true}, {1, lost, 0, true}, {2, 0, 0, true}, {3, 0, 0, true}}, "0 1"},
		{"a change within an interval", interval, []script{{0, lost, 0, true}, {1, here, 0, true}, {2, here, 0, true}, {4, here, 0, true}, {5, lost, 0, true}}, "0 1 4 5"},
		{"a slow reader with an interval", interval, []script{{0, lost, 0, false}, {1, lost, 0, false}, {4, lost, 0, false}, {9, lost, 0, true}}, "9+2"},
		{"changes", changes, []script{{0, lost, 0, true}, {1, lost, 0, true}, {2, here, 0, true}, {3, here, 0, true}, {4, lost, 0, true}}, "0 2 4"},
		{"changes, slowly read", changes, []script{{0, lost, 0, true}, {1, here, 0, false}, {2, lost, 0, false}, {3, lost, 0, true}}, "0 1 2"},
		{"regions", regions, []script{{0, lost, 0, true}, {1, lost, 0, true}, {2, here, 0, true}}, "0 1 2"},
		{"regions, slowly read", regions, []script{{0, lost, 0, true}, {1, lost, 0, false}, {2, lost, 0, false}, {3, lost, 0, true}, {4, lost, 0, true}}, "0 3+2 4"},
		{"regions with an interval", slowRegions, []script{{0, lost, 0, true}, {1, lost, 0, true}, {2, lost, 0, true}, {3, 0, 0, true}, {4, here, 0, true}}, "0 2 4"},
		{"an area", within, []script{{0, lost, 0.4, true}, {1, lost, 0.5, true}, {2, lost, 0.9, true}, {3, lost, 0.49, true}, {4, lost, 0.1, true}, {5, lost, 1, true}}, "1 2 3 5"},
		{"changes in an area", both, []script{{0, lost, 0.6, true}, {1, lost, 0.7, true}, {2, here, 0.8, true}, {3, here, 0, true}, {4, lost, 0, true}, {5, lost, 0.5, true}, {6, lost, 0.6, true}}, "0 2 3 5"},
	} {
		if got := play(t, c.req, c.scripts); got != c.want {
			t.Errorf("%s: told %s, want %s", c.what, got, c.want)
		}
	}
}

// TestAskedOnce proves that the owner adds to a posterior once for every reader
// that listens, and not at all for one who has not read the last, or has left.
func TestAskedOnce(t *testing.T) {
	fl := newFleet(Limits{})
	sub := fl.open("a")
	r := fl.read(t, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_REGION})
	for i := range 10 {
		fl.say(sub, summary.Unsure, i)
	}
	if fl.answered != 1 {
		t.Errorf("a reader who does not read was answered for %d times, want once", fl.answered)
	}
	us := r.all()
	if len(us) != 1 || us[0].skipped != 9 || us[0].posterior.extra.regions[0].GetAreaM2() != float64(int64(began)+9e9) || fl.answered != 2 {
		t.Errorf("told %+v after %d answers, want the last with its own region", us, fl.answered)
	}
	fl.leave(r.f, r.taken)
	for i := 10; i < 20; i++ {
		fl.say(sub, summary.Unsure, i)
	}
	if fl.answered != 2 {
		t.Errorf("a reader who has left was answered for")
	}
	r.again()
	if us := r.all(); len(us) != 1 || us[0].skipped != 9 || us[0].posterior.p.TimeNS != int64(began)+19e9 || fl.answered != 3 {
		t.Errorf("resumed: told %+v, want the last, 9 skipped", us)
	}
}

// TestEnds proves that the last posterior and the end reach every follower in
// this order, whatever it left out before.
func TestEnds(t *testing.T) {
	for _, req := range []*leadlinev1.FollowRequest{
		{}, {MinIntervalS: 100}, {Detail: leadlinev1.Detail_DETAIL_REGION, MinIntervalS: 100}, {Area: square}, {Vehicles: []string{"a", "b"}},
	} {
		for _, reads := range []bool{false, true} {
			fl := newFleet(Limits{})
			fl.inside = 1
			sub := fl.open("a")
			r := fl.read(t, req)
			fl.say(sub, summary.Unsure, 0)
			if reads {
				r.all()
			}
			fl.say(sub, summary.Unsure, 1)
			fl.farewell(sub, &leadlinev1.Farewell{Ended: true, PosteriorSha256: "abc"}, fl)
			us := r.all()
			n := len(us)
			if n < 2 || us[n-1].farewell.GetPosteriorSha256() != "abc" || us[n-2].posterior == nil || us[n-2].posterior.p.TimeNS != int64(began)+1e9 {
				t.Errorf("%v, reads %v: told %+v, want the last posterior and the end", req, reads, us)
			}
			// Who comes later hears of both.
			late := fl.read(t, req)
			us = late.all()
			if len(us) != 2 || us[0].posterior == nil || us[0].posterior.p.TimeNS != int64(began)+1e9 || us[1].farewell == nil {
				t.Errorf("%v: a late follower is told %+v", req, us)
			}
			// A dropped drive is told once more only if it had not ended.
			fl.forget(sub)
			if us := r.all(); len(us) > 0 {
				t.Errorf("%v: dropped after the end: told %+v", req, us)
			}
			if len(r.f.slots) > 0 {
				t.Errorf("%v: a slot is left of a vehicle that is gone", req)
			}
		}
	}
	// One that drops unfinished says why; one that is replaced comes before the
	// next.
	fl := newFleet(Limits{})
	r := fl.read(t, &leadlinev1.FollowRequest{})
	one := fl.open("a")
	fl.say(one, summary.Unsure, 0)
	two := fl.open("a")
	fl.say(one, summary.Unsure, 1) // too late
	fl.say(two, summary.Unsure, 0)
	us := r.all()
	if len(us) != 2 || us[0].of != one || us[0].farewell.GetEnded() || !strings.Contains(us[0].farewell.GetReason(), "another drive") || us[1].of != two || us[1].skipped != 1 {
		t.Errorf("replaced: told %+v", us)
	}
	fl.forget(two)
	if us := r.all(); len(us) != 1 || us[0].farewell.GetEnded() || !strings.Contains(us[0].farewell.GetReason(), "dropped") {
		t.Errorf("dropped: told %+v", us)
	}
}

// TestTokens proves that a token is good for its own stream, at this server,
// for a while.
func TestTokens(t *testing.T) {
	const vehicles = 3
	fl := newFleet(Limits{Followers: 2, ResumeTimeout: time.Minute})
	sub := fl.open("a")
	fl.say(sub, summary.Unsure, 0)
	req := &leadlinev1.FollowRequest{Vehicles: []string{"a"}}
	r := fl.read(t, req)
	r.all()
	token := fl.token(r.f.id, r.number)
	resume := func(change func(r *leadlinev1.FollowRequest)) error {
		again := proto.CloneOf(req)
		again.ResumeToken = token
		change(again)
		_, _, err := fl.follow(again)
		return err
	}
	other := newFleet(Limits{})
	for _, c := range []struct {
		what, words string
		change      func(r *leadlinev1.FollowRequest)
	}{
		{"no token", "is no token", func(r *leadlinev1.FollowRequest) { r.ResumeToken = "hello" }},
		{"no base64", "is no token", func(r *leadlinev1.FollowRequest) { r.ResumeToken = strings.Repeat("*", len(token)) }},
		{"of another server", "another server's", func(q *leadlinev1.FollowRequest) { q.ResumeToken = other.token(r.f.id, r.number) }},
		{"of no stream", "ended too long ago", func(q *leadlinev1.FollowRequest) { q.ResumeToken = fl.token(streamID{1}, r.number) }},
		{"with another request", "followed otherwise", func(r *leadlinev1.FollowRequest) { r.MinIntervalS = 1 }},
	} {
		wantStatus(t, c.what, resume(c.change), codes.InvalidArgument, c.words)
	}
	// The stream that was is taken over.
	if err := resume(func(*leadlinev1.FollowRequest) {}); err != nil {
		t.Error(err)
	}
	select {
	case <-r.taken:
	default:
		t.Error("the stream that was is not told that another has taken over")
	}
	fl.leave(r.f, r.taken) // of no effect
	if r.f.reader == nil {
		t.Error("the stream that was has taken the reader with it")
	}
	// A future update is no update.
	wantStatus(t, "of an update to come", resume(func(q *leadlinev1.FollowRequest) { q.ResumeToken = fl.token(r.f.id, r.number+1) }), codes.InvalidArgument, "too old")
	// Too late; too many.
	readers := make([]*reader, vehicles)
	for i := range readers {
		readers[i] = fl.read(t, req)
		readers[i].all()
		fl.leave(readers[i].f, readers[i].taken)
		fl.clock = fl.clock.Add(time.Second)
	}
	if len(fl.streams) != 2 {
		t.Errorf("%d streams can be resumed, want 2", len(fl.streams))
	}
	token = fl.token(readers[0].f.id, 1)
	wantStatus(t, "the first of three", resume(func(*leadlinev1.FollowRequest) {}), codes.InvalidArgument, "ended too long ago")
	fl.clock = fl.clock.Add(time.Minute - time.Second)
	token = fl.token(readers[2].f.id, 1)
	if err := resume(func(*leadlinev1.FollowRequest) {}); err != nil {
		t.Errorf("the last of three: %v", err)
	}
	token = fl.token(readers[1].f.id, 1)
	wantStatus(t, "after a minute", resume(func(*leadlinev1.FollowRequest) {}), codes.InvalidArgument, "ended too long ago")
	fl.read(t, req)
	_, _, err := fl.follow(req)
	wantStatus(t, "a third follower", err, codes.ResourceExhausted, "its 2 followers")
}

// TestOldToken proves that a token from before what is remembered is refused,
// and one within it is not.
func TestOldToken(t *testing.T) {
	fl := newFleet(Limits{})
	sub := fl.open("a")
	r := fl.read(t, &leadlinev1.FollowRequest{})
	for i := range sentMost + 10 {
		fl.say(sub, summary.Unsure, i)
		r.all()
	}
	r.number = 10
	clear(r.times)
	r.again()
	us := r.all()
	if len(us) != 1 || us[0].skipped != sentMost-1 {
		t.Errorf("resumed %d updates ago: told %+v, want the last, %d skipped", sentMost, us, sentMost-1)
	}
	token := fl.token(r.f.id, 9)
	_, _, err := fl.follow(&leadlinev1.FollowRequest{ResumeToken: token})
	wantStatus(t, "too old a token", err, codes.InvalidArgument, "too old")
}

// TestTooSlow proves that what waits for a follower is bounded.
func TestTooSlow(t *testing.T) {
	fl := newFleet(Limits{Vehicles: 5})
	r := fl.read(t, &leadlinev1.FollowRequest{})
	for i := range 11 {
		sub := fl.open(fmt.Sprint("v", i))
		fl.say(sub, summary.Unsure, 0)
		fl.forget(sub)
	}
	_, _, err := fl.take(r.f, r.taken)
	wantStatus(t, "more vehicles come and go than are read", err, codes.ResourceExhausted, "so much waits")
	fl.leave(r.f, r.taken)
	if len(fl.streams)+len(fl.all)+fl.reading != 0 {
		t.Error("a stream that was given up is kept")
	}
}
