package server

import (
	"fmt"
	"io"
	"math"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/client"
	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

type rawStream = grpc.BidiStreamingClient[leadlinev1.FeedRequest, leadlinev1.FeedResponse]

// raw opens a stream and says nothing.
func raw(t *testing.T, conn *grpc.ClientConn) rawStream {
	t.Helper()
	st, err := leadlinev1.NewPositionServiceClient(conn).Feed(limited(t))
	if err != nil {
		t.Fatal(err)
	}
	return st
}

// openRaw opens a drive by hand.
func openRaw(t *testing.T, conn *grpc.ClientConn, o *leadlinev1.Open) (rawStream, *leadlinev1.Opened) {
	t.Helper()
	st := raw(t, conn)
	if err := st.Send(opening(o)); err != nil {
		t.Fatal(err)
	}
	m, err := st.Recv()
	if err != nil {
		t.Fatal(err)
	}
	return st, m.GetOpened()
}

func opening(o *leadlinev1.Open) *leadlinev1.FeedRequest {
	return &leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Open{Open: o}}
}

func batch(seq uint64, evs ...sensor.Event) *leadlinev1.FeedRequest {
	b := &leadlinev1.Batch{Sequence: seq}
	for _, ev := range evs {
		b.Measurements = append(b.Measurements, wire.FromEvent(ev))
	}
	return &leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_Batch{Batch: b}}
}

var ending = &leadlinev1.FeedRequest{Message: &leadlinev1.FeedRequest_End{End: &leadlinev1.End{}}}

// ends reads a stream to its end.
func ends(st rawStream) error {
	for {
		if _, err := st.Recv(); err != nil {
			return err
		}
	}
}

// wantStatus checks an error's code and that its message is one line that says
// what is wanted.
func wantStatus(t *testing.T, what string, err error, code codes.Code, words string) {
	t.Helper()
	msg := status.Convert(err).Message()
	if status.Code(err) != code || !strings.Contains(msg, words) || strings.Contains(msg, "\n") {
		t.Errorf("%s:\n got %v\nwant %v with %q", what, err, code, words)
	}
}

// TestBadOpen proves that each way to open wrongly has its own answer.
func TestBadOpen(t *testing.T) {
	_, conn := serve(t, Config{Suites: map[string]*sensor.Suite{"boat": {}}})
	long := strings.Repeat("x", wire.MaxName+1)
	with := func(change func(o *leadlinev1.Open)) *leadlinev1.Open {
		o := &leadlinev1.Open{Header: header("v"), Drive: "d"}
		change(o)
		return o
	}
	point := func(lon, lat, sigma float64) *leadlinev1.Start {
		return &leadlinev1.Start{Place: &leadlinev1.Start_Point{Point: &leadlinev1.StartPoint{Lon: &lon, Lat: &lat, SigmaM: sigma}}}
	}
	for _, c := range []struct {
		what  string
		open  *leadlinev1.Open
		code  codes.Code
		words string
	}{
		{"nothing", &leadlinev1.Open{}, codes.InvalidArgument, "vehicle is missing"},
		{"no drive", with(func(o *leadlinev1.Open) { o.Drive = "" }), codes.InvalidArgument, "drive is missing"},
		{"long drive", with(func(o *leadlinev1.Open) { o.Drive = long }), codes.InvalidArgument, "drive is 257 bytes long"},
		{"long vehicle", with(func(o *leadlinev1.Open) { o.Header.Vehicle = long }), codes.InvalidArgument, "vehicle is 257 bytes long"},
		{"no map", with(func(o *leadlinev1.Open) { o.Header.Map = "" }), codes.NotFound, `no map "" here: known are "sea"`},
		{"unknown map", with(func(o *leadlinev1.Open) { o.Header.Map = "moon" }), codes.NotFound, `no map "moon" here: known are "sea"`},
		{"unknown suite", with(func(o *leadlinev1.Open) { o.Header.Suite = "tank" }), codes.NotFound, `no suite "tank" here: known are "boat"`},
		{"start without sigma", with(func(o *leadlinev1.Open) { o.Header.Start = point(5, 53, 0) }), codes.InvalidArgument, "start: point: sigma_m is 0"},
		{"start with endless sigma", with(func(o *leadlinev1.Open) { o.Header.Start = point(5, 53, math.Inf(1)) }), codes.InvalidArgument, "start: point: sigma_m is +Inf"},
		{"start nowhere", with(func(o *leadlinev1.Open) { o.Header.Start = point(math.NaN(), 53, 5) }), codes.InvalidArgument, "is not on the globe"},
		{"start with lon and lat swapped", with(func(o *leadlinev1.Open) { o.Header.Start = point(53, 153, 5) }), codes.InvalidArgument, "are they swapped"},
		{"start off the map", with(func(o *leadlinev1.Open) { o.Header.Start = point(-70, 10, 5) }), codes.InvalidArgument, "does not touch the map"},
	} {
		st := raw(t, conn)
		if err := st.Send(opening(c.open)); err != nil {
			t.Fatal(err)
		}
		_, err := st.Recv()
		wantStatus(t, c.what, err, c.code, c.words)
	}
}

