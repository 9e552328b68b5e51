package session

import (
	"fmt"
	"slices"

	"leadline/engine/exact"
	"leadline/engine/filter"
	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// A checkpoint is a session in bytes: who restores it goes on as if nothing had
// been, to the same posteriors bit for bit. In the envelope of engine/exact lie the
// map's fingerprint, the vehicle, MaxCells and the session.
//
// A search that is on its way is written as what it is made of, and begins anew.
const checkpointMagic = "LLS1"

// measurements are the kinds of measurements in checkpoints, by number.
var measurements = []sensor.Measurement{
	sensor.Travel{},
	sensor.Turn{},
	sensor.Displacement{},
	sensor.BodyDisplacement{},
	sensor.Speed{},
	sensor.HeadingFix{},
	sensor.Clearance{},
	sensor.Sounding{},
	sensor.Barometer{},
	sensor.Range{},
	sensor.Bearing{},
	sensor.AcousticBearing{},
	sensor.Fix{},
	sensor.Sighting{},
	sensor.Standstill{},
}

// layout is that of this program.
var layout = func() uint64 {
	parts := []any{Session{}, filter.Belief{}, monitor.Monitor{}, summary.Posterior{}, sensor.Event{}}
	for _, m := range measurements {
		parts = append(parts, m)
	}
	return exact.Layout(parts, desk{}, Desks{}, sensor.Motion{}, sensor.Suite{})
}()

// Checkpoint returns the session in bytes.
func (s *Session) Checkpoint() []byte {
	c := exact.Writer()
	s.code(c, nil)
	return exact.Seal(checkpointMagic, layout, c.Bytes())
}

// Restore makes the session of a checkpoint. The configuration must be the one
// that it began with; its start is not used. exact.ErrLayout is the error of
// one of another version; any other says what is wrong.
func Restore(cfg Config, checkpoint []byte) (*Session, error) {
	s, err := prepare(cfg)
	if err != nil {
		return nil, err
	}
	value, err := exact.Open(checkpointMagic, layout, checkpoint)
	if err != nil {
		return nil, fmt.Errorf("session: %w", err)
	}
	c := exact.Reader(value)
	s.state.belief = &filter.Belief{Quantities: s.suite.Quantities(s.dim)}
	if gridded(s.state.belief.Quantities) {
		s.state.belief.Quantities, s.state.belief.Axes = nil, s.state.belief.Quantities
	}
	s.setRates()
	beside := s.state.aside.loose.Quantities
	var found []recipe
	s.code(c, &found)
	if err := c.Done(); err != nil {
		return nil, fmt.Errorf("session: the checkpoint is damaged: %w", err)
	}
	if err := s.sound(beside, len(found)); err != nil {
		return nil, fmt.Errorf("session: the checkpoint is damaged: %w", err)
	}
	s.resume(found)
	return s, nil
}

// recipe is what a search is made of.
type recipe struct {
	Events       []sensor.Event
	Until, Enter sensor.Time
}

// code goes through the session. found gets the recipes of searches where it is
// read; states then name them by their number in searchOf.
func (s *Session) code(c *exact.Coder, found *[]recipe) {
	exact.Kinds(c, measurements)
	fingerprint, vehicle, maxCells := s.space.Fingerprint(), s.vehicle, s.maxCells
	c.Text(&fingerprint)
	c.Text(&vehicle)
	c.Value(&maxCells)
	if c.Err() == nil && (fingerprint != s.space.Fingerprint() || vehicle != s.vehicle || maxCells != s.maxCells) {
		c.Fail(fmt.Errorf("it is of vehicle %q on map %s with %d cells, not of %q on %s with %d", vehicle, fingerprint, maxCells, s.vehicle, s.space.Fingerprint(), s.maxCells))
	}
	var searches []*search
	if !c.Reading() {
		searches = s.searches()
		found = new([]recipe)
		for _, x := range searches {
			*found = append(*found, recipe{x.events, x.until, x.enter})
		}
	}
	c.Value(found)
	s.state.code(c, searches)
	snaps := s.snaps
	if !c.Reading() {
		snaps = s.written()
		if snaps = slices.Clone(snaps); len(snaps) > 0 && snaps[0].seeded() {
			snaps[0].state = s.stateOf(&snaps[0])
		}
	}
	exact.Slice(c, &snaps, 8, func(n *snapshot) {
		c.Value(&n.time)
		c.Bool(&n.hollow)
		if n.hollow {
			c.Uint(&n.processed)
		} else {
			n.state.code(c, searches)
		}
	})
	s.log.code(c)
	before := s.past.all()
	c.Value(&before)
	if c.Reading() {
		s.past = past{}
		s.past.add(before)
	}
	recent, final := s.recent, s.final
	if !c.Reading() && final > 1 { // one says until when what is told is final
		recent, final = recent[final-1:], 1
	}
	c.Value(&recent)
	c.Value(&final)
	c.Value(&s.superseded)
	s.hasher.Code(c)
	exact.Slice(c, &s.leads, 8, func(l *lead) { l.code(c) })
	c.Uint(&s.accepted)
	c.Uint(&s.refused)
	c.Bool(&s.begunOnce)
	c.Value(&s.reached)
	c.Bool(&s.flushed)
	c.Value(&s.flushedAt)
	c.Value(&s.widest)
	if c.Reading() {
		s.snaps, s.recent, s.final = snaps, recent, final
	}
}

// written are the snapshots as a checkpoint has them: all but the first hollow,
// which make most of a session's bytes. Where so many events are held that relieve
// may soon have to give some up, all stay.
func (s *Session) written() []snapshot {
	snaps := slices.Clone(s.snaps)
	if len(s.log.events) > s.maxWaiting/4 {
		return snaps
	}
	for i := 1; i < len(snaps); i++ {
		snaps[i] = snapshot{time: snaps[i].time, state: state{processed: snaps[i].processed}, hollow: true}
	}
	return snaps
}

// searches are those on their way, of the session and of the snapshots that are
// written.
func (s *Session) searches() (out []*search) {
	add := func(x *search) {
		if x != nil && !slices.Contains(out, x) {
			out = append(out, x)
		}
	}
	add(s.state.aside.search)
	for _, n := range s.written() {
		add(n.aside.search)
	}
	return out
}

// resume begins the searches anew that states name by their numbers.
func (s *Session) resume(found []recipe) {
	again := make([]*search, len(found))
	for i, r := range found {
		again[i] = s.search(r.Events, r.Until, r.Enter)
	}
	name := func(a *aside) {
		if a.named > 0 {
			a.search, a.named = again[a.named-1], 0
		}
	}
	name(&s.state.aside)
	for i := range s.snaps {
		name(&s.snaps[i].aside)
	}
}

func (st *state) code(c *exact.Coder, searches []*search) {
	c.Bool(&st.begun)
	c.Value(&st.time)
	c.Value(&st.belief)
	c.Float(&st.logEvidence)
	c.Value(&st.pose)
	c.Float(&st.gapAgeS)
	c.Bool(&st.hasVelocity)
	c.Value(&st.velocity)
	c.Value(&st.bend)
	c.Value(&st.pace.stretches)
	c.Value(&st.speed)
	c.Float(&st.odometerM)
	c.Value(&st.evidence)
	c.Float(&st.gapS)
	c.Value(&st.posteriorAt)
	c.Bool(&st.unread)
	c.Value(&st.posedAt)
	c.Bool(&st.poseDue)
	exact.Slice(c, &st.previous, 12, func(l *lastEvent) {
		l.code(c)
		c.Value(&l.time)
		c.Float(&l.odometerM)
	})
	c.Uint(&st.processed)
	c.Value(&st.stood)
	c.Value(&st.monitor)
	st.aside.code(c, searches)
}

func (a *aside) code(c *exact.Coder, searches []*search) {
	c.Float(&a.off)
	c.Value(&a.loose)
	c.Float(&a.lost)
	c.Float(&a.roadM)
	c.Float(&a.quietS)
	c.Bool(&a.alarm)
	c.Value(&a.woke)
	c.Value(&a.searched)
	c.Value(&a.sure)
	c.Value(&a.tries)
	named := slices.Index(searches, a.search) + 1
	c.Value(&named)
	if c.Reading() {
		a.named = named
	}
}

func (v *voice) code(c *exact.Coder) {
	c.Text(&v.sensor)
	c.Text(&v.kind)
	c.Text(&v.post)
}

func (l *log) code(c *exact.Coder) {
	c.Value(&l.events)
	c.Value(&l.next)
	c.Value(&l.latest)
	c.Bool(&l.heard)
	exact.Slice(c, &l.sources, 3, func(s *source) {
		c.Text(&s.name)
		c.Value(&s.until)
		c.Value(&s.events)
	})
	exact.Slice(c, &l.spoke, 2, func(s *spoken) {
		c.Text(&s.sensor)
		c.Value(&s.latest)
	})
	exact.Slice(c, &l.voices, 3, func(v *voice) { v.code(c) })
}

func (l *lead) code(c *exact.Coder) {
	c.Text(&l.sensor)
	c.Value(&l.held)
	c.Bool(&l.wrong)
	c.Value(&l.spoken)
	c.Value(&l.alone)
	c.Value(&l.from)
	c.Value(&l.until)
	c.Value(&l.since)
}
