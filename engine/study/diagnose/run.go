package diagnose

import (
	"errors"
	"math"
	"slices"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/summary"
)

// run replays the opening of a log with one mistake undone.
type run struct {
	mistake *Mistake
	suite   *sensor.Suite
	events  []sensor.Event // mended, in the order in which the session takes them
	next    int
	s       *session.Session
	log     Record
	refused float64 // nats of measurements that were refused
	motions int     // refused ones
	begun   bool    // something was mended: until then it is the log as it stands
	// refusedOf counts what was refused, by sensor in the order of the first.
	refusedOf []refusedSensor
	outcomes  outcomes
	latest    *summary.Posterior // when it has left
}

type refusedSensor struct {
	sensor string
	n      int
}

func (r *run) refuse(name string) {
	i := slices.IndexFunc(r.refusedOf, func(o refusedSensor) bool { return o.sensor == name })
	if i < 0 {
		i = len(r.refusedOf)
		r.refusedOf = append(r.refusedOf, refusedSensor{sensor: name})
	}
	r.refusedOf[i].n++
}

// newRun prepares a run; config's session is made when it begins.
func newRun(c session.Config, suite *sensor.Suite, events []sensor.Event, m *Mistake) (*run, error) {
	s, err := session.New(c)
	if err != nil {
		return nil, err
	}
	r := &run{mistake: m, suite: suite, s: s, log: Record{mistake: m}}
	r.events = make([]sensor.Event, len(events))
	for i, ev := range events {
		r.events[i] = m.undo(ev)
	}
	slices.SortStableFunc(r.events, func(a, b sensor.Event) int {
		a.Time, b.Time = r.at(a), r.at(b)
		return a.Compare(b)
	})
	s.Watch(r.log.Add)
	return r, nil
}

// at is an event's time with the suite's offset taken off.
func (r *run) at(ev sensor.Event) sensor.Time {
	return ev.Time - sensor.Time(math.Round(r.suite.Sensor(ev.Sensor, ev.Measurement.Kind()).TimeOffsetS*1e9))
}

// advance runs up to a time, what is there then included, or to the end, or
// until it has taken more work than most, or stop gives an error.
func (r *run) advance(until sensor.Time, end bool, most float64, stop func() error) error {
	for ; r.next < len(r.events) && (end || r.at(r.events[r.next]) <= until); r.next++ {
		if r.log.work > most {
			return errCostly
		}
		if err := stop(); err != nil {
			return err
		}
		ev := r.events[r.next]
		r.begun = r.begun || r.mistake.of != nil && r.mistake.of(ev.Sensor, ev.Measurement.Kind())
		ps, err := r.s.Add(ev)
		r.outcomes.take(ps, r.s.Withdrawn())
		var ref *session.Refusal
		switch {
		case err == nil:
		case !errors.As(err, &ref):
			return err
		default:
			r.refuse(ev.Sensor)
			if sensor.IsMotion(ev.Measurement.Kind()) {
				r.motions++
			} else {
				r.refused += floorNats
			}
		}
	}
	ps := r.s.Flush()
	r.outcomes.take(ps, r.s.Withdrawn())
	return nil
}

// nats is the log evidence so far.
func (r *run) nats() float64 { return r.refused + r.log.nats() }
