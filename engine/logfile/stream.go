package logfile

import (
	"fmt"
	"math"

	"leadline/engine/sensor"
)

// stream is one sensor of a table, or its truth, and what must be known of
// its rows so far to make increments.
type stream struct {
	def    *SensorColumns
	fields []boundField
	when   int // column, or -1
	since  int // column, or -1
	length *boundField
	maxGap sensor.Time
	diff   bool // increments begin at the row before

	begun bool
	last  sensor.Time // of the row before
}

// boundField is a field with the column that it comes from.
type boundField struct {
	fieldKind
	def    Field
	column int // -1: a constant
	conv   conversion

	before  float64 // counter or rate of the row before
	pending float64 // increments of rows at one time
}

func (t *table) stream(def *SensorColumns) (*stream, error) {
	s := &stream{def: def, when: -1, since: -1, maxGap: 10e9, diff: def.Since == "" && def.Interval == nil}
	counters := true
	for _, k := range kindTable[def.Kind] { // in this order, so that runs agree
		f, there := def.Fields[k.name]
		if !there {
			continue
		}
		b, err := t.field(f, k)
		if err != nil {
			return nil, err
		}
		s.fields = append(s.fields, *b)
		counters = counters && (k.role != increment || f.Counter)
	}
	if counters {
		s.maxGap = 86400e9
	}
	if def.MaxGapS != 0 {
		s.maxGap = sensor.Time(math.Round(def.MaxGapS * 1e9))
	}
	var err error
	if def.When != nil {
		if s.when, err = t.index(def.When.Column); err != nil {
			return nil, err
		}
	}
	if def.Since != "" {
		if s.since, err = t.index(def.Since); err != nil {
			return nil, err
		}
	}
	if def.Interval != nil {
		if s.length, err = t.field(*def.Interval, fieldKind{"interval", duration, value}); err != nil {
			return nil, err
		}
	}
	return s, nil
}

func (t *table) field(f Field, k fieldKind) (*boundField, error) {
	b := &boundField{fieldKind: k, def: f, column: -1, conv: f.conversion()}
	if f.Column != "" {
		var err error
		if b.column, err = t.index(f.Column); err != nil {
			return nil, err
		}
	}
	return b, nil
}

// take makes the sensor's record of the row, if there is one in it.
func (s *stream) take(t *table, at sensor.Time) (r Record, ok bool) {
	if s.when >= 0 && string(t.row[s.when].text) != s.def.When.Equals {
		return r, false
	}
	c, ok := s.cells(t)
	if !ok {
		return r, false
	}
	first := t.row[0].byte
	for _, f := range s.fields {
		if f.column >= 0 {
			first = t.row[f.column].byte
			break
		}
	}
	refuse := func(reason, detail string) (Record, bool) {
		t.refuse(first, reason+": "+s.def.name(), detail)
		return Record{}, false
	}
	if s.def.Kind == kindTruth {
		tr, err := truth(c, at)
		if err != nil {
			return refuse("unusable", err.Error())
		}
		return Record{Truth: tr}, true
	}
	since := at
	if s.incremental() {
		var reason, detail string
		if since, reason, detail = s.increments(t, c, at); reason != "" {
			return refuse(reason, detail)
		} else if since == at {
			return r, false
		}
	}
	m, err := measurement(s.def.Kind, c, since, at)
	if err != nil {
		return refuse("unusable", err.Error())
	}
	return Record{Event: &sensor.Event{Time: at, Sensor: s.def.name(), Number: uint64(t.line), Measurement: m}}, true
}

func (s *stream) incremental() bool {
	for _, f := range s.fields {
		if f.role == increment {
			return true
		}
	}
	return false
}

// cells reads the fields of a row. A row with none of the columns that a
// measurement needs holds no measurement; one with some of them is refused.
// Increments are left as they stand, in their column's unit if they are
// counters.
func (s *stream) cells(t *table) (c *cells, ok bool) {
	c = &cells{num: map[string]float64{}, name: map[string]string{}}
	absent, there := "", false
	bad := false
	for i := range s.fields {
		f := &s.fields[i]
		var missing, wrong bool
		switch {
		case textFields[f.name] && f.column < 0:
			c.name[f.name] = f.def.Text
		case textFields[f.name]:
			var word string
			if word, missing, wrong = t.word(f.column, f.name); !missing {
				c.name[f.name] = word
			}
		default:
			var v float64
			if v, missing, wrong = f.read(t); !missing {
				c.num[f.name] = v
			}
		}
		bad = bad || wrong
		if f.column >= 0 && f.role != option && f.role != sigma {
			there = there || !missing
			if missing {
				absent = f.name
			}
		}
	}
	switch {
	case bad:
		return nil, false
	case absent != "" && there:
		t.refuse(t.row[0].byte, "incomplete: "+s.def.name(), absent+" is missing in this row")
		return nil, false
	case absent != "":
		return nil, false
	}
	return c, true
}

