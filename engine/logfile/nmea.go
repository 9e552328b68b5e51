package logfile

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"

	"leadline/engine/sensor"
)

// NMEA makes records of NMEA 0183 lines. One goroutine may use it.
type NMEA struct {
	o         *Sentences
	emit      Emit
	tally     *Tally
	sentences int // framed ones, good or bad
	prefix    timeParser

	place  place
	utc    utc
	epochs epochs
	chosen [quantities]source

	rate    rateState
	head    headState
	motion  motionState
	tracked sensor.Time // when a speed over ground was last reckoned with
}

// source is the sentence that gives a quantity.
type source struct {
	address string
	rank    int
	last    sensor.Time
}

type rateState struct {
	begun bool
	at    sensor.Time
	dpm   float64
}

type headState struct {
	known    bool
	at       sensor.Time
	rad      float64
	sigmaRad float64
}

// NewNMEA reads lines by what o says, which must be valid; name is the log's
// in places.
func NewNMEA(name string, o *Sentences, emit Emit) *NMEA {
	n := &NMEA{o: o, emit: emit, tally: newTally(name)}
	if o.Time.From == FromPrefix {
		n.prefix, _ = o.Time.compile()
	}
	if o.Time.Date != "" {
		n.utc.day, _ = parseDate(o.Time.Date)
	}
	return n
}

// ReadNMEA reads a whole log. The error is one of the reader, of emit, or says
// that no line could be given a time.
func ReadNMEA(r io.Reader, name string, o *Sentences, emit Emit) (*Tally, error) {
	if o.Time.From == FromArrival {
		return newTally(name), fmt.Errorf("%s: nobody knows when its sentences arrived: take the times from sentence, prefix or tag", name)
	}
	n := NewNMEA(name, o, emit)
	lines := NewLines(r, MaxSentenceLine)
	for {
		line, whole, err := lines.Next()
		if errors.Is(err, io.EOF) {
			err = n.End()
			return n.Tally(), err
		}
		if err != nil {
			return n.Tally(), fmt.Errorf("%s:%d: %w", name, n.place.line+1, err)
		}
		if err := n.Line(line, whole, 0); err != nil {
			return n.Tally(), err
		}
	}
}

// Tally returns what became of the lines so far.
func (n *NMEA) Tally() *Tally { return n.tally.Sum() }

// Line takes the next line. whole is false for the beginning of one that was
// longer than MaxSentenceLine; arrived is used where times are those of
// arrival. The error is that of Emit alone.
func (n *NMEA) Line(line []byte, whole bool, arrived sensor.Time) error {
	n.tally.Lines++
	n.place = place{n.tally.Lines, 1}
	if !whole {
		n.refuse(&refusal{1, "a line that is too long", fmt.Sprintf("over %d bytes: %.40q", MaxSentenceLine, line)})
		return nil
	}
	s, pass, bad := frame(line)
	if bad != nil || pass == "" {
		n.sentences++
	}
	if i := bytes.IndexByte(s.before, '$'); i >= 0 {
		n.refuse(&refusal{i + 1, "cut off by the next sentence", string(s.before[i:])})
	}
	switch {
	case bad != nil:
		n.refuse(bad)
		return nil
	case pass != "":
		n.tally.pass(string(pass))
		return nil
	}
	said, used, bad := s.read()
	switch {
	case bad != nil:
		n.refuse(bad)
		return nil
	case !used:
		n.tally.pass(s.kind())
		return nil
	case said.void:
		n.tally.pass(s.kind() + " without a value")
	}
	switch n.o.Time.From {
	case "", FromSentence:
		return n.bySentence(&s, &said)
	case FromPrefix:
		text := strings.Trim(string(s.before), " \t,;|[]")
		at, err := n.prefix(text)
		if err != nil {
			n.refuse(&refusal{1, "the time before the sentence", fmt.Sprintf("%.40q: %v", text, err)})
			return nil
		}
		return n.all(said.readings, at)
	case FromTag:
		at, there, err := tagTime(s.before)
		switch {
		case err != nil:
			n.refuse(&refusal{1, "tag block", fmt.Sprintf("%.60q: %v", s.before, err)})
			return nil
		case there:
			n.utc.last, n.utc.known = at, true
		case !n.utc.known:
			n.tally.pass("before the first time")
			return nil
		}
		return n.all(said.readings, n.utc.last)
	}
	return n.all(said.readings, arrived)
}

// End hands on what waits for the time to go on. Nothing may follow.
func (n *NMEA) End() error {
	if n.epochs.begun {
		if err := n.use(n.epochs.end()); err != nil {
			return err
		}
	}
	if err := n.unsummed(); err != nil {
		return err
	}
	if from := n.o.Time.From; (from == "" || from == FromSentence) && !n.utc.known {
		return fmt.Errorf("%s: no sentence says the time and the date (ZDA, or RMC with a fix): state the date, or take the times from a prefix or a tag", n.tally.Log)
	}
	return nil
}

