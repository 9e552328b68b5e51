package logfile

import (
	"cmp"
	"slices"
	"time"

	"leadline/engine/sensor"
)

// utc puts days to times of day.
type utc struct {
	day   time.Time // stated, of the first time; zero if it is for the log to say
	last  sensor.Time
	known bool
}

const (
	nsPerDay = int64(86400e9)
	// disorder is how far a time may lie before the latest one: two receivers
	// that are not quite at one, or a sentence that comes late.
	disorder = sensor.Time(10e9)
)

// dated takes a time with its date; ok is false if it goes back. A stated day
// goes before what the log says.
func (u *utc) dated(day time.Time, ns int64) (t sensor.Time, ok bool) {
	if !u.day.IsZero() {
		return u.undated(ns)
	}
	t = sensor.Time(day.Unix()*1e9 + ns)
	return t, u.take(t)
}

// undated takes a time of the day. Its day is the one that brings it nearest
// to the latest time, so that midnight may pass between the two; ok is false
// if no day is known yet, and if it goes back.
func (u *utc) undated(ns int64) (t sensor.Time, ok bool) {
	switch {
	case u.known:
		t = u.last - u.last%sensor.Time(nsPerDay) + sensor.Time(ns)
		if t-u.last > sensor.Time(nsPerDay/2) {
			t -= sensor.Time(nsPerDay)
		} else if u.last-t > sensor.Time(nsPerDay/2) {
			t += sensor.Time(nsPerDay)
		}
	case !u.day.IsZero():
		t = sensor.Time(u.day.Unix()*1e9 + ns)
	default:
		return 0, false
	}
	return t, u.take(t)
}

func (u *utc) take(t sensor.Time) bool {
	if t < 0 || u.known && t < u.last-disorder {
		return false
	}
	u.last, u.known = max(u.last, t), true
	return true
}

// reading is what one sentence says of one quantity.
type reading struct {
	of      quantity
	address string // as HEHDT
	at      sensor.Time
	timed   bool // at is its own and not the epoch's
	place   place

	v float64 // metres, degrees, °/min, m/s; of a speed along the keel or over ground
	// extra is what may come beside v, if has: a transducer's depth in metres, a
	// speed's component to starboard, or its course in degrees, a fix's height.
	extra float64
	has   bool

	body     bool // a speed is in the craft's axes
	magnetic bool // a heading is measured from magnetic north,
	reduce   bool // and without the variation
	lon, lat float64
	sigmaM   float64 // of a fix
}

// epochs gives readings without a time of their own the time of the latest
// sentence with one. Of n readings of one sentence before the next time the
// k-th gets k/n of the time until then, so that a compass that speaks ten
// times as often as the clock turns smoothly.
type epochs struct {
	begun   bool
	from    sensor.Time
	length  sensor.Time // of the last whole one
	pending []reading
}

// maxPending bounds the readings of one epoch: an hour at 50 Hz.
const maxPending = 180_000

// mostEpoch is the longest time over which readings without a time of their own are
// spread: beyond, the log paused or a clock jumped, and the epoch is taken to be as long
// as the one before it.
const mostEpoch = sensor.Time(3600e9)

// add keeps a reading; false if there are too many.
func (e *epochs) add(r reading) bool {
	if len(e.pending) >= maxPending {
		return false
	}
	e.pending = append(e.pending, r)
	return true
}

// begin begins an epoch and returns the readings of the one before, in order
// of time; headings come before what is reckoned with them. The slice is
// valid until the next add.
func (e *epochs) begin(at sensor.Time) []reading {
	if !e.begun {
		e.begun, e.from = true, at
		return nil
	}
	var out []reading
	if at-e.from > mostEpoch {
		out = e.end()
	} else {
		e.length = at - e.from
		out = e.close(at)
	}
	e.from = at
	return out
}

// end returns what is left; the last epoch is taken to be as long as the one
// before it.
func (e *epochs) end() []reading {
	if e.length == 0 {
		e.length = 1e9
	}
	return e.close(e.from + e.length)
}

func (e *epochs) close(to sensor.Time) []reading {
	count, k := map[string]int{}, map[string]int{}
	for _, r := range e.pending {
		count[r.key()]++
	}
	for i := range e.pending {
		r := &e.pending[i]
		if !r.timed {
			n := sensor.Time(count[r.key()])
			r.at = e.from + (to-e.from)/n*sensor.Time(k[r.key()])
			k[r.key()]++
		}
	}
	slices.SortStableFunc(e.pending, func(a, b reading) int {
		return cmp.Or(cmp.Compare(a.at, b.at), headingsFirst(a, b))
	})
	out := e.pending
	e.pending = e.pending[:0]
	return out
}

// key tells the readings of one sentence apart from those of another.
func (r *reading) key() string { return r.address + string(rune('0'+r.of)) }
