package server

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/reflect/protoreflect"
	"google.golang.org/protobuf/reflect/protoregistry"

	"leadline/engine/client"
	"leadline/engine/sensor"
	"leadline/engine/wire"
	"leadline/fixtures/scenes"
	leadlinev1 "leadline/proto/leadline/v1"
)

// plain is a value that makes a request good, by the field's name; fields that
// are not here get 1, "x" or true.
var plain = map[string]any{
	"lon": 5.0, "lat": 53.0, "east_north_m2": 0.0, "deg": 10.0, "pressure_hpa": 1000.0, "mistaken": 0.1,
	"seconds": int64(began/1e9) + 3, "nanos": int32(0), "map": "sea", "vehicle": "v", "vehicles": "v",
	"region_fractions": 0.5, "integrity_risk": 0.01, "depth_below_transducer_m": 20.0, "page_token": "", "resume_token": "",
	"area_probability": 0.5, "predict_to_now": false, "ago_s": 0.5, "belief_cells": uint32(0), "check": false, "replace": true, "status_changes_only": false,
	"traffic": false, "flow_s": 600.0, "road": "road", "detail": protoreflect.EnumNumber(leadlinev1.Detail_DETAIL_REGION), "sha256": strings.Repeat("0", 64),
	"acknowledged": uint64(0), "route_file": []byte(`{"type":"LineString","coordinates":[[5,53],[5.01,53]]}`),
}

// filled makes messages of a type with every field set, one for each way to
// fill the oneofs in it.
func filled(md protoreflect.MessageDescriptor) []protoreflect.Message {
	typ, err := protoregistry.GlobalTypes.FindMessageByName(md.FullName())
	if err != nil {
		panic(err)
	}
	all := []protoreflect.Message{typ.New()}
	// Each message so far, times each way to go on.
	branch := func(ways []func(protoreflect.Message)) {
		var out []protoreflect.Message
		for _, m := range all {
			for _, way := range ways {
				c := proto.Clone(m.Interface()).ProtoReflect()
				way(c)
				out = append(out, c)
			}
		}
		all = out
	}
	for i := range md.Fields().Len() {
		f := md.Fields().Get(i)
		if o := f.ContainingOneof(); o != nil && !o.IsSynthetic() {
			continue
		}
		branch(settings(f))
	}
	for i := range md.Oneofs().Len() {
		o := md.Oneofs().Get(i)
		if o.IsSynthetic() {
			continue
		}
		var ways []func(protoreflect.Message)
		for j := range o.Fields().Len() {
			ways = append(ways, settings(o.Fields().Get(j))...)
		}
		branch(ways)
	}
	return all
}

// settings are the ways to set a field well.
func settings(f protoreflect.FieldDescriptor) (ways []func(protoreflect.Message)) {
	set := func(v protoreflect.Value) func(protoreflect.Message) {
		return func(m protoreflect.Message) {
			if f.IsList() {
				n := 1
				if f.Name() == "points" {
					n = 3
				}
				for i := range n {
					if p, ok := v.Interface().(protoreflect.Message); ok && i > 0 { // the corners of a triangle
						c := proto.CloneOf(p.Interface().(*leadlinev1.Position))
						*c.Lon += 0.01
						*c.Lat += 0.01 * float64(i-1)
						v = protoreflect.ValueOfMessage(c.ProtoReflect())
					}
					m.Mutable(f).List().Append(v)
				}
				return
			}
			m.Set(f, v)
		}
	}
	if f.Message() != nil {
		for _, inner := range filled(f.Message()) {
			if f.Name() == "since" {
				inner.Set(inner.Descriptor().Fields().ByName("seconds"), protoreflect.ValueOfInt64(int64(began/1e9)+2))
			}
			ways = append(ways, set(protoreflect.ValueOfMessage(inner)))
		}
		return ways
	}
	if v, ok := plain[string(f.Name())]; ok {
		return append(ways, set(protoreflect.ValueOf(v)))
	}
	switch f.Kind() {
	case protoreflect.EnumKind:
		return append(ways, set(protoreflect.ValueOfEnum(1)))
	case protoreflect.StringKind:
		return append(ways, set(protoreflect.ValueOfString("x")))
	case protoreflect.BytesKind:
		return append(ways, set(protoreflect.ValueOfBytes([]byte("x"))))
	case protoreflect.BoolKind:
		return append(ways, set(protoreflect.ValueOfBool(true)))
	case protoreflect.DoubleKind:
		return append(ways, set(protoreflect.ValueOfFloat64(1)))
	case protoreflect.Int32Kind:
		return append(ways, set(protoreflect.ValueOfInt32(1)))
	case protoreflect.Int64Kind:
		return append(ways, set(protoreflect.ValueOfInt64(1)))
	case protoreflect.Uint32Kind:
		return append(ways, set(protoreflect.ValueOfUint32(1)))
	case protoreflect.Uint64Kind:
		return append(ways, set(protoreflect.ValueOfUint64(1)))
	}
	panic(fmt.Sprintf("a field of kind %v: say here what it may be", f.Kind()))
}

