package server

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"testing"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
	leadlinev1 "leadline/proto/leadline/v1"
)

// scripted is a session whose releases the events spell out: the sensor's name
// is what happens, such as "+1 +2 -1 ~2" (release, withdraw, revise a second).
type scripted struct {
	tally

	gone []sensor.Time
	held []*summary.Posterior // by time
}

func (s *scripted) Add(ev sensor.Event) ([]*summary.Posterior, error) {
	s.gone = nil
	var ps []*summary.Posterior
	for _, word := range strings.Fields(ev.Sensor) {
		var second int64
		if _, err := fmt.Sscan(word[1:], &second); err != nil {
			return nil, &session.Refusal{Reason: session.Unusable, Detail: err.Error()}
		}
		at := int64(began) + second*1e9
		p := &summary.Posterior{TimeNS: at, Status: summary.Unsure, Revises: word[0] == '~'}
		i, found := slices.BinarySearchFunc(s.held, at, func(p *summary.Posterior, at int64) int { return int(p.TimeNS - at) })
		switch {
		case word[0] == '-':
			s.gone = append(s.gone, sensor.Time(at))
			s.held = slices.Delete(s.held, i, i+1)
			continue
		case found:
			s.held[i] = p
		default:
			s.held = slices.Insert(s.held, i, p)
		}
		ps = append(ps, p)
	}
	return ps, nil
}

func (s *scripted) Flush() []*summary.Posterior {
	s.gone = nil
	return nil
}

func (s *scripted) Withdrawn() []sensor.Time { return s.gone }

func (s *scripted) Latest() *summary.Posterior {
	if len(s.held) == 0 {
		return nil
	}
	return s.held[len(s.held)-1]
}

// TestWithdrawn proves that what a session takes back reaches the streams that
// were told of it, in order, and that it is not counted.
func TestWithdrawn(t *testing.T) {
	for _, c := range []struct {
		reply leadlinev1.Reply
		batch []string // one measurement each
		want  string   // what the batch's stream hears
		count uint64
	}{
		{leadlinev1.Reply_REPLY_EVERY, []string{"+1 +2", "+3", "~1 -2 ~3", "+2", "-3 +4"}, "+1 +2 +3 ~1 ~3 -2 +2 +4 -3", 3},
		{leadlinev1.Reply_REPLY_LATEST, []string{"+1 +2", "+3", "~1 -2 ~3"}, "-2 ~3", 2},
		// One that came back is not withdrawn; the last one that holds is told.
		{leadlinev1.Reply_REPLY_LATEST, []string{"+1 +2 +3", "-2 -3 +4", "+2"}, "-3 +2", 3},
		{leadlinev1.Reply_REPLY_LATEST, []string{"+1 +2", "+4", "-4 ~2"}, "-4 ~2", 2},
		{leadlinev1.Reply_REPLY_LATEST, []string{"+1 +2 +3", "-3"}, "-3 +2", 2},
		{leadlinev1.Reply_REPLY_NONE, []string{"+1 +2", "-1 ~2"}, "", 1},
	} {
		_, conn := serve(t, Config{NewSession: func(session.Config) (Session, error) { return &scripted{tally: tally{hash: sha256.New()}}, nil }})
		st, _ := openRaw(t, conn, &leadlinev1.Open{Header: header("v"), Drive: "d", Reply: c.reply})
		var evs []sensor.Event
		for i, word := range c.batch {
			evs = append(evs, sensor.Event{Time: began, Sensor: word, Number: uint64(i), Measurement: sensor.Standstill{}})
		}
		for _, m := range []*leadlinev1.FeedRequest{batch(1, evs...), ending} {
			if err := st.Send(m); err != nil {
				t.Fatal(err)
			}
		}
		var heard []string
		for {
			m, err := st.Recv()
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				t.Fatal(err)
			}
			second := func(ns int64) int64 { return (ns - int64(began)) / 1e9 }
			if p := m.GetPosterior(); p != nil {
				sign := map[bool]string{true: "~", false: "+"}[p.GetRevises()]
				heard = append(heard, fmt.Sprint(sign, second(p.GetTime().AsTime().UnixNano())))
			}
			for _, at := range m.GetWithdrawn().GetTimes() {
				heard = append(heard, fmt.Sprint("-", second(at.AsTime().UnixNano())))
			}
			if closed := m.GetClosed(); closed != nil && closed.GetPosteriors() != c.count {
				t.Errorf("%v %q: %d posteriors, want %d", c.reply, c.batch, closed.GetPosteriors(), c.count)
			}
		}
		if got := strings.Join(heard, " "); got != c.want {
			t.Errorf("%v %q: heard %s, want %s", c.reply, c.batch, got, c.want)
		}
	}
}
