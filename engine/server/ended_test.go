package server

import (
	"context"
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"

	"google.golang.org/protobuf/proto"
	"google.golang.org/protobuf/types/known/timestamppb"

	"leadline/engine/client"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// TestEndedDrives: what drives were like that have ended and made room for others is told as
// before, after restarts, too, whether the server was stopped in order or not; what is erased or
// too old is not kept; and of a drive that goes on its past survives a restart, thinned.
func TestEndedDrives(t *testing.T) {
	l := &life{t: t, cfg: Config{Journal: keptIn(t.TempDir()), Build: "this", MaxCells: 1000, KeepFor: time.Hour}}
	var calls leadlinev1.PositionServiceClient
	start := func() {
		t.Helper()
		l.start()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(func() { conn.Close() })
		calls = leadlinev1.NewPositionServiceClient(conn)
	}
	evs := voyage(3, 160)
	drive := func(vehicle, name string, n int, end bool) (closed *leadlinev1.Closed) {
		t.Helper()
		conn, err := client.Dial(l.addr)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close()
		f, err := client.Open(limited(t), conn, client.Drive{Header: header(vehicle), Name: name, Batch: 5})
		if err != nil {
			t.Fatal(err)
		}
		for _, ev := range evs[:n] {
			if err := f.Send(wire.FromEvent(ev)); err != nil {
				t.Fatal(err)
			}
		}
		if end {
			closed, err = f.Close()
		} else {
			err = f.Leave()
		}
		if err != nil {
			t.Fatal(err)
		}
		return closed
	}
	trail := func(vehicle, name string) *leadlinev1.TrailResponse {
		t.Helper()
		m, err := calls.Trail(limited(t), &leadlinev1.TrailRequest{Vehicle: vehicle, Drive: name})
		if err != nil {
			t.Fatal(err)
		}
		return m
	}
	listed := func() string {
		t.Helper()
		var out []string
		for token := ""; ; {
			page, err := calls.ListEndedDrives(limited(t), &leadlinev1.ListEndedDrivesRequest{PageSize: 1, PageToken: token})
			if err != nil {
				t.Fatal(err)
			}
			for _, d := range page.GetDrives() {
				points := trail(d.GetVehicle(), d.GetDrive()).GetPoints()
				if d.GetMap() != "sea" || len(points) == 0 || !proto.Equal(d.GetTime(), points[len(points)-1].GetTime()) {
					t.Errorf("listed: %v", d)
				}
				out = append(out, d.GetVehicle()+" "+d.GetDrive())
			}
			if token = page.GetNextPageToken(); token == "" {
				return strings.Join(out, ", ")
			}
		}
	}

	start()
	closed := drive("v", "z first", 20, true)
	first := trail("v", "")
	if n := uint64(len(first.GetPoints())); n != closed.GetPosteriors() || first.GetMap() != "sea" || first.GetAlertLimitM() == 0 {
		t.Errorf("%d points: %v", n, first)
	}
	drive("v", "second", 30, true)
	drive("u", "only", 10, true)
	next := drive("u", "next", 10, true)
	drive("v", "third", len(evs), false)
	goesOn := trail("v", "")
	const all = "u only, v z first, v second"
	for _, in := range []string{"the same life", "one that was killed before", "one that was stopped before"} {
		if got := listed(); got != all {
			t.Errorf("in %s: %s", in, got)
		}
		if got := trail("v", "z first"); !proto.Equal(got, first) {
			t.Errorf("in %s it was like\n%v\nnot\n%v", in, got, first)
		}
		if got := trail("u", ""); got.GetDrive() != "next" || uint64(len(got.GetPoints())) != next.GetPosteriors() {
			t.Errorf("in %s: the drive that has ended and is the latest: %v", in, got)
		}
		points := trail("v", "third").GetPoints()
		for i, p := range points {
			if !slices.ContainsFunc(goesOn.GetPoints(), func(q *leadlinev1.TrailPoint) bool { return proto.Equal(p, q) }) || i > 0 && !p.GetTime().AsTime().After(points[i-1].GetTime().AsTime()) {
				t.Errorf("in %s: point %d of the drive that goes on is %v", in, i, p)
			}
		}
		if n := len(points); n > len(goesOn.GetPoints()) || n < sparse/2 {
			t.Errorf("in %s: %d points of the drive that goes on", in, n)
		}
		ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
		if in == "the same life" {
			cancel()
		}
		l.stop(ctx)
		cancel()
		start()
	}

	if _, err := calls.EraseVehicle(limited(t), &leadlinev1.EraseVehicleRequest{Vehicle: "v"}); err != nil {
		t.Fatal(err)
	}
	for range 2 {
		if got := listed(); got != "u only" {
			t.Errorf("after v has been erased: %s", got)
		}
		_, err := calls.Trail(limited(t), &leadlinev1.TrailRequest{Vehicle: "v", Drive: "second"})
		if s := saidBy(err); s.reason != leadlinev1.Reason_REASON_UNKNOWN_DRIVE || !strings.Contains(s.message, "not kept any more") {
			t.Errorf("%+v", s)
		}
		l.stop(limited(t))
		start()
	}
	l.s.age(time.Now().Add(59 * time.Minute))
	if got := listed(); got != "u only" {
		t.Errorf("before its time: %s", got)
	}
	l.s.age(time.Now().Add(61 * time.Minute))
	if got := listed(); got != "" {
		t.Errorf("after its time: %s", got)
	}
	l.stop(limited(t))
}

// TestEndedDrivesBound: of too many drives those go that were opened first.
func TestEndedDrivesBound(t *testing.T) {
	s := new(Server)
	for i := range maxEnded + 5 {
		at := time.Unix(int64((i*7919)%(maxEnded+5)), 0)
		s.addEnded(&endedDrive{about: &leadlinev1.EndedDrive{Vehicle: fmt.Sprint("v", i%10), Drive: fmt.Sprint(at.Unix()), OpenedAt: timestamppb.New(at)}})
	}
	for _, d := range s.past {
		if d.about.GetOpenedAt().GetSeconds() < 5 {
			t.Errorf("kept: %v", d.about)
		}
	}
	if len(s.past) != maxEnded || !slices.IsSortedFunc(s.past, func(a, b *endedDrive) int { return strings.Compare(a.order(), b.order()) }) {
		t.Errorf("%d are kept, in this order or another", len(s.past))
	}
}
