package server

import (
	"context"
	"fmt"
	"strings"
	"testing"

	"google.golang.org/grpc"

	"leadline/engine/client"
	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// troubled is a session whose alarms are told by the number of the measurement:
// the first bit is a bias of the sensor odo, the second one being lost.
type troubled struct{ tally }

func newTroubled(c session.Config) (Session, error) {
	t, _ := newTally(c)
	return &troubled{*t.(*tally)}, nil
}

func (s *troubled) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	ps, err := s.tally.Add(ev)
	if ev.Number&1 != 0 {
		ps[0].Alarms = []monitor.Alarm{{Kind: monitor.Bias, Key: monitor.Key{Sensor: "odo", Kind: "travel"}, RaisedNS: int64(ev.Time), BeganNS: int64(ev.Time)}}
	}
	ps[0].LostAlarm = ev.Number&2 != 0
	return ps, err
}

// sendNumbers feeds a batch of standstills with these numbers.
func sendNumbers(t *testing.T, f *client.Feed, second int, numbers ...uint64) {
	t.Helper()
	for _, n := range numbers {
		second++
		ev := sensor.Event{Time: began + sensor.Time(second)*1e9, Sensor: "s", Number: n, Measurement: sensor.Standstill{}}
		if err := f.Send(wire.FromEvent(ev)); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Flush(); err != nil {
		t.Fatal(err)
	}
}

type alarmStream = grpc.ServerStreamingClient[leadlinev1.FollowResponse]

// nextAlarms reads a stream until it has told of so many alarms.
func nextAlarms(t *testing.T, st alarmStream, n int) (out []string) {
	t.Helper()
	for len(out) < n {
		m, err := st.Recv()
		if err != nil {
			t.Fatalf("after %q: %v", out, err)
		}
		a := m.GetAlarm()
		if a == nil {
			continue
		}
		what := "lost"
		if !a.GetLost() {
			what = fmt.Sprintf("%s %v", a.GetAlarm().GetSensor(), a.GetAlarm().GetKind())
		}
		if a.GetSeenAt() != nil {
			what += ", seen by " + a.GetSeenBy() + ": " + a.GetNote()
		}
		if a.GetClearedAt() != nil {
			what += ", cleared: " + a.GetClearedReason()
		}
		out = append(out, fmt.Sprintf("%d %s %s", a.GetNumber(), a.GetVehicle(), what))
	}
	return out
}

func wantLines(t *testing.T, what string, got []string, want ...string) {
	t.Helper()
	if strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("%s:\n got %q\nwant %q", what, got, want)
	}
}

// TestAlarmsHaveALife proves that an alarm is on record once from when it is
// raised, that who follows is told who has seen it and why it is over, and that
// who comes later is told of all.
func TestAlarmsHaveALife(t *testing.T) {
	_, conn := serve(t, Config{NewSession: newTroubled})
	c := leadlinev1.NewPositionServiceClient(conn)
	follow := func() alarmStream {
		st, err := c.Follow(limited(t), &leadlinev1.FollowRequest{Alarms: true})
		if err != nil {
			t.Fatal(err)
		}
		return st
	}
	st := follow()
	open := func(vehicle string) *client.Feed {
		f, err := client.Open(limited(t), conn, client.Drive{Header: header(vehicle), Name: "d"})
		if err != nil {
			t.Fatal(err)
		}
		return f
	}
	f := open("van")
	const bias = "1 van odo ALARM_KIND_BIAS"
	sendNumbers(t, f, 0, 0, 1, 1, 3)
	wantLines(t, "raised", nextAlarms(t, st, 2), bias, "2 van lost")
	see := func(number uint64, who, note string) *leadlinev1.AlarmRecord {
		r, err := c.SeeAlarm(limited(t), &leadlinev1.SeeAlarmRequest{Number: number, Who: who, Note: note})
		if err != nil {
			t.Fatal(err)
		}
		return r.GetAlarm()
	}
	see(1, "Ada", "tyres are new")
	wantLines(t, "seen", nextAlarms(t, st, 1), bias+", seen by Ada: tyres are new")
	if a := see(1, "Bob", "me too"); a.GetSeenBy() != "Ada" {
		t.Errorf("the second one counts: %v", a)
	}
	sendNumbers(t, f, 10, 2)
	const over = bias + ", seen by Ada: tyres are new, cleared: as much evidence has spoken for the measurements as had spoken against them"
	wantLines(t, "cleared", nextAlarms(t, st, 1), over)
	sendNumbers(t, f, 20, 3)
	wantLines(t, "raised again", nextAlarms(t, st, 1), "3 van odo ALARM_KIND_BIAS")
	late := follow()
	wantLines(t, "who comes later", nextAlarms(t, late, 3), over, "2 van lost", "3 van odo ALARM_KIND_BIAS")
	if _, err := f.Close(); err != nil {
		t.Fatal(err)
	}
	wantLines(t, "the end", nextAlarms(t, late, 2), "2 van lost, cleared: the drive has ended", "3 van odo ALARM_KIND_BIAS, cleared: the drive has ended")

	plainStream, err := c.Follow(limited(t), &leadlinev1.FollowRequest{})
	if err != nil {
		t.Fatal(err)
	}
	for {
		m, err := plainStream.Recv()
		if err != nil || m.GetAlarm() != nil {
			t.Fatalf("who did not ask: %v, %v", m, err)
		}
		if m.GetFarewell() != nil {
			break
		}
	}
}

// TestAlarmsAreBounded proves that the oldest of those that were cleared are
// forgotten first, and none that holds.
func TestAlarmsAreBounded(t *testing.T) {
	s, err := New(Config{Maps: []Map{sea()}})
	if err != nil {
		t.Fatal(err)
	}
	b := s.alarms
	first := b.raise(&leadlinev1.AlarmRecord{Vehicle: "holds"})
	for range maxCleared + 50 {
		b.clear(b.raise(&leadlinev1.AlarmRecord{Vehicle: "over"}), "")
	}
	if b.records[first] == nil || len(b.records) != maxCleared+1 {
		t.Errorf("%d on record, the first is %v", len(b.records), b.records[first])
	}
	if _, err := s.SeeAlarm(context.Background(), &leadlinev1.SeeAlarmRequest{Number: first + 1, Who: "x"}); err == nil {
		t.Error("one that was forgotten can be seen")
	}
	r := b.read()
	n := 0
	for b.take(r) != nil {
		n++
	}
	if n != maxCleared+1 {
		t.Errorf("told of %d", n)
	}
	if b.leave(r); len(b.readers) != 0 {
		t.Error("a reader is left")
	}
}