// unsummed is the error of a log of which nothing can be used since most of its
// sentences lack their checksum or have a wrong one.
func (n *NMEA) unsummed() error {
	if n.tally.Usable() > 0 || n.tally.Truths > 0 {
		return nil
	}
	for _, c := range []struct{ reason, what, remedy string }{
		{noChecksum, "have no checksum", "one without it may be damaged and is not used; have what writes the log keep the two digits after the *"},
		{wrongChecksum, "have another checksum than their text", "they were damaged or changed on the way and are not used; have what writes the log leave each sentence as it came"},
	} {
		if r := n.tally.reasons[c.reason]; r != nil && 2*r.Count > n.sentences {
			return fmt.Errorf("%s: %d of %d sentences %s, first %s: %s", n.tally.Log, r.Count, n.sentences, c.what, r.First[0], c.remedy)
		}
	}
	return nil
}

func (n *NMEA) refuse(r *refusal) {
	n.tally.refuse(place{n.place.line, r.byte}, r.reason, r.detail)
}

// all uses readings that have one time.
func (n *NMEA) all(rs []reading, at sensor.Time) error {
	for i := range rs {
		rs[i].at, rs[i].place = at, n.place
	}
	slices.SortStableFunc(rs, headingsFirst)
	return n.use(rs)
}

// headingsFirst orders readings of one time: others are reckoned with a heading.
func headingsFirst(a, b reading) int {
	switch {
	case a.of == heading && b.of != heading:
		return -1
	case b.of == heading && a.of != heading:
		return 1
	}
	return 0
}

// bySentence gives readings the time that the sentence says, or the epoch's.
func (n *NMEA) bySentence(s *sentence, said *said) error {
	var at sensor.Time
	if said.hasTime {
		if !said.trust && !n.utc.known && n.utc.day.IsZero() {
			n.tally.pass(s.kind() + " before the receiver knows the time")
			return nil
		}
		var ok bool
		if said.day.IsZero() {
			at, ok = n.utc.undated(said.ns)
		} else {
			at, ok = n.utc.dated(said.day, said.ns)
		}
		if !ok {
			if !n.utc.known {
				n.tally.pass("before the first date")
			} else {
				n.refuse(&refusal{1, s.kind() + ": its time goes back", fmt.Sprintf("%s after %s", stamp(at), stamp(n.utc.last))})
			}
			return nil
		}
		if !n.epochs.begun || at > n.epochs.from {
			if err := n.use(n.epochs.begin(at)); err != nil {
				return err
			}
		}
	}
	for _, r := range said.readings {
		if r.timed && !said.hasTime {
			n.tally.pass(s.kind() + " without a time")
			continue
		}
		if !n.epochs.begun {
			n.tally.pass("before the first time")
			continue
		}
		if r.timed {
			r.at = at
		}
		r.place = n.place
		if !n.epochs.add(r) {
			n.refuse(&refusal{1, "too long without a time", fmt.Sprintf("%d readings wait for the next ZDA, RMC, GGA or GLL", maxPending)})
		}
	}
	return nil
}

// use takes readings whose times are known, in their order.
func (n *NMEA) use(rs []reading) error {
	for i := range rs {
		r := &rs[i]
		n.place = r.place
		if !n.choose(r) {
			continue
		}
		if err := n.record(r); err != nil {
			return err
		}
	}
	return nil
}

// fallback is how long the sentence that gives a quantity may be silent
// before another one takes its place.
const fallback = sensor.Time(5e9)

// choose says whether a reading is the one to use for its quantity. A better
// sentence takes over from its next reading on, since this one says what the
// one before has just said.
func (n *NMEA) choose(r *reading) bool {
	kind := r.address[2:]
	name := quantityTable[r.of].name
	if !n.o.uses(r.of) {
		n.tally.pass(kind + ": " + name + " is not used")
		return false
	}
	if n.o.Satellites != "" && n.o.Satellites != SatellitesFix && r.of == groundSpeed && !r.body {
		n.tally.pass(kind + ": " + name + " of satellites")
		return false
	}
	rank := slices.IndexFunc(n.o.from(r.of), func(f string) bool { return f == kind || f == r.address })
	if rank < 0 {
		n.tally.pass(kind + ": not asked for " + name)
		return false
	}
	c := &n.chosen[r.of]
	switch fresh := c.address != "" && r.at-c.last <= fallback; {
	case c.address == r.address, !fresh:
		*c = source{r.address, rank, max(r.at, c.last)}
		return true
	case rank < c.rank:
		*c = source{r.address, rank, c.last}
	}
	n.tally.pass(kind + ": another sentence gives " + name)
	return false
}
