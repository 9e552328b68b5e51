package server

import (
	"context"
	"fmt"
	"math"
	"strings"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

type followStream = grpc.ServerStreamingClient[leadlinev1.FollowResponse]

// following opens a stream, and returns what breaks it.
func following(t *testing.T, conn *grpc.ClientConn, req *leadlinev1.FollowRequest) (followStream, context.CancelFunc) {
	t.Helper()
	ctx, cancel := context.WithCancel(limited(t))
	st, err := leadlinev1.NewPositionServiceClient(conn).Follow(ctx, req)
	if err != nil {
		t.Fatal(err)
	}
	return st, cancel
}

// bring reads the next update.
func bring(t *testing.T, st followStream) *leadlinev1.FollowResponse {
	t.Helper()
	m, err := st.Recv()
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// opened opens a drive and sends the first event.
func opened(t *testing.T, conn *grpc.ClientConn, d client.Drive, first sensor.Event) *client.Feed {
	t.Helper()
	feed, err := client.Open(limited(t), conn, d)
	if err != nil {
		t.Fatal(err)
	}
	if err := feed.Send(wire.FromEvent(first)); err != nil {
		t.Fatal(err)
	}
	if err := feed.Flush(); err != nil {
		t.Fatal(err)
	}
	return feed
}

// incoming are a stream's updates, as they come in.
func incoming(st followStream) <-chan *leadlinev1.FollowResponse {
	c := make(chan *leadlinev1.FollowResponse, 10000)
	go func() {
		defer close(c)
		for {
			m, err := st.Recv()
			if err != nil {
				return
			}
			c <- m
		}
	}()
	return c
}

// undated is a message without what depends on when it was made.
func undated(p *leadlinev1.Posterior) *leadlinev1.Posterior {
	p = proto.CloneOf(p)
	p.AsOf, p.AgeS = nil, 0
	return p
}

// jumbled is a voyage whose fixes come up to a second late, so that posteriors
// are revised.
func jumbled(seed uint64, seconds int) []sensor.Event {
	evs := voyage(seed, seconds)
	for i := range evs {
		if evs[i].Sensor == "gnss" && i+1 < len(evs) {
			evs[i], evs[i+1] = evs[i+1], evs[i]
		}
	}
	return evs
}

// TestFollowIsEvery proves that a follower who keeps up is told what REPLY_EVERY
// tells the vehicle: the same messages in the same order, and then the end.
func TestFollowIsEvery(t *testing.T) {
	_, conn := serve(t, Config{})
	st, cancel := following(t, conn, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_MODES})
	defer cancel()
	news := incoming(st)
	feed, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_EVERY})
	revised := 0
	compare := func(p *leadlinev1.Posterior) {
		t.Helper()
		select {
		case m := <-news:
			if m.GetSkipped() > 0 || !proto.Equal(undated(m.GetPosterior()), undated(p)) {
				t.Fatalf("the follower is told %v, the vehicle %v", m, p)
			}
			if p.GetRevises() {
				revised++
			}
		case <-time.After(20 * time.Second):
			t.Fatal("the follower is not told")
		}
	}
	evs := jumbled(6, 30)
	for i, ev := range evs {
		if err := feed.Send(batch(uint64(i+1), ev)); err != nil {
			t.Fatal(err)
		}
		for {
			m, err := feed.Recv()
			if err != nil {
				t.Fatal(err)
			}
			if m.GetReceipt() != nil {
				break
			}
			compare(m.GetPosterior())
		}
	}
	if err := feed.Send(ending); err != nil {
		t.Fatal(err)
	}
	for {
		m, err := feed.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if c := m.GetClosed(); c != nil {
			fw := (<-news).GetFarewell()
			if !fw.GetEnded() || fw.GetPosteriorSha256() != c.GetPosteriorSha256() {
				t.Errorf("farewell %v, want the hash %s", fw, c.GetPosteriorSha256())
			}
			break
		}
		compare(m.GetPosterior())
	}
	if revised == 0 {
		t.Error("nothing was revised: the test asks little")
	}
	// A summary has none of what takes room.
	late, cancelLate := following(t, conn, &leadlinev1.FollowRequest{Vehicles: []string{"v"}})
	defer cancelLate()
	p := bring(t, late).GetPosterior()
	if p.GetRadii().GetRadius95M() == 0 || p.Modes != nil || p.Edges != nil || p.Evidence != nil || p.Regions != nil {
		t.Errorf("summary: %v", p)
	}
}