// TestWrongOrder proves that a stream that does not keep to the order is told
// so, and that the drive is none the worse.
func TestWrongOrder(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally, Limits: Limits{BatchMeasurements: 8, OpenTimeout: 200 * time.Millisecond}})
	evs := voyage(5, 20)
	for i, c := range []struct {
		what  string
		send  []*leadlinev1.FeedRequest
		open  bool
		code  codes.Code
		words string
	}{
		{"batch first", []*leadlinev1.FeedRequest{batch(1)}, false, codes.InvalidArgument, "send open first"},
		{"end first", []*leadlinev1.FeedRequest{ending}, false, codes.InvalidArgument, "send open first"},
		{"an empty message first", []*leadlinev1.FeedRequest{{}}, false, codes.InvalidArgument, "send open first"},
		{"silence", nil, false, codes.DeadlineExceeded, "send open first"},
		{"a second open", []*leadlinev1.FeedRequest{opening(&leadlinev1.Open{Header: header("v"), Drive: "d"})}, true, codes.InvalidArgument, "a second open"},
		{"an empty message", []*leadlinev1.FeedRequest{batch(1), {}}, true, codes.InvalidArgument, "an empty message"},
		{"no sequence", []*leadlinev1.FeedRequest{batch(0)}, true, codes.InvalidArgument, "sequence is missing"},
		{"a gap", []*leadlinev1.FeedRequest{batch(1), batch(3)}, true, codes.FailedPrecondition, "batch 3 came after batch 1: send 2 next"},
		{"too many", []*leadlinev1.FeedRequest{batch(1, evs[:9]...)}, true, codes.InvalidArgument, "batch 1 holds 9 measurements: at most 8"},
	} {
		st := raw(t, conn)
		if c.open {
			st, _ = openRaw(t, conn, &leadlinev1.Open{Header: header(fmt.Sprint("v", i)), Drive: "d"})
		}
		for _, m := range c.send {
			if err := st.Send(m); err != nil && err != io.EOF {
				t.Fatal(err)
			}
		}
		wantStatus(t, c.what, ends(st), c.code, c.words)
	}
	// After the end only the end can be had again.
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if err := st.Send(ending); err != nil {
		t.Fatal(err)
	}
	if err := ends(st); err != io.EOF {
		t.Errorf("after the end: %v", err)
	}
	st, _ = openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if err := st.Send(batch(1, evs[0])); err != nil {
		t.Fatal(err)
	}
	wantStatus(t, "batch after the end", ends(st), codes.FailedPrecondition, "came after the end")
	// A duplicate is acknowledged and does not count.
	st, _ = openRaw(t, conn, &leadlinev1.Open{Header: header("w"), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	for _, m := range []*leadlinev1.FeedRequest{batch(1, evs[:3]...), batch(1, evs[3:6]...), batch(2, evs[:3]...)} {
		if err := st.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	for _, want := range []uint64{1, 1, 2} {
		m, err := st.Recv()
		if err != nil || m.GetReceipt().GetSequence() != want {
			t.Fatalf("got %v, %v; want a receipt up to %d", m, err, want)
		}
	}
	// Closing without an end leaves the drive open.
	if err := st.CloseSend(); err != nil {
		t.Fatal(err)
	}
	if err := ends(st); err != io.EOF {
		t.Errorf("a stream without an end ended with %v", err)
	}
	if _, o := openRaw(t, conn, &leadlinev1.Open{Header: header("w"), Drive: "d"}); o.GetSequence() != 2 {
		t.Errorf("opened again at %d, want 2", o.GetSequence())
	}
}

// TestRefusals proves that a measurement that cannot be used is refused with a
// reason, alone: its neighbours are used.
func TestRefusals(t *testing.T) {
	_, conn := serve(t, Config{})
	good := voyage(6, 10)
	at := timestamppb.New(time.Unix(0, int64(began+2e9)))
	z := func(m *leadlinev1.Measurement) *leadlinev1.SensorMeasurement {
		return &leadlinev1.SensorMeasurement{Time: at, Number: 77, Measurement: m}
	}
	fix := func(lon, lat, sigma float64) *leadlinev1.SensorMeasurement {
		return z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Fix{Fix: &leadlinev1.Fix{Lon: &lon, Lat: &lat, SigmaM: sigma}}})
	}
	heading := func(deg, sigma float64) *leadlinev1.SensorMeasurement {
		return z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Heading{Heading: &leadlinev1.Heading{Deg: deg, SigmaDeg: sigma}}})
	}
	late := wire.FromEvent(good[0])
	late.Time = timestamppb.New(time.Unix(0, int64(began-3600e9)))
	late.Measurement = fix(5, 53, 1).Measurement
	early := fix(5, 53, 1)
	early.Time = timestamppb.New(time.Unix(0, int64(began+1e15)))
	other := wire.FromEvent(good[len(good)-1])
	other.Measurement = fix(5, 53, 1).Measurement
	long := fix(5, 53, 1)
	long.Sensor = strings.Repeat("é", 4000)
	bad := []struct {
		m      *leadlinev1.SensorMeasurement
		reason leadlinev1.RefusalReason
		words  string
	}{
		{&leadlinev1.SensorMeasurement{}, leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "time: missing"},
		{z(nil), leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "no kind"},
		{fix(math.NaN(), 53, 1), leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "not on the globe"},
		{fix(5, 53, -1), leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "sigma_m is -1"},
		{heading(math.Inf(1), 1), leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "deg is +Inf"},
		{heading(5, math.NaN()), leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "sigma_deg is NaN"},
		{z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Range{Range: &leadlinev1.Range{
			Beacon: &leadlinev1.Beacon{Place: &leadlinev1.Beacon_Id{Id: "nobody"}}, RangeM: 5, SigmaM: 1,
		}}}), leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "nobody"},
		{z(&leadlinev1.Measurement{Kind: &leadlinev1.Measurement_Sighting{Sighting: &leadlinev1.Sighting{
			Place: &leadlinev1.Sighting_Road{Road: "High Street"}, Mistaken: 0.1,
		}}}), leadlinev1.RefusalReason_REFUSAL_REASON_WRONG_SPACE, "road"},
		{late, leadlinev1.RefusalReason_REFUSAL_REASON_TOO_LATE, "late_window_s"},
		{early, leadlinev1.RefusalReason_REFUSAL_REASON_TOO_EARLY, "clock"},
		{other, leadlinev1.RefusalReason_REFUSAL_REASON_CONFLICTING, "number"},
		{long, leadlinev1.RefusalReason_REFUSAL_REASON_UNUSABLE, "sensor is 8000 bytes long"},
	}
	first := batch(1, good...)
	second := &leadlinev1.Batch{Sequence: 2}
	for _, b := range bad {
		second.Measurements = append(second.Measurements, b.m)
	}
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	for _, m := range []*leadlinev1.FeedRequest{first, {Message: &leadlinev1.FeedRequest_Batch{Batch: second}}, ending} {
		if err := st.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	m, err := st.Recv()
	if err != nil || m.GetReceipt().GetAccepted() != uint32(len(good)) {
		t.Fatalf("the good ones: %v, %v", m, err)
	}
	if m, err = st.Recv(); err != nil || m.GetReceipt().GetAccepted() != 0 || len(m.GetReceipt().GetRefusals()) != len(bad) {
		t.Fatalf("the bad ones: %v, %v; want %d refusals", m, err, len(bad))
	}
	for i, r := range m.GetReceipt().GetRefusals() {
		if r.GetReason() != bad[i].reason || !strings.Contains(r.GetDetail(), bad[i].words) || r.GetIndex() != uint32(i) || len(r.GetSensor()) > 1100 {
			t.Errorf("measurement %d: %v; want %v with %q", i, r, bad[i].reason, bad[i].words)
		}
	}
	want, _, _ := replayed(t, good)
	if m, err = st.Recv(); err != nil || m.GetClosed().GetRefused() != uint64(len(bad)) || m.GetClosed().GetPosteriorSha256() != want {
		t.Errorf("closed: %v, %v; want %d refused, hash %s as without them", m, err, len(bad), want)
	}
}