// read returns the value of a field in a row, in its own unit, but of a counter
// in the column's. missing is a cell that holds nothing, bad was refused.
func (f *boundField) read(t *table) (v float64, missing, bad bool) {
	if f.column < 0 {
		return f.conv.of(*f.def.Value), false, false
	}
	if v, missing, bad = t.number(f.column, f.name); !f.def.Counter {
		v = f.conv.of(v)
	}
	return v, missing, bad
}

// increments turns the cells of increments into what happened since the time
// that it returns: at itself if that is not known yet. A reason says that the
// row is refused.
func (s *stream) increments(t *table, c *cells, at sensor.Time) (since sensor.Time, reason, detail string) {
	switch {
	case s.since >= 0:
		from, ok := t.time([]int{s.since})
		if !ok {
			return at, "", "" // it was refused
		}
		if since = from; since >= at {
			return at, "since is not before the time", fmt.Sprintf("%s and %s", stamp(since), stamp(at))
		}
	case s.length != nil:
		v, missing, bad := s.length.read(t)
		if bad {
			return at, "", "" // it was refused
		}
		if missing {
			return at, "no interval", "the cell is empty"
		}
		if !(v > 0 && v <= 86400) {
			return at, "interval", fmt.Sprintf("%v s: it must be above 0 and at most a day", v)
		}
		since = at - sensor.Time(math.Round(v*1e9))
	case !s.begun:
		s.begin(c, at)
		t.tally.pass("first of " + s.def.name())
		return at, "", ""
	default:
		since = s.last
	}
	if s.diff {
		switch dt := at - since; {
		case dt < 0:
			return at, "time goes back", fmt.Sprintf("%s after %s", stamp(at), stamp(since))
		case dt == 0:
			s.hold(c)
			return at, "", ""
		case dt > s.maxGap:
			s.begin(c, at)
			t.tally.pass("after a gap: " + s.def.name())
			return at, "", ""
		}
	}
	dt := at.Seconds(since)
	made := make([]float64, len(s.fields))
	for i := range s.fields {
		f := &s.fields[i]
		if f.role != increment {
			continue
		}
		var can bool
		if made[i], can = f.increment(c.num[f.name], dt); !can {
			detail = fmt.Sprintf("%s moves by %v in %v s", f.name, made[i], dt)
			s.begin(c, at)
			if !f.def.Counter {
				return at, "more than moves in a step", detail + ": if its column goes on from row to row, say counter: true"
			}
			return at, "counter jumps", detail
		}
	}
	for i := range s.fields {
		if f := &s.fields[i]; f.role == increment {
			f.before, c.num[f.name] = c.num[f.name], made[i]
		}
	}
	s.begun, s.last = true, at
	return since, "", ""
}

// begin makes a row the one that increments count from.
func (s *stream) begin(c *cells, at sensor.Time) {
	s.begun, s.last = true, at
	for i := range s.fields {
		f := &s.fields[i]
		f.before, f.pending = c.num[f.name], 0
	}
}

// hold keeps what a row brings at the time of the row before it: a plain
// increment is added to the next; counters and rates need nothing.
func (s *stream) hold(c *cells) {
	for i := range s.fields {
		f := &s.fields[i]
		if f.role == increment && !f.def.Counter && f.def.Rate == "" {
			f.pending += c.num[f.name]
		}
	}
}

// tooMuch is how many times what a counter may bring no plain increment does:
// 1500 m in a second, and 20 turns.
const tooMuch = 10

// increment is what happened in dt seconds, in the field's own unit; false if
// a counter moved by more than it can, or a plain increment by tooMuch times that,
// as what counts up does when it is read as increments.
func (f *boundField) increment(v, dt float64) (float64, bool) {
	switch {
	case f.def.Counter:
		d := v - f.before
		if w := f.def.Wrap; w != 0 {
			d -= w * math.Round(d/w)
		}
		d = f.conv.of(d)
		return d, math.Abs(d) <= f.def.maxRate(f.of)*math.Max(dt, 1)
	case f.def.Rate == rateInterval:
		return v * dt, true
	case f.def.Rate == rateInstant:
		return 0.5 * (f.before + v) * dt, true
	}
	v += f.pending
	f.pending = 0
	return v, math.Abs(v) <= tooMuch*f.def.maxRate(f.of)*math.Max(dt, 1)
}