// TestSlowFollower proves that a reader who stands still holds up nobody, is
// then told the latest, and how much it missed.
func TestSlowFollower(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	st, cancel := following(t, conn, &leadlinev1.FollowRequest{})
	defer cancel()
	evs := voyage(4, 5000)
	feed := opened(t, conn, client.Drive{Header: header("v"), Batch: 500}, evs[0])
	bring(t, st)
	for _, ev := range evs[1:] {
		if err := feed.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := feed.Close(); err != nil {
		t.Fatal(err)
	}
	told, skipped := 1, 0
	for {
		m := bring(t, st)
		skipped += int(m.GetSkipped())
		if m.GetFarewell() != nil {
			break
		}
		told++
		if told+skipped == len(evs) && !m.GetPosterior().GetTime().AsTime().Equal(wire.FromTime(evs[len(evs)-1].Time).AsTime()) {
			t.Errorf("the last one told is of %v", m.GetPosterior().GetTime().AsTime())
		}
	}
	if told+skipped != len(evs) || skipped == 0 {
		t.Errorf("%d told and %d skipped of %d", told, skipped, len(evs))
	}
	t.Logf("%d told, %d skipped", told, skipped)
}

// TestFollowResumes proves over real streams that one which breaks again and
// again, with updates on their way, tells nothing twice and ends with the
// latest.
func TestFollowResumes(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	var evs []sensor.Event
	for _, ev := range voyage(9, 300) {
		if ev.Sensor == "log" { // a tally makes a posterior of each event
			evs = append(evs, ev)
		}
	}
	feed := opened(t, conn, client.Drive{Header: header("v"), Batch: 3, Window: 1}, evs[0])
	done := make(chan error, 1)
	begin := sync.OnceFunc(func() { // once the follower is there, to count all
		go func() {
			for _, ev := range evs[1:] {
				if err := feed.Send(wire.FromEvent(ev)); err != nil {
					done <- err
					return
				}
			}
			_, err := feed.Close()
			done <- err
		}()
	})
	req := &leadlinev1.FollowRequest{Vehicles: []string{"v"}}
	seen := map[time.Time]bool{}
	told, skipped, breaks := 0, 0, 0
	for over := false; !over; breaks++ {
		st, cancel := following(t, conn, req)
		for range 7 {
			m := bring(t, st)
			req.ResumeToken = m.GetResumeToken()
			skipped += int(m.GetSkipped())
			if over = m.GetFarewell() != nil; over {
				break
			}
			at := m.GetPosterior().GetTime().AsTime()
			if seen[at] {
				t.Fatalf("%v is told twice", at)
			}
			seen[at] = true
			told++
			begin()
		}
		cancel()
	}
	if err := <-done; err != nil {
		t.Fatal(err)
	}
	last := wire.FromTime(evs[len(evs)-1].Time).AsTime()
	if !seen[last] || told+skipped != len(evs) || breaks < 3 {
		t.Errorf("%d told, %d skipped of %d after %d breaks; the last one: %v", told, skipped, len(evs), breaks, seen[last])
	}
}

// asking is a tally that answers questions by its count.
type asking struct{ *tally }

func newAsking(c session.Config) (Session, error) {
	s, err := newTally(c)
	return asking{s.(*tally)}, err
}

func (s asking) Region(f float64) (*summary.Region, error) {
	return &summary.Region{Level: f, AreaM2: float64(s.count)}, nil
}

func (s asking) Inside([][]geo.LonLat) (float64, error)         { return float64(s.count%10) / 10, nil }
func (s asking) Protection(float64) (summary.Protection, error) { return summary.Protection{}, nil }

// TestManyFollowed proves that a thousand vehicles and several followers of
// every kind do not disturb one another: who follows all hears each vehicle's
// last word, and its end.
func TestManyFollowed(t *testing.T) {
	const vehicles, posteriors = 1000, 12
	_, conn := serve(t, Config{NewSession: newAsking, Limits: Limits{Vehicles: vehicles}})
	ctx := limited(t)
	var followers sync.WaitGroup
	for i, req := range []*leadlinev1.FollowRequest{
		{},
		{},
		{MinIntervalS: 0.01},
		{StatusChangesOnly: true},
		{Detail: leadlinev1.Detail_DETAIL_REGION},
		{Area: square, AreaProbability: proto.Float64(0.15)},
		{Vehicles: []string{"v7", "v70", "v700"}, Detail: leadlinev1.Detail_DETAIL_REGION, MinIntervalS: 0.05},
	} {
		st, cancel := following(t, conn, req)
		followers.Go(func() {
			defer cancel()
			want := vehicles
			if n := len(req.GetVehicles()); n > 0 {
				want = n
			}
			last := map[string]time.Time{}
			for n := 0; n < want; {
				m, err := st.Recv()
				if err != nil {
					t.Errorf("follower %d: %v after %d ends", i, err, n)
					return
				}
				if m.GetFarewell() == nil {
					p := m.GetPosterior()
					if r := req.GetDetail() == leadlinev1.Detail_DETAIL_REGION; r != (len(p.GetRegions()) == 1) {
						t.Errorf("follower %d: %d regions", i, len(p.GetRegions()))
					}
					last[m.GetVehicle()] = p.GetTime().AsTime()
					continue
				}
				n++
				if end := wire.FromTime(began + posteriors*1e9).AsTime(); !last[m.GetVehicle()].Equal(end) && !req.GetStatusChangesOnly() {
					t.Errorf("follower %d: the last of %s is of %v, want %v", i, m.GetVehicle(), last[m.GetVehicle()], end)
				}
			}
		})
	}
	// One that never reads.
	_, cancel := following(t, conn, &leadlinev1.FollowRequest{})
	defer cancel()
	var feeders sync.WaitGroup
	for w := range 20 {
		feeders.Go(func() {
			for i := w; i < vehicles; i += 20 {
				evs := make([]sensor.Event, posteriors)
				for k := range evs {
					evs[k] = sensor.Event{Time: began + sensor.Time(k+1)*1e9, Sensor: "s", Measurement: sensor.Standstill{}}
				}
				if _, err := fed(ctx, conn, client.Drive{Header: header(fmt.Sprint("v", i)), Batch: 4}, evs); err != nil {
					t.Errorf("vehicle %d: %v", i, err)
				}
			}
		})
	}
	feeders.Wait()
	followers.Wait()
}

func massOf(cells []told) (sum float64) {
	for _, c := range cells {
		sum += c.mass
	}
	return sum
}

// TestFollowMore proves that region, belief and area of an update are those of
// its posterior.
func TestFollowMore(t *testing.T) {
	_, conn := serve(t, Config{MaxCells: 10000})
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(2, 5)); err != nil {
		t.Fatal(err)
	}
	where, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), &leadlinev1.WhereRequest{Vehicles: []string{"v"}, RegionFractions: []float64{0.5, 0.95}, Area: square})
	if err != nil {
		t.Fatal(err)
	}
	want := where.GetAnswers()[0].GetPosterior()
	st, cancel := following(t, conn, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_REGION, RegionFractions: []float64{0.5, 0.95}, Area: square})
	defer cancel()
	m := bring(t, st)
	if !proto.Equal(undated(m.GetPosterior()), undated(want)) || m.GetBelief() != nil {
		t.Errorf("followed %v\nwhere says %v", m, want)
	}
	if m := bring(t, st); !m.GetFarewell().GetEnded() {
		t.Errorf("then %v", m)
	}
	st, cancelBelief := following(t, conn, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_BELIEF})
	defer cancelBelief()
	m = bring(t, st)
	var sum, lon, lat float64
	for _, c := range decode(t, m.GetBelief()) {
		sum += c.mass
		lon, lat = lon+c.mass*c.lon, lat+c.mass*c.lat
	}
	mean := m.GetPosterior().GetMean()
	if math.Abs(sum+m.GetBelief().GetRest()-1) > quantum-1 || math.Abs(lon/sum-mean.GetLon()) > 1e-6 || math.Abs(lat/sum-mean.GetLat()) > 1e-6 {
		t.Errorf("the belief's sum is %v, its mean %v, %v; want 1, %v", sum, lon/sum, lat/sum, mean)
	}
	// The same packed, of few cells; and too many, or without a belief.
	st, cancelPacked := following(t, conn, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_BELIEF, BeliefCells: 16})
	defer cancelPacked()
	few := bring(t, st).GetBelief()
	if g := few.GetGrid(); g.GetColumns()*g.GetRows() > 16 || len(g.GetRuns()) == 0 || math.Abs(1-few.GetRest()-massOf(decode(t, unpack(few, geo.Frame{})))) > quantum-1 {
		t.Errorf("of 16 cells there are %v", few)
	}
	for cells, detail := range map[uint32]leadlinev1.Detail{maxBeliefCells + 1: leadlinev1.Detail_DETAIL_BELIEF, 100: leadlinev1.Detail_DETAIL_MODES} {
		st, cancelBad := following(t, conn, &leadlinev1.FollowRequest{Detail: detail, BeliefCells: cells})
		if _, err := st.Recv(); status.Code(err) != codes.InvalidArgument || !strings.Contains(err.Error(), "belief_cells") {
			t.Errorf("%d cells, detail %v: %v", cells, detail, err)
		}
		cancelBad()
	}
	// Far away.
	away := proto.CloneOf(square)
	for _, p := range away.GetRings()[0].GetPoints() {
		p.Lon = proto.Float64(p.GetLon() + 100)
	}
	st, cancelAway := following(t, conn, &leadlinev1.FollowRequest{Area: away})
	defer cancelAway()
	news := incoming(st)
	select {
	case m := <-news:
		t.Errorf("a follower of another sea is told %v", m)
	case <-time.After(100 * time.Millisecond):
	}
}