// odd is a value that hardly any field may have. Some must be refused.
type odd struct {
	what  string
	value protoreflect.Value // invalid to leave the field out
	never bool
}

func oddities(f protoreflect.FieldDescriptor) []odd {
	number := func(v protoreflect.Value) odd { return odd{v.String(), v, false} }
	out := []odd{{what: "nothing"}}
	switch f.Kind() {
	case protoreflect.EnumKind:
		for _, n := range []protoreflect.EnumNumber{-1, 77, math.MaxInt32} {
			out = append(out, odd{fmt.Sprint(n), protoreflect.ValueOfEnum(n), true})
		}
	case protoreflect.StringKind:
		for _, n := range []int{257, 1 << 20} {
			out = append(out, odd{fmt.Sprint(n, " bytes"), protoreflect.ValueOfString(strings.Repeat("y", n)), true})
		}
		out = append(out, odd{"a control character", protoreflect.ValueOfString("a\n\x00b"), false})
	case protoreflect.BytesKind:
		out = append(out, odd{"1 MiB", protoreflect.ValueOfBytes(make([]byte, 1<<20)), false})
	case protoreflect.DoubleKind:
		for _, v := range []float64{math.NaN(), math.Inf(1), math.Inf(-1), -1, 0, 5e-324, -1e300, 1e300} {
			out = append(out, odd{fmt.Sprint(v), protoreflect.ValueOfFloat64(v), math.IsNaN(v) || math.IsInf(v, 0)})
		}
	case protoreflect.Int32Kind:
		for _, v := range []int32{-1, 2_000_000_000, math.MinInt32} {
			out = append(out, odd{fmt.Sprint(v), protoreflect.ValueOfInt32(v), true}) // nanos
		}
	case protoreflect.Int64Kind:
		for _, v := range []int64{0, -1, 1e15, math.MinInt64, math.MaxInt64} {
			out = append(out, number(protoreflect.ValueOfInt64(v)))
		}
	case protoreflect.Uint32Kind:
		out = append(out, number(protoreflect.ValueOfUint32(math.MaxUint32)))
	case protoreflect.Uint64Kind:
		out = append(out, number(protoreflect.ValueOfUint64(0)), number(protoreflect.ValueOfUint64(math.MaxUint64)))
	}
	return out
}

// mutant is a good request with one odd value.
type mutant struct {
	request proto.Message
	path    []string
	odd     odd
}

// mutants gives every field of a message, and of those in it, every odd value.
func mutants(base protoreflect.Message) (out []mutant) {
	var walk func(m protoreflect.Message, path []string)
	walk = func(m protoreflect.Message, path []string) {
		for i := range m.Descriptor().Fields().Len() {
			f := m.Descriptor().Fields().Get(i)
			if !m.Has(f) && f.ContainingOneof() != nil && !f.ContainingOneof().IsSynthetic() {
				continue // another way of the oneof
			}
			at := append(slices.Clip(path), string(f.Name()))
			var was []protoreflect.Value
			if f.IsList() {
				for j := range m.Get(f).List().Len() {
					was = append(was, m.Get(f).List().Get(j))
				}
			} else {
				was = append(was, m.Get(f))
			}
			restore := func() {
				if !f.IsList() {
					m.Set(f, was[0])
					return
				}
				m.Clear(f)
				for _, v := range was {
					m.Mutable(f).List().Append(v)
				}
			}
			for _, o := range oddities(f) {
				switch {
				case !o.value.IsValid():
					m.Clear(f)
				case f.IsList():
					m.Clear(f)
					m.Mutable(f).List().Append(o.value)
				default:
					m.Set(f, o.value)
				}
				out = append(out, mutant{proto.Clone(base.Interface()), at, o})
				restore()
			}
			if f.Message() != nil {
				for _, v := range was {
					walk(v.Message(), at)
				}
			}
		}
	}
	walk(base, nil)
	return out
}