// TestEveryReasonHasAWord proves that no reason of a session is lost.
func TestEveryReasonHasAWord(t *testing.T) {
	for _, r := range []session.Reason{
		session.Unusable, session.TooLate, session.TooEarly, session.Conflicting,
		session.WrongSpace, session.Impossible, session.Overfull,
	} {
		if reasons[r] == leadlinev1.RefusalReason_REFUSAL_REASON_UNSPECIFIED {
			t.Errorf("no word for %q", r)
		}
	}
	for s := summary.Contradicted; s <= summary.Unsure; s++ {
		if statuses[s] == leadlinev1.Status_STATUS_UNSPECIFIED {
			t.Errorf("no word for %v", s)
		}
	}
}

// TestTakeover proves that a half-open stream does not keep its vehicle: the
// next one takes over, and what the first one sends later has no effect.
func TestTakeover(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	evs := voyage(7, 20)
	want := tallied(evs)
	old, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if err := old.Send(batch(1, evs[:5]...)); err != nil {
		t.Fatal(err)
	}
	for {
		m, err := old.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if m.GetReceipt() != nil {
			break
		}
	}
	st, o := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d"})
	if o.GetSequence() != 1 {
		t.Errorf("opened at %d, want 1", o.GetSequence())
	}
	_ = old.Send(batch(2, evs[10:]...))
	wantStatus(t, "the old stream", ends(old), codes.Aborted, "another stream")
	for _, m := range []*leadlinev1.FeedRequest{batch(2, evs[5:]...), ending} {
		if err := st.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	for {
		m, err := st.Recv()
		if err != nil {
			t.Fatal(err)
		}
		if c := m.GetClosed(); c != nil {
			if c.GetPosteriorSha256() != want {
				t.Errorf("hash %s, want %s", c.GetPosteriorSha256(), want)
			}
			break
		}
	}
}

// TestOtherDrive proves that an unfinished drive is not thrown away by
// accident, and is when asked.
func TestOtherDrive(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTally})
	first, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "one"})
	_, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Name: "two"})
	wantStatus(t, "another drive", err, codes.AlreadyExists, `unfinished drive "one"`)
	h := header("v")
	h.Start = nil
	_, err = client.Open(limited(t), conn, client.Drive{Header: h, Name: "one"})
	wantStatus(t, "another header", err, codes.FailedPrecondition, "another header")
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Name: "two", Replace: true})
	if err != nil {
		t.Fatal(err)
	}
	wantStatus(t, "the first stream", ends(first), codes.Aborted, "in place of this one")
	if _, err := f.Close(); err != nil {
		t.Fatal(err)
	}
	// An ended one makes way unasked.
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v"), Name: "three"}, nil); err != nil {
		t.Error(err)
	}
}

