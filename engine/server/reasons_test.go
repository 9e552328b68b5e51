package server

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"
	"testing"
	"time"

	"google.golang.org/genproto/googleapis/rpc/errdetails"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/metadata"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/types/known/emptypb"

	"leadline/engine/client"
	"leadline/engine/journal"
	"leadline/engine/sensor"
	"leadline/engine/server/identity"
	"leadline/engine/session"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// said is why something was not done, in whichever form the API says so.
type said struct {
	reason  leadlinev1.Reason
	message string
	code    codes.Code        // of a call
	about   map[string]string // of a call
	domain  string            // of a call
	retry   time.Duration     // after how long it may do, of a call
}

func saidBy(err error) said {
	st := status.Convert(err)
	s := said{message: st.Message(), code: st.Code()}
	for _, d := range st.Details() {
		if info, ok := d.(*errdetails.ErrorInfo); ok {
			s.reason = leadlinev1.Reason(leadlinev1.Reason_value["REASON_"+info.GetReason()])
			s.about, s.domain = info.GetMetadata(), info.GetDomain()
		}
		if info, ok := d.(*errdetails.RetryInfo); ok {
			s.retry = info.GetRetryDelay().AsDuration()
		}
	}
	return s
}

func saidOf(f *leadlinev1.Failure) said {
	return said{reason: f.GetReason(), message: f.GetMessage()}
}

// sent opens a drive, sends messages, and returns why the stream was ended.
func sent(t *testing.T, conn *grpc.ClientConn, o *leadlinev1.Open, messages ...*leadlinev1.FeedRequest) said {
	t.Helper()
	st, _ := openRaw(t, conn, o)
	for _, m := range messages {
		if err := st.Send(m); err != nil && !errors.Is(err, io.EOF) {
			t.Fatal(err)
		}
	}
	return saidBy(ends(st))
}