// try sends a request as its call's first or second message, and returns why it
// was refused; nothing if it was taken.
func try(t *testing.T, conn *grpc.ClientConn, method protoreflect.MethodDescriptor, request proto.Message, name string, never bool) *said {
	t.Helper()
	patience := 60 * time.Second
	if method.IsStreamingServer() && !method.IsStreamingClient() && !never {
		patience = 100 * time.Millisecond // there may be nothing to tell
	}
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	full := fmt.Sprintf("/%s/%s", method.Parent().FullName(), method.Name())
	if m, ok := request.(*leadlinev1.FeedRequest); ok {
		if m.GetOpen() == nil {
			return tryFed(t, conn, m, name)
		}
		if m.GetOpen().GetHeader().GetVehicle() == "v" {
			m.GetOpen().Header.Vehicle = name
		}
	}
	desc := &grpc.StreamDesc{ServerStreams: method.IsStreamingServer(), ClientStreams: method.IsStreamingClient()}
	st, err := conn.NewStream(ctx, desc, full)
	if err != nil {
		t.Fatal(err)
	}
	if err := st.SendMsg(request); err != nil && !errors.Is(err, io.EOF) {
		t.Fatal(err)
	}
	if err := st.CloseSend(); err != nil {
		t.Fatal(err)
	}
	typ, err := protoregistry.GlobalTypes.FindMessageByName(method.Output().FullName())
	if err != nil {
		t.Fatal(err)
	}
	answer := typ.New().Interface()
	if err := st.RecvMsg(answer); err != nil && !errors.Is(err, io.EOF) && ctx.Err() == nil {
		s := saidBy(err)
		if s.reason == leadlinev1.Reason_REASON_UNSPECIFIED && s.code == codes.DeadlineExceeded {
			return nil // the server's end of the same deadline came first
		}
		return &s
	}
	if w, ok := answer.(*leadlinev1.WhereResponse); ok && w.GetAnswers()[0].GetFailure() != nil {
		s := saidOf(w.GetAnswers()[0].GetFailure())
		return &s
	}
	return nil
}

// tryFed sends a message into a drive of its own, between good ones.
func tryFed(t *testing.T, conn *grpc.ClientConn, m *leadlinev1.FeedRequest, name string) *said {
	t.Helper()
	good := voyage(1, 3)
	h := header(name)
	h.Suite = "x"
	st, _ := openRaw(t, conn, &leadlinev1.Open{Header: h, Drive: "d", Reply: leadlinev1.Reply_REPLY_NONE})
	first := batch(1, good[0])
	if m.GetBatch() != nil {
		m.GetBatch().Sequence++ // it comes second
		first = batch(1, good...)
	}
	for _, m := range []*leadlinev1.FeedRequest{first, m, ending} {
		if err := st.Send(m); err != nil && !errors.Is(err, io.EOF) {
			t.Fatal(err)
		}
	}
	for {
		m, err := st.Recv()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			s := saidBy(err)
			return &s
		}
		if r := m.GetReceipt().GetRefusals(); m.GetReceipt().GetSequence() > 1 && len(r) > 0 {
			return &said{reason: r[0].GetReason(), message: r[0].GetDetail(), code: codes.OK}
		}
	}
}