// TestLimits proves that every bound has its answer, and that an idle vehicle
// makes room.
func TestLimits(t *testing.T) {
	var clock atomic.Int64
	clock.Store(int64(began))
	_, conn := serve(t, Config{
		NewSession: newTally,
		Limits:     Limits{Vehicles: 2, Streams: 3, MessageBytes: 4096, IdleTimeout: time.Minute},
		Now:        func() time.Time { return time.Unix(0, clock.Load()) },
	})
	a, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("a"), Drive: "d"})
	b, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("b"), Drive: "d"})
	_, err := client.Open(limited(t), conn, client.Drive{Header: header("c")})
	wantStatus(t, "a third vehicle", err, codes.ResourceExhausted, "its 2 vehicles")

	big := voyage(8, 200)
	if err := b.Send(batch(1, big...)); err != nil && err != io.EOF {
		t.Fatal(err)
	}
	wantStatus(t, "a message too large", ends(b), codes.ResourceExhausted, "larger than max (")

	clock.Add(int64(59 * time.Second))
	_, err = client.Open(limited(t), conn, client.Drive{Header: header("c")})
	wantStatus(t, "a vehicle not idle for long", err, codes.ResourceExhausted, "its 2 vehicles")
	clock.Add(int64(2 * time.Second))
	f, err := client.Open(limited(t), conn, client.Drive{Header: header("c")})
	if err != nil {
		t.Fatalf("no room after a minute: %v", err)
	}
	_, err = leadlinev1.NewPositionServiceClient(conn).Where(limited(t), &leadlinev1.WhereRequest{Vehicle: "b"})
	wantStatus(t, "the vehicle that made room", err, codes.NotFound, `no vehicle "b"`)
	if _, err := f.Close(); err != nil {
		t.Error(err)
	}
	// The vehicle with a stream was kept.
	if err := a.Send(ending); err != nil {
		t.Fatal(err)
	}
	if err := ends(a); err != io.EOF {
		t.Errorf("the vehicle with a stream: %v", err)
	}
}