// TestFollowEnds proves that followers learn why a drive is over, that one who
// waits for a vehicle hears of it when it comes, and that all are sent away
// when the server stops.
func TestFollowEnds(t *testing.T) {
	s, conn := serve(t, Config{NewSession: func(c session.Config) (Session, error) {
		sess, err := newTally(c)
		return &blocking{Session: sess}, err
	}})
	st, cancel := following(t, conn, &leadlinev1.FollowRequest{Vehicles: []string{"a", "b", "c"}})
	defer cancel()
	evs := voyage(1, 3)
	one, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("a"), Drive: "one"})
	if err := one.Send(batch(1, evs[0])); err != nil {
		t.Fatal(err)
	}
	if m := bring(t, st); m.GetVehicle() != "a" || m.GetDrive() != "one" || m.GetPosterior() == nil {
		t.Errorf("told %v, want a's first posterior", m)
	}
	if _, err := client.Open(limited(t), conn, client.Drive{Header: header("a"), Name: "two", Replace: true}); err != nil {
		t.Fatal(err)
	}
	if m := bring(t, st); m.GetFarewell().GetEnded() || m.GetDrive() != "one" || m.GetFarewell().GetReason() == "" {
		t.Errorf("told %v, want that drive one was replaced", m)
	}
	broken, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("b"), Drive: "d"})
	kaputt := evs[0]
	kaputt.Sensor = "break"
	if err := broken.Send(batch(1, kaputt)); err != nil {
		t.Fatal(err)
	}
	if m := bring(t, st); m.GetVehicle() != "b" || m.GetFarewell().GetEnded() || m.GetFarewell().GetReason() == "" {
		t.Errorf("told %v, want that b has failed", m)
	}
	stopped := make(chan error, 1)
	go func() { stopped <- s.Shutdown(limited(t)) }()
	for {
		if _, err := st.Recv(); err != nil {
			if status.Code(err) != codes.Unavailable {
				t.Errorf("at the end: %v, want UNAVAILABLE", err)
			}
			break
		}
	}
	if err := <-stopped; err != nil {
		t.Error(err)
	}
}