// TestFields gives every field of every request odd values, found in the API's
// own description: what must not pass is refused by a reason that names the
// field, what is refused names a field at all, and no session fails. A vehicle
// beside them drives on as if nothing were.
func TestFields(t *testing.T) {
	if testing.Short() {
		t.Skip("starts nothing beside what TestReasons does: not with -short")
	}
	const name, cells = "x", 1000 // x is every name in the requests; few cells cost little
	lon, lat := 5.1, 53.1
	suite := &sensor.Suite{Beacons: []sensor.Place{{ID: name, LonDeg: &lon, LatDeg: &lat}}, Posts: []sensor.Post{{ID: name, LonDeg: &lon, LatDeg: &lat}}}
	listens, err := sensor.ParseSuite("road", []byte(scenes.TwoPosts))
	if err != nil {
		t.Fatal(err)
	}
	_, conn := serve(t, Config{MaxCells: cells, Suites: map[string]*sensor.Suite{name: suite, "road": listens}, Limits: Limits{Vehicles: 5000}, Uploads: (&shelf{}).uploads(t.TempDir()), Results: resultsIn(t, "x")})
	v, err := client.Open(limited(t), conn, client.Drive{Header: header("v"), Name: "x", Batch: 1}) // ended by EndDrive
	if err != nil {
		t.Fatal(err)
	}
	for _, ev := range voyage(9, 5) {
		if err := v.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	road, err := client.Open(t.Context(), conn, client.Drive{Header: &leadlinev1.DriveHeader{Vehicle: "road", Suite: "road", Traffic: true}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := road.Close(); err != nil {
		t.Fatal(err)
	}
	beside := voyage(2, 20)
	want, _, _ := replayedIn(t, cells, 0, beside)
	f, err := client.Open(t.Context(), conn, client.Drive{Header: header("beside"), Batch: 1})
	if err != nil {
		t.Fatal(err)
	}
	tried, passed, done := 0, map[leadlinev1.Reason]int{}, map[string]bool{}
	methods := leadlinev1.File_leadline_v1_service_proto.Services().ByName("PositionService").Methods()
	for i := range methods.Len() {
		method := methods.Get(i)
		for _, base := range filled(method.Input()) {
			if got := try(t, conn, method, proto.Clone(base.Interface()), fmt.Sprint("good", tried), false); got != nil && got.reason != leadlinev1.Reason_REASON_WRONG_SPACE && got.reason != leadlinev1.Reason_REASON_UNKNOWN_ALARM && !strings.HasPrefix(string(method.Name()), "UploadMap") && method.Name() != "DescribeJournal" {
				t.Errorf("%s: a good request is refused: %+v\n%v", method.Name(), got, base.Interface())
			}
			for _, m := range mutants(base) {
				what := fmt.Sprintf("%s: %s is %s", method.Name(), strings.Join(m.path, "."), m.odd.what)
				if done[what] {
					continue // in another base
				}
				done[what] = true
				tried++
				got := try(t, conn, method, m.request, fmt.Sprint("m", tried), m.odd.never)
				if got == nil {
					passed[0]++
					if m.odd.never {
						t.Errorf("%s: it was taken", what)
					}
					continue
				}
				passed[got.reason]++
				switch got.reason {
				case leadlinev1.Reason_REASON_UNSPECIFIED, leadlinev1.Reason_REASON_SESSION_FAILED, leadlinev1.Reason_REASON_SERVER_FULL:
					t.Errorf("%s: %+v", what, got)
				case leadlinev1.Reason_REASON_BAD_FIELD, leadlinev1.Reason_REASON_UNUSABLE:
					if !slices.ContainsFunc(m.path, func(name string) bool { return strings.Contains(got.message, strings.TrimSuffix(name, "_m2")) }) {
						t.Errorf("%s: the refusal names no field: %s", what, got.message)
					}
				}
				if last := m.path[len(m.path)-1]; m.odd.never && !strings.Contains(got.message, last) && last != "nanos" {
					t.Errorf("%s: the refusal does not name it: %s", what, got.message)
				}
				if len(got.message) > 1100 || strings.ContainsAny(got.message, "\n\x00") {
					t.Errorf("%s: message of %d bytes %q", what, len(got.message), got.message[:min(len(got.message), 200)])
				}
			}
		}
	}
	t.Logf("%d odd requests: %v", tried, passed)
	if tried < 500 {
		t.Errorf("only %d requests were tried", tried)
	}
	for _, ev := range beside {
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if closed, err := f.Close(); err != nil || closed.GetPosteriorSha256() != want {
		t.Errorf("the vehicle beside them: %v, %v; want hash %s", closed, err, want)
	}
}
