package session

import (
	"fmt"
	"slices"
	"strings"

	"leadline/engine/sensor"
)

// A session has no clock: what time it is follows from what the sensors say. One
// whose clock is ahead would carry the vehicle to its own time, and what the
// others measure would then be too late, for as long as the clock is ahead. So a
// sensor may lead all others by maxLeadS. What begins later than that is held
// back, if another sensor was heard in the last lonelyS before,
//
//   - until another sensor comes as far: there was a pause, and all goes on;
//   - until it has spoken for lonelyS while the others are silent: it is alone;
//   - until another one goes on where the session is: then its clock is wrong, and
//     what was held is dropped and counts as refused. What it says is then
//     refused until one of the first two holds.
//
// A minute is more than the spacing of what vehicles send while they drive, and
// little of a drive to lose.
const (
	maxLeadS = 60.0
	lonelyS  = 10.0
	maxHeld  = 4096 // with these it has spoken for long enough, too
)

// lead is what one sensor says of a time that no other has come near.
type lead struct {
	sensor string
	held   []sensor.Event // not in the log yet, in order of arrival
	// wrong says that another sensor has gone on where the session is.
	wrong bool
	// spoken is how many events there were since then, from and until their
	// times, alone how many since another sensor was heard and since the first
	// of them.
	spoken, alone      int
	from, until, since sensor.Time
}

// begins is the time from which on an event speaks.
func begins(ev sensor.Event) sensor.Time {
	if since, ok := sensor.Since(ev.Measurement); ok {
		return since
	}
	return ev.Time
}

// isAhead reports whether an event is too far ahead to be taken as it comes.
func (s *Session) isAhead(ev sensor.Event) bool {
	return s.log.heard && begins(ev).Seconds(s.log.latest) > maxLeadS
}

// lead returns the events to be taken now that one has come that is ahead: none
// where it is held back, else it and what was held.
func (s *Session) lead(ev sensor.Event) ([]sensor.Event, error) {
	own := -1
	for i := range s.leads {
		l := &s.leads[i]
		switch {
		case l.sensor == ev.Sensor:
			own = i
		case l.spoken > 0 && begins(ev).Seconds(l.until) <= maxLeadS && l.from.Seconds(ev.Time) <= maxLeadS:
			return s.letGo(ev, l.sensor), nil // two agree
		default:
			l.alone = 0
		}
	}
	if own < 0 {
		if !s.othersAlive(ev.Sensor) {
			return []sensor.Event{ev}, nil
		}
		own = len(s.leads)
		s.leads = append(s.leads, lead{sensor: ev.Sensor})
	}
	l := &s.leads[own]
	if l.spoken == 0 {
		l.from, l.until = ev.Time, ev.Time
	}
	if l.alone == 0 {
		l.since = ev.Time
	}
	l.spoken++
	l.alone++
	l.from, l.until = min(l.from, ev.Time), max(l.until, ev.Time)
	if ev.Time.Seconds(l.since) >= lonelyS || l.alone > maxHeld {
		return s.letGo(ev, ev.Sensor), nil
	}
	if l.wrong {
		return nil, &Refusal{TooEarly, fmt.Sprintf("sensor %q is %.0f s ahead of all the others, and %.0f are allowed: check its clock (it is taken when another sensor comes as far, or none is heard for %.0f s)",
			ev.Sensor, begins(ev).Seconds(s.log.latest), maxLeadS, lonelyS)}
	}
	l.held = append(l.held, ev)
	return nil, nil
}

// letGo returns what is held of an event's sensor and another one, with the
// event.
func (s *Session) letGo(ev sensor.Event, other string) []sensor.Event {
	all := []sensor.Event{ev}
	s.leads = slices.DeleteFunc(s.leads, func(l lead) bool {
		if l.sensor != ev.Sensor && l.sensor != other {
			return false
		}
		all = append(all, l.held...)
		return true
	})
	return all
}

// letAllGo returns what is held.
func (s *Session) letAllGo() (all []sensor.Event) {
	for _, l := range s.leads {
		all = append(all, l.held...)
	}
	s.leads = nil
	return all
}

// goOn takes note that a sensor goes on where the session is: those that led are
// wrong, and one that led itself has come back.
func (s *Session) goOn(name string) {
	s.leads = slices.DeleteFunc(s.leads, func(l lead) bool {
		s.retract(len(l.held))
		return l.sensor == name
	})
	for i := range s.leads {
		s.leads[i] = lead{sensor: s.leads[i].sensor, wrong: true}
	}
}

// retract counts events that were accepted as refused.
func (s *Session) retract(n int) {
	s.accepted -= uint64(n)
	s.refused += uint64(n)
}

// precede looks at an event that comes before the first time is computed and is
// much earlier than what is there. One sensor that is ahead of it leads, and what
// it sent is dropped; if there are two, the event is late.
func (s *Session) precede(ev sensor.Event) error {
	if s.state.begun || s.log.latest.Seconds(ev.Time) <= maxLeadS {
		return nil
	}
	var ahead string
	for _, o := range s.log.spoke {
		switch {
		case o.sensor == ev.Sensor || o.latest.Seconds(ev.Time) <= maxLeadS:
		case ahead != "":
			return &Refusal{TooLate, fmt.Sprintf("sensor %q is %.0f s behind all the others: check its clock", ev.Sensor, s.log.latest.Seconds(ev.Time))}
		default:
			ahead = o.sensor
		}
	}
	if ahead == "" {
		return nil // its own events came out of order
	}
	kept := slices.Clone(s.log.events)
	kept = slices.DeleteFunc(kept, func(e sensor.Event) bool {
		return e.Sensor == ahead && begins(e).Seconds(ev.Time) > maxLeadS
	})
	s.retract(len(s.log.events) - len(kept))
	s.log = log{}
	for i, e := range kept {
		s.log.insert(i, e, s.suite)
	}
	s.leads = append(slices.DeleteFunc(s.leads, func(l lead) bool { return l.sensor == ahead }), lead{sensor: ahead, wrong: true})
	return nil
}

// othersAlive reports whether another sensor was heard in the last lonelyS.
func (s *Session) othersAlive(name string) bool {
	for _, o := range s.log.spoke {
		if o.sensor != name && s.log.latest.Seconds(o.latest) <= lonelyS {
			return true
		}
	}
	return false
}

// spoken is when a sensor was last heard.
type spoken struct {
	sensor string
	latest sensor.Time
}

// hear keeps when a sensor spoke.
func (l *log) hear(ev sensor.Event) {
	i, found := slices.BinarySearchFunc(l.spoke, ev.Sensor, func(s spoken, n string) int { return strings.Compare(s.sensor, n) })
	if !found {
		l.spoke = slices.Insert(l.spoke, i, spoken{ev.Sensor, ev.Time})
	}
	l.spoke[i].latest = max(l.spoke[i].latest, ev.Time)
}
