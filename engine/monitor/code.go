package monitor

import (
	"errors"

	"leadline/engine/exact"
)

var (
	_ exact.Coded = (*Monitor)(nil)
	_ exact.Coded = (*sensor)(nil)
	_ exact.Coded = (*chart)(nil)
)

// Code goes through the monitor, for exact copies.
func (m *Monitor) Code(c *exact.Coder) {
	c.Float(&m.everyS)
	m.all.Code(c)
	exact.Slice(c, &m.sensors, 64, func(s *sensor) { s.Code(c) })
	x := &m.impossible
	c.Bool(&x.on)
	c.Value(&x.key)
	c.Int(&x.raised)
	c.Int(&x.last)
	c.Value(&x.since)
	if c.Reading() && !(m.everyS > 0) {
		c.Fail(errors.New("monitor: the time without a false alarm is not positive"))
	}
}

// Code goes through what is kept of a sensor.
func (s *sensor) Code(c *exact.Coder) {
	c.Value(&s.key)
	c.Bool(&s.ofMap)
	c.Int(&s.last)
	c.Float(&s.lastM)
	c.Value(&s.taken)
	c.Float(&s.mean)
	c.Float(&s.meanSquare)
	s.spread.Code(c)
	for i := range s.shift {
		s.shift[i].Code(c)
	}
	c.Value(&s.rows)
	c.Bool(&s.isolated)
	c.Int(&s.isolatedAt)
	c.Value(&s.insistedFor)
	c.Value(&s.witnesses)
	c.Value(&s.clearFor)
	if c.Reading() && (s.rows < 0 || s.rows > 2) {
		c.Fail(errors.New("monitor: a sensor has neither one nor two components"))
	}
}

// Code goes through a chart.
func (x *chart) Code(c *exact.Coder) {
	c.Value(&x.what)
	c.Float(&x.sum)
	c.Float(&x.limit)
	c.Value(&x.taken)
	c.Int(&x.first)
	c.Int(&x.began)
	c.Int(&x.raised)
	c.Bool(&x.alarmed)
	if c.Reading() && (x.what < spread || x.what > low) {
		c.Fail(errors.New("monitor: a chart watches for something unknown"))
	}
}
