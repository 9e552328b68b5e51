package server

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/geo"
	"leadline/engine/sensor"
	"leadline/engine/study/track"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Bounds of what is told of a result.
const (
	maxMoments      = 4096
	maxResultAlarms = 1000
)

// moments thins a run's rows as they come: each stands for every of them, and is
// the worst of those.
type moments struct {
	rows  []track.Row
	every int // rows that one stands for
	in    int // rows that the last one stands for so far
}

// badness of a row: its error, or its radius where that is not known.
func badness(r *track.Row) float64 {
	if !math.IsNaN(r.ErrorM) {
		return r.ErrorM
	}
	return r.Radius95M
}

func worse(a, b track.Row) track.Row {
	if badness(&b) > badness(&a) {
		return b
	}
	return a
}

// add takes the next row, or says why it can be none of a run.
func (m *moments) add(r track.Row) error {
	degrees := func(p geo.LonLat) bool {
		return math.Abs(p.Lon) <= 2*math.Pi && math.Abs(p.Lat) <= math.Pi/2
	}
	switch {
	case !degrees(r.At) || !(r.Radius95M >= 0) || math.IsInf(r.Radius95M, 0):
		return fmt.Errorf("%s has a row without a place and a radius: make it again with `leadline replay --out`", wire.FromTime(sensor.Time(r.TimeNS)).AsTime())
	case !math.IsNaN(r.ErrorM) && (!degrees(r.Truth) || math.IsInf(r.ErrorM, 0)):
		return errors.New("a row has an error and no truth: make the table again with `leadline replay --out`")
	case len(m.rows) > 0 && r.TimeNS < m.rows[len(m.rows)-1].TimeNS && m.in == m.every:
		return errors.New("the table goes back in time: make it again with `leadline replay --out`")
	}
	m.every = max(m.every, 1)
	if len(m.rows) > 0 && m.in < m.every {
		m.in++
		m.rows[len(m.rows)-1] = worse(m.rows[len(m.rows)-1], r)
		return nil
	}
	if len(m.rows) == maxMoments {
		for i := range maxMoments / 2 {
			m.rows[i] = worse(m.rows[2*i], m.rows[2*i+1])
		}
		m.rows = m.rows[:maxMoments/2]
		m.every *= 2
	}
	m.rows, m.in = append(m.rows, r), 1
	return nil
}

func (m *moments) messages() (out []*leadlinev1.ResultMoment) {
	optional := func(v float64) *float64 {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil
		}
		return &v
	}
	for _, r := range m.rows {
		x := &leadlinev1.ResultMoment{
			Time: wire.FromTime(sensor.Time(r.TimeNS)), Status: clip(r.Status), Position: wire.FromPosition(r.At), Radius95M: r.Radius95M,
			ProtectionM: optional(r.ProtectionM), ErrorM: optional(r.ErrorM),
		}
		if x.ErrorM != nil {
			x.Truth = wire.FromPosition(r.Truth)
		}
		out = append(out, x)
	}
	return out
}

// heldAlarms finds from when to when alarms held.
type heldAlarms struct {
	messages []*leadlinev1.ResultAlarm
	open     []*leadlinev1.ResultAlarm
}

func (h *heldAlarms) add(r track.Row) {
	at := wire.FromTime(sensor.Time(r.TimeNS))
	h.open = slices.DeleteFunc(h.open, func(a *leadlinev1.ResultAlarm) bool {
		over := !slices.Contains(r.Alarms, a.GetWhat())
		if over {
			a.Cleared = at
		}
		return over
	})
	for _, what := range r.Alarms {
		if len(h.messages) == maxResultAlarms || slices.ContainsFunc(h.open, func(a *leadlinev1.ResultAlarm) bool { return a.GetWhat() == what }) {
			continue
		}
		a := &leadlinev1.ResultAlarm{Raised: at, What: what}
		h.messages, h.open = append(h.messages, a), append(h.open, a)
	}
}