// TestBadFollow proves that each way to ask wrongly has its own answer.
func TestBadFollow(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally, Limits: Limits{Vehicles: 2, Regions: 1}})
	round := func(n int) *leadlinev1.Polygon {
		p := &leadlinev1.Polygon{Rings: []*leadlinev1.Ring{{}}}
		for i := range n {
			a := 2 * math.Pi * float64(i) / float64(n)
			p.Rings[0].Points = append(p.Rings[0].Points, &leadlinev1.Position{Lon: proto.Float64(math.Cos(a)), Lat: proto.Float64(math.Sin(a))})
		}
		return p
	}
	wide := proto.CloneOf(square)
	wide.Rings[0].Points[0].Lon = proto.Float64(-60)
	for _, c := range []struct {
		what  string
		req   *leadlinev1.FollowRequest
		words string
	}{
		{"too many vehicles", &leadlinev1.FollowRequest{Vehicles: []string{"a", "b", "c"}}, "3 vehicles: at most 2"},
		{"no name", &leadlinev1.FollowRequest{Vehicles: []string{""}}, "has no name"},
		{"negative interval", &leadlinev1.FollowRequest{MinIntervalS: -1}, "min_interval_s -1"},
		{"no interval", &leadlinev1.FollowRequest{MinIntervalS: math.NaN()}, "min_interval_s NaN"},
		{"long interval", &leadlinev1.FollowRequest{MinIntervalS: 3600.1}, "from 0 to 3600"},
		{"no detail", &leadlinev1.FollowRequest{Detail: 99}, "detail 99"},
		{"fractions without regions", &leadlinev1.FollowRequest{RegionFractions: []float64{0.5}}, "without DETAIL_REGION"},
		{"too many fractions", &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_REGION, RegionFractions: []float64{0.5, 0.6}}, "2 region_fractions"},
		{"no fraction", &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_REGION, RegionFractions: []float64{1}}, "region_fractions: 1"},
		{"no area", &leadlinev1.FollowRequest{Area: &leadlinev1.Polygon{}}, "area: no ring"},
		{"many corners", &leadlinev1.FollowRequest{Area: round(1001)}, "more than 1000 points"},
		{"a wide area", &leadlinev1.FollowRequest{Area: wide}, "2000 km across"},
		{"a probability of nothing", &leadlinev1.FollowRequest{AreaProbability: proto.Float64(0.5)}, "without an area"},
		{"no probability", &leadlinev1.FollowRequest{Area: square, AreaProbability: proto.Float64(0)}, "area_probability 0"},
		{"a bad token", &leadlinev1.FollowRequest{ResumeToken: "x"}, "is no token"},
	} {
		st, cancel := following(t, conn, c.req)
		_, err := st.Recv()
		wantStatus(t, c.what, err, codes.InvalidArgument, c.words)
		cancel()
	}
	// A session that answers no questions.
	st, cancel := following(t, conn, &leadlinev1.FollowRequest{Detail: leadlinev1.Detail_DETAIL_BELIEF})
	defer cancel()
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(1, 3)); err != nil {
		t.Fatal(err)
	}
	_, err := st.Recv()
	wantStatus(t, "a belief of a tally", err, codes.Unimplemented, "tells no beliefs")
}