// refused sends measurements one a batch and returns why the last one was not
// used.
func refused(t *testing.T, conn *grpc.ClientConn, ms ...*leadlinev1.SensorMeasurement) said {
	t.Helper()
	var last *leadlinev1.Refusal
	f, err := client.Open(limited(t), conn, client.Drive{
		Header: header("v"), Replace: true, Reply: leadlinev1.Reply_REPLY_NONE,
		OnRefusal: func(r *leadlinev1.Refusal) { last = r },
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, m := range ms {
		if err := f.Send(m); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := f.Close(); err != nil {
		t.Fatal(err)
	}
	return said{reason: last.GetReason(), message: last.GetDetail()}
}

// wrongCall is one way to get a reason from a real server over a real
// connection.
type wrongCall struct {
	reason leadlinev1.Reason
	about  string // the keys of the error's metadata, in order; "-" is no call's
	config Config
	do     func(t *testing.T, s *Server, conn *grpc.ClientConn) said
}

func wrongCalls(t *testing.T) []wrongCall {
	uploading := func(t *testing.T) Config { return Config{Uploads: (&shelf{}).uploads(t.TempDir())} }
	open := func(change func(o *leadlinev1.Open)) func(*testing.T, *Server, *grpc.ClientConn) said {
		return func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			o := &leadlinev1.Open{Header: header("v"), Drive: "d"}
			change(o)
			st := raw(t, conn)
			// A server that is full ends the stream without reading: then sending
			// says no more than EOF, and receiving why.
			if err := st.Send(opening(o)); err != nil && !errors.Is(err, io.EOF) {
				t.Fatal(err)
			}
			_, err := st.Recv()
			return saidBy(err)
		}
	}
	ask := func(req *leadlinev1.WhereRequest) func(*testing.T, *Server, *grpc.ClientConn) said {
		return func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, &leadlinev1.Open{Header: header("silent"), Drive: "d"})
			if _, err := fed(limited(t), conn, client.Drive{Header: header("v")}, voyage(9, 5)); err != nil {
				t.Fatal(err)
			}
			resp, err := leadlinev1.NewPositionServiceClient(conn).Where(limited(t), req)
			if err != nil {
				return saidBy(err)
			}
			return saidOf(resp.GetAnswers()[0].GetFailure())
		}
	}
	measured := func(change func(m *leadlinev1.SensorMeasurement)) func(*testing.T, *Server, *grpc.ClientConn) said {
		return func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			var ms []*leadlinev1.SensorMeasurement
			for _, ev := range voyage(6, 10) {
				ms = append(ms, wire.FromEvent(ev))
			}
			last := wire.FromEvent(voyage(6, 10)[10])
			change(last)
			return refused(t, conn, append(ms, last)...)
		}
	}
	access, token := byToken(t)
	away, err := identity.NewTokens(identity.TokenConfig{Issuer: "http://127.0.0.1:1", Audience: "leadline"}) // where nobody answers
	if err != nil {
		t.Fatal(err)
	}
	mapsAs := func(as func(*testing.T) context.Context) func(*testing.T, *Server, *grpc.ClientConn) said {
		return func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).ListMaps(as(t), &leadlinev1.ListMapsRequest{})
			return saidBy(err)
		}
	}
	d := &leadlinev1.Open{Header: header("v"), Drive: "d"}
	evs := voyage(5, 20)
	broken := Config{NewSession: func(c session.Config) (Session, error) {
		s, err := newTally(c)
		return &blocking{Session: s}, err
	}}
	kaputt := evs[0]
	kaputt.Sensor = "break"
	fix := wire.FromMeasurement(sensor.Fix{Position: middle, SigmaM: 1})
	return []wrongCall{
		{leadlinev1.Reason_REASON_UNUSABLE, "-", Config{}, measured(func(m *leadlinev1.SensorMeasurement) { m.Time = nil })},
		{leadlinev1.Reason_REASON_WRONG_SPACE, "-", Config{}, measured(func(m *leadlinev1.SensorMeasurement) {
			m.Measurement = wire.FromMeasurement(sensor.Sighting{Road: "High Street"})
		})},
		{leadlinev1.Reason_REASON_TOO_LATE, "-", Config{}, measured(func(m *leadlinev1.SensorMeasurement) {
			m.Time, m.Measurement = wire.FromTime(began-3600e9), fix
		})},
		{leadlinev1.Reason_REASON_TOO_EARLY, "-", Config{}, measured(func(m *leadlinev1.SensorMeasurement) {
			m.Time, m.Measurement = wire.FromTime(began+1e15), fix
		})},
		{leadlinev1.Reason_REASON_CONFLICTING, "-", Config{}, measured(func(m *leadlinev1.SensorMeasurement) { m.Measurement = fix })},
		{leadlinev1.Reason_REASON_TOO_MUCH, "-", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			var ms []*leadlinev1.SensorMeasurement
			for i := range 1025 {
				ms = append(ms, wire.FromEvent(sensor.Event{Time: began, Sensor: fmt.Sprint("s", i), Measurement: sensor.Fix{Position: middle, SigmaM: 1e5}}))
			}
			return refused(t, conn, ms...)
		}},

		{leadlinev1.Reason_REASON_BAD_FIELD, "field", Config{}, open(func(o *leadlinev1.Open) { o.Header.Vehicle = "" })},
		{leadlinev1.Reason_REASON_BAD_FIELD, "field", Config{}, open(func(o *leadlinev1.Open) { o.Drive = "" })},
		{leadlinev1.Reason_REASON_BAD_FIELD, "field", Config{}, open(func(o *leadlinev1.Open) { o.Reply = 77 })},
		{leadlinev1.Reason_REASON_BAD_FIELD, "field", Config{}, ask(&leadlinev1.WhereRequest{})},
		{leadlinev1.Reason_REASON_BAD_FIELD, "field limit most", Config{Limits: Limits{Questions: 1}}, ask(&leadlinev1.WhereRequest{Vehicles: []string{"v", "w"}})},
		{leadlinev1.Reason_REASON_BAD_FIELD, "field", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return sent(t, conn, d, batch(0))
		}},
		{leadlinev1.Reason_REASON_BAD_FIELD, "field limit most", Config{Limits: Limits{BatchMeasurements: 2}}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return sent(t, conn, d, batch(1, evs[:3]...))
		}},
		{leadlinev1.Reason_REASON_WRONG_MESSAGE, "", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			st := raw(t, conn)
			if err := st.Send(batch(1)); err != nil {
				t.Fatal(err)
			}
			return saidBy(ends(st))
		}},
		{leadlinev1.Reason_REASON_WRONG_MESSAGE, "", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			st := raw(t, conn)
			if err := st.CloseSend(); err != nil {
				t.Fatal(err)
			}
			return saidBy(ends(st))
		}},
		{leadlinev1.Reason_REASON_WRONG_MESSAGE, "", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return sent(t, conn, d, opening(d))
		}},
		{leadlinev1.Reason_REASON_WRONG_MESSAGE, "", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return sent(t, conn, d, &leadlinev1.FeedRequest{})
		}},
		{leadlinev1.Reason_REASON_UNKNOWN_MAP, "map", Config{}, open(func(o *leadlinev1.Open) { o.Header.Map = "moon" })},
		{leadlinev1.Reason_REASON_UNKNOWN_SUITE, "suite", Config{}, open(func(o *leadlinev1.Open) { o.Header.Suite = "tank" })},
		{leadlinev1.Reason_REASON_UNKNOWN_ALARM, "field", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).SeeAlarm(limited(t), &leadlinev1.SeeAlarmRequest{Number: 7, Who: "somebody"})
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_UNKNOWN_VEHICLE, "-", Config{}, ask(&leadlinev1.WhereRequest{Vehicles: []string{"ghost"}})},
		{leadlinev1.Reason_REASON_BAD_START, "vehicle", Config{}, open(func(o *leadlinev1.Open) {
			o.Header = wire.FromHeader(wire.Header{Vehicle: "v", Map: "sea", Start: wire.Start{Point: farOff, SigmaM: 5}})
		})},
		{leadlinev1.Reason_REASON_OTHER_HEADER, "drive vehicle", Config{}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, d)
			return open(func(o *leadlinev1.Open) { o.Header.Start = nil })(t, s, conn)
		}},
		{leadlinev1.Reason_REASON_OTHER_DRIVE, "drive vehicle", Config{}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, d)
			return open(func(o *leadlinev1.Open) { o.Drive = "e" })(t, s, conn)
		}},
		{leadlinev1.Reason_REASON_OUT_OF_ORDER, "drive vehicle", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return sent(t, conn, d, batch(2))
		}},
		{leadlinev1.Reason_REASON_DRIVE_ENDED, "drive vehicle", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			if end := sent(t, conn, d, ending); end.message != "EOF" {
				t.Errorf("the end: %+v", end)
			}
			return sent(t, conn, d, batch(1))
		}},
		{leadlinev1.Reason_REASON_NO_POSTERIOR, "-", Config{}, ask(&leadlinev1.WhereRequest{Vehicles: []string{"silent"}})},
		{leadlinev1.Reason_REASON_SERVER_FULL, "limit most", Config{Limits: Limits{Streams: 1}}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, d)
			return open(func(*leadlinev1.Open) {})(t, s, conn)
		}},
		{leadlinev1.Reason_REASON_SERVER_FULL, "limit most", Config{Limits: Limits{Vehicles: 1}}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, d)
			return open(func(o *leadlinev1.Open) { o.Header.Vehicle = "w" })(t, s, conn)
		}},
		{leadlinev1.Reason_REASON_SERVER_FULL, "limit most", Config{Limits: Limits{CellsInAll: 1}}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, d)
			return open(func(o *leadlinev1.Open) { o.Header.Vehicle = "w" })(t, s, conn)
		}},
		{leadlinev1.Reason_REASON_TOO_FAST, "drive limit most vehicle", Config{Limits: Limits{Rate: 1, BatchMeasurements: 1}}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, d)
			var err error
			for i := 0; i < 100 && (err == nil || i == 1); i++ {
				_, err = leadlinev1.NewPositionServiceClient(conn).AddSighting(limited(t), &leadlinev1.AddSightingRequest{Vehicle: "v", Time: wire.FromTime(began), Sighting: box(0, 200)})
			}
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_SILENT, "", Config{Limits: Limits{OpenTimeout: time.Millisecond}}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return saidBy(ends(raw(t, conn)))
		}},
		{leadlinev1.Reason_REASON_TAKEN_OVER, "drive vehicle", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			st, _ := openRaw(t, conn, d)
			openRaw(t, conn, d)
			return saidBy(ends(st))
		}},
		{leadlinev1.Reason_REASON_REPLACED, "drive vehicle", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			st, _ := openRaw(t, conn, d)
			openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "e", Replace: true})
			return saidBy(ends(st))
		}},
		{leadlinev1.Reason_REASON_ERASED, "drive vehicle", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			st, _ := openRaw(t, conn, d)
			if _, err := leadlinev1.NewPositionServiceClient(conn).EraseVehicle(limited(t), &leadlinev1.EraseVehicleRequest{Vehicle: "v"}); err != nil {
				t.Error(err)
			}
			return saidBy(ends(st))
		}},
		{leadlinev1.Reason_REASON_STOPPING, "", Config{}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			st, _ := openRaw(t, conn, d)
			if err := s.Shutdown(limited(t)); err != nil {
				t.Error(err)
			}
			return saidBy(ends(st))
		}},
		{leadlinev1.Reason_REASON_SESSION_FAILED, "drive vehicle", broken, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return sent(t, conn, d, batch(1, kaputt))
		}},
		{leadlinev1.Reason_REASON_SESSION_FAILED, "vehicle", Config{NewSession: func(session.Config) (Session, error) { panic("no session today") }}, open(func(*leadlinev1.Open) {})},
		{leadlinev1.Reason_REASON_NOT_OFFERED, "method", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			return saidBy(conn.Invoke(limited(t), "/leadline.v1.PositionService/Teleport", &emptypb.Empty{}, &emptypb.Empty{}))
		}},
		{leadlinev1.Reason_REASON_NOT_OFFERED, "", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := put(limited(t), conn, beginning("lake", "plane a"), "plane a")
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_BAD_TOKEN, "field", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			st, err := leadlinev1.NewPositionServiceClient(conn).Follow(limited(t), &leadlinev1.FollowRequest{ResumeToken: "next, please"})
			if err != nil {
				t.Fatal(err)
			}
			_, err = st.Recv()
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_BAD_MAP, "map", uploading(t), func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := put(limited(t), conn, beginning("lake", "rubbish"), "rubbish")
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_MAP_EXISTS, "map", uploading(t), func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := put(limited(t), conn, beginning("sea", "plane a"), "plane a")
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_UNKNOWN_DRIVE, "drive vehicle", Config{}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).Trail(limited(t), &leadlinev1.TrailRequest{Vehicle: "v", Drive: "d"})
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_UNKNOWN_RESULT, "result", Config{Results: t.TempDir()}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).ReadResult(limited(t), &leadlinev1.ReadResultRequest{Name: "given/van"})
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_BAD_RESULT, "result", Config{Results: resultsIn(t, "given/van", "score.json", "[")}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).ReadResult(limited(t), &leadlinev1.ReadResultRequest{Name: "given/van"})
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_NO_IDENTITY, "", Config{Access: access}, mapsAs(limited)},
		{leadlinev1.Reason_REASON_BAD_IDENTITY, "", Config{Access: access}, mapsAs(func(t *testing.T) context.Context { return showing(t, "token") })},
		{leadlinev1.Reason_REASON_BAD_IDENTITY, "", Config{Access: access}, mapsAs(func(t *testing.T) context.Context {
			return metadata.AppendToOutgoingContext(limited(t), "authorization", "Basic dmFuOnZhbg==")
		})},
		{leadlinev1.Reason_REASON_IDENTITY_EXPIRED, "", Config{Access: access}, mapsAs(func(t *testing.T) context.Context {
			return showing(t, token("v", "roles", "vehicle", "exp", 1e9))
		})},
		{leadlinev1.Reason_REASON_IDENTITY_UNCHECKED, "", Config{Access: &Access{Tokens: away}}, mapsAs(func(t *testing.T) context.Context {
			return showing(t, token("v", "roles", "vehicle"))
		})},
		{leadlinev1.Reason_REASON_NOT_ALLOWED, "method", Config{Access: access}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).ListVehicles(showing(t, token("v", "roles", "vehicle")), &leadlinev1.ListVehiclesRequest{})
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_NOT_ALLOWED, "method vehicle", Config{Access: access}, func(t *testing.T, _ *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).EndDrive(showing(t, token("v", "roles", "vehicle")), &leadlinev1.EndDriveRequest{Vehicle: "w"})
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_JOURNAL_FULL, "drive vehicle", Config{Journal: crowded(t)}, open(func(*leadlinev1.Open) {})},
		{leadlinev1.Reason_REASON_JOURNAL_DOWN, "drive vehicle", Config{Journal: atBroker(t)}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			st, _ := openRaw(t, conn, d)
			j, _, err := journal.Open(limited(t), *s.cfg.Journal, func(journal.Record) error { return nil })
			if err != nil {
				t.Fatal(err)
			}
			t.Cleanup(func() { j.Close() })
			if err := st.Send(batch(1)); err != nil {
				t.Fatal(err)
			}
			return saidBy(ends(st))
		}},
		{leadlinev1.Reason_REASON_RECOVERING, "vehicle", sharing(t), func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			_, err := leadlinev1.NewPositionServiceClient(conn).EndDrive(metadata.AppendToOutgoingContext(limited(t), forwardedHeader, "1"), &leadlinev1.EndDriveRequest{Vehicle: ofAnother(t, s)})
			return saidBy(err)
		}},
		{leadlinev1.Reason_REASON_JOURNAL_DAMAGED, "drive vehicle", Config{}, open(func(o *leadlinev1.Open) { o.Acknowledged = 7 })},
		{leadlinev1.Reason_REASON_JOURNAL_DAMAGED, "drive vehicle", Config{}, func(t *testing.T, s *Server, conn *grpc.ClientConn) said {
			openRaw(t, conn, d)
			return open(func(o *leadlinev1.Open) { o.Acknowledged = 7 })(t, s, conn)
		}},
		{leadlinev1.Reason_REASON_NOT_OFFERED, "-", Config{NewSession: newTally}, ask(&leadlinev1.WhereRequest{Vehicles: []string{"v"}, RegionFractions: []float64{0.5}})},
	}
}