// TestBadQuestions proves that each wrong question has its own answer.
func TestBadQuestions(t *testing.T) {
	_, conn := serve(t, Config{})
	openRaw(t, conn, &leadlinev1.Open{Header: header("silent"), Drive: "d"})
	if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(9, 5)); err != nil {
		t.Fatal(err)
	}
	corner := wire.FromPosition(geo.FromDegrees(5, 53))
	for _, c := range []struct {
		req   *leadlinev1.WhereRequest
		code  codes.Code
		words string
	}{
		{&leadlinev1.WhereRequest{}, codes.InvalidArgument, "vehicle is missing"},
		{&leadlinev1.WhereRequest{Vehicle: "ghost"}, codes.NotFound, `no vehicle "ghost" here`},
		{&leadlinev1.WhereRequest{Vehicle: strings.Repeat("x", 1<<20)}, codes.NotFound, "no vehicle"},
		{&leadlinev1.WhereRequest{Vehicle: "silent"}, codes.FailedPrecondition, "no posterior yet"},
		{&leadlinev1.WhereRequest{Vehicle: "v", RegionFractions: []float64{0.5, 1}}, codes.InvalidArgument, "region fraction 1: it must be above 0 and below 1"},
		{&leadlinev1.WhereRequest{Vehicle: "v", RegionFractions: []float64{math.NaN()}}, codes.InvalidArgument, "region fraction NaN"},
		{&leadlinev1.WhereRequest{Vehicle: "v", RegionFractions: make([]float64, 9)}, codes.InvalidArgument, "9 region_fractions: at most 8"},
		{&leadlinev1.WhereRequest{Vehicle: "v", IntegrityRisk: proto.Float64(0)}, codes.InvalidArgument, "integrity_risk 0"},
		{&leadlinev1.WhereRequest{Vehicle: "v", Area: &leadlinev1.Polygon{}}, codes.InvalidArgument, "area: no ring"},
		{&leadlinev1.WhereRequest{Vehicle: "v", Area: &leadlinev1.Polygon{Rings: []*leadlinev1.Ring{{Points: []*leadlinev1.Position{corner, corner}}}}}, codes.InvalidArgument, "rings[0] has 2 points"},
	} {
		_, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), c.req)
		wantStatus(t, fmt.Sprintf("%.100v", c.req), err, c.code, c.words)
		if len(err.Error()) > 2000 {
			t.Errorf("%.100v: an answer of %d bytes", c.req, len(err.Error()))
		}
	}
}

// blocking is a session that waits when told to, and panics when told to.
type blocking struct {
	Session
	enter, leave chan struct{}
}

func (b *blocking) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	switch ev.Sensor {
	case "wait":
		b.enter <- struct{}{}
		<-b.leave
	case "break":
		panic("broken on purpose")
	}
	return b.Session.Add(ev)
}

// TestOthersGoOn proves that a session that hangs or breaks holds up no other
// vehicle.
func TestOthersGoOn(t *testing.T) {
	enter, leave := make(chan struct{}), make(chan struct{})
	_, conn := serve(t, Config{NewSession: func(c session.Config) (Session, error) {
		s, err := newTally(c)
		return &blocking{s, enter, leave}, err
	}})
	evs := voyage(10, 10)
	want := tallied(evs)
	slow, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("slow"), Drive: "d"})
	wait := evs[0]
	wait.Sensor = "wait"
	if err := slow.Send(batch(1, wait)); err != nil {
		t.Fatal(err)
	}
	<-enter // its owner stands in Add now
	broken, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("broken"), Drive: "d"})
	kaputt := evs[0]
	kaputt.Sensor = "break"
	if err := broken.Send(batch(1, kaputt)); err != nil {
		t.Fatal(err)
	}
	wantStatus(t, "the broken session", ends(broken), codes.Internal, `session of vehicle "broken" failed`)
	_, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), &leadlinev1.WhereRequest{Vehicle: "broken"})
	wantStatus(t, "asking after the broken session", err, codes.NotFound, "no vehicle")
	if closed, err := fed(limited(t), conn, client.Drive{Header: header("v")}, evs); err != nil || closed.GetPosteriorSha256() != want {
		t.Errorf("a vehicle beside them: %v, %v", closed, err)
	}
	close(leave)
	if err := slow.Send(ending); err != nil {
		t.Fatal(err)
	}
	if err := ends(slow); err != io.EOF {
		t.Errorf("the slow one: %v", err)
	}
}

// TestBadConfig proves that a configuration's mistakes are all named at once.
func TestBadConfig(t *testing.T) {
	_, err := New(Config{Maps: []Map{{}, {Name: "a", Space: sea().Space}, {Name: "a", Space: sea().Space}}, Limits: Limits{Streams: -1}})
	for _, want := range []string{"map 1 has no name", `map "" has no space`, `two maps are called "a"`, "limit Streams is -1"} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("got %v, want %q in it", err, want)
		}
	}
	if _, err := New(Config{}); err == nil {
		t.Error("a server without a map was made")
	}
}