// TestReasons proves, for every reason of the API, that a real wrong call gets
// it: with the code that reason.proto names, what it is about, and one line
// that says what was wrong.
func TestReasons(t *testing.T) {
	if testing.Short() {
		t.Skip("one caller at a time: not with -short")
	}
	seen := map[leadlinev1.Reason]bool{}
	for i, c := range wrongCalls(t) {
		name := strings.ToLower(strings.TrimPrefix(c.reason.String(), "REASON_"))
		t.Run(fmt.Sprint(name, " ", i), func(t *testing.T) {
			s, conn := serve(t, c.config)
			got := c.do(t, s, conn)
			seen[got.reason] = true
			if got.reason != c.reason {
				t.Fatalf("reason %v: %s", got.reason, got.message)
			}
			if got.message == "" || len(got.message) > 1100 || strings.ContainsAny(got.message, "\n\x00") {
				t.Errorf("message %q", got.message)
			}
			if c.about == "-" {
				return
			}
			if got.code != reasonCodes[c.reason] || got.domain != "leadline.v1" {
				t.Errorf("code %v, domain %q", got.code, got.domain)
			}
			for _, key := range strings.Fields(c.about) {
				if got.about[key] == "" {
					t.Errorf("nothing about %s: %v", key, got.about)
				}
			}
			if wait := c.reason == leadlinev1.Reason_REASON_TOO_FAST || retryAfter[c.reason] > 0; wait != (got.retry > 0) {
				t.Errorf("the hint when to try again is %v", got.retry)
			}
			if n := len(strings.Fields(c.about)); n != len(got.about) {
				t.Errorf("about %v, want %s", got.about, c.about)
			}
		})
	}
	for n := range leadlinev1.Reason_name {
		if r := leadlinev1.Reason(n); r != leadlinev1.Reason_REASON_UNSPECIFIED && !seen[r] {
			t.Errorf("no wrong call gets %v", r)
		}
	}
}

// TestReasonCodes proves that reason.proto says of each reason of a call the
// code that it has.
func TestReasonCodes(t *testing.T) {
	for r, code := range reasonCodes {
		want := strings.ToUpper(map[codes.Code]string{
			codes.InvalidArgument: "invalid_argument", codes.NotFound: "not_found", codes.AlreadyExists: "already_exists",
			codes.FailedPrecondition: "failed_precondition", codes.ResourceExhausted: "resource_exhausted",
			codes.DeadlineExceeded: "deadline_exceeded", codes.Aborted: "aborted", codes.Unavailable: "unavailable",
			codes.Internal: "internal", codes.Unimplemented: "unimplemented", codes.DataLoss: "data_loss",
			codes.Unauthenticated: "unauthenticated", codes.PermissionDenied: "permission_denied",
		}[code])
		if says := reasonComment(t, r); !strings.HasSuffix(says, " "+want+".") {
			t.Errorf("%v has the code %s; reason.proto says: %s", r, want, says)
		}
	}
}
