package session

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/monitor"
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// Config is what a session is made of.
type Config struct {
	Vehicle string
	// Space is the map; Names names its roads (nil on a plane).
	Space filter.Space
	Names Names
	// Suite describes the sensors; nil is the default for the space.
	Suite *sensor.Suite
	Start Start
	// MaxCells bounds the Gaussians of the belief; 0 is 200 000. A plane
	// without quantities may have eight times as many cells (PointsPerGaussian).
	// It decides the resolution of a wide start, and so belongs to what a
	// posterior depends on.
	MaxCells int
	// PosteriorS has posteriors come at most so often, in seconds of the events'
	// time; 0 is one for each time. The belief is the same.
	PosteriorS float64
	// Begin, if set, begins a piece of work elsewhere, which touches nothing that
	// anybody else has, and returns what waits for its end; nil has it done when
	// its end is waited for. See search.go.
	Begin func(work func()) (wait func())
	// Desks, if set, is what the session works with, beside others. Who has it rests
	// it (Rest) after each piece of work.
	Desks *Desks
	// Unguarded has the measurements of isolated sensors used, too: for studies
	// that compare the evidence of suites of which some are wrong. What is isolated
	// would be left out of the sum, and the worst suite have the least to answer for.
	Unguarded bool
}

// MaxPosteriorS bounds Config.PosteriorS.
const MaxPosteriorS = 3600

// Names is what a road map knows about its directed edges.
type Names interface {
	summary.Names
	sensor.Named
}

// StartKind says how much is known at the start.
type StartKind int

// The kinds of start.
const (
	Anywhere StartKind = iota // on the map
	AtPoint                   // around Point with SigmaM
	InArea                    // within the polygon Area
)

// Start is what is known of the vehicle's place at the start.
type Start struct {
	Kind   StartKind
	Point  geo.LonLat
	SigmaM float64
	Area   [][]geo.LonLat // exterior ring, then holes
}

// maxRing bounds the corners of a start's area.
const maxRing = 10000

// Check reports a start that no map could use.
func (s Start) Check() error {
	switch s.Kind {
	case Anywhere:
		return nil
	case AtPoint:
		if err := s.Point.Check(); err != nil {
			return fmt.Errorf("start: %w", err)
		}
		if !(s.SigmaM > 0 && s.SigmaM <= 1e6) {
			return fmt.Errorf("start: sigma_m is %v: give the standard deviation of the start in metres, above 0 and at most 1e6", s.SigmaM)
		}
		return nil
	case InArea:
		n := 0
		for _, ring := range s.Area {
			n += len(ring)
			for _, p := range ring {
				if err := p.Check(); err != nil {
					return fmt.Errorf("start: area: %w", err)
				}
			}
		}
		if len(s.Area) == 0 || len(s.Area[0]) < 3 {
			return errors.New("start: the area needs at least three corners")
		}
		if n > maxRing {
			return fmt.Errorf("start: the area has %d corners, at most %d are allowed", n, maxRing)
		}
		return nil
	}
	return fmt.Errorf("start: unknown kind %d", s.Kind)
}

func (s Start) prior(f geo.Frame) filter.Prior {
	switch s.Kind {
	case AtPoint:
		return filter.AtPoint{Point: f.Forward(s.Point), SigmaM: s.SigmaM}
	case InArea:
		rings := make([][]geo.Point, len(s.Area))
		for i, ring := range s.Area {
			for _, p := range ring {
				rings[i] = append(rings[i], f.Forward(p))
			}
		}
		return filter.Within{Rings: rings}
	}
	return filter.Anywhere{}
}

// defaultMaxCells bounds the Gaussians of a belief. A point of a lattice without
// quantities is one number, a Gaussian ten or more, and a few times as dear to
// move; and a flight that starts with kilometres of uncertainty over steep ground
// needs the points: with 200 000 the false modes get weights that are off by a
// third, with 1.6 million by half a per cent.
const (
	defaultMaxCells   = 200_000
	PointsPerGaussian = 8
)

// Session is one vehicle's run. Use New.
type Session struct {
	vehicle  string
	space    filter.Space
	lines    filter.LineSpace // nil on a plane
	names    Names
	suite    *sensor.Suite
	dim      int
	cellsM   []float64 // widest cell of each level, on lines
	maxCells int
	// hold is the suite's hold_s, still for how long a standstill speaks.
	hold, still                    sensor.Time
	gyro                           string // whose bias is estimated
	posteriorS                     float64
	wideSize, hugeSize, maxWaiting int // the constants, less in tests
	maxCarried, strideM            float64
	followed                       float64 // work of the present move
	followLimit                    float64 // in tests, see maxFollowed
	manyPieces                     float64 // the constant, less in tests
	// What is kept beside the belief, see aside.
	rates   rates
	nowhere *filter.Belief // see anyPlace; never changed once it is made
	near    filter.Nearby  // nil: nothing comes back onto the roads
	entry   filter.Entry   // onto the roads, but for its hazard
	areaM2  float64        // of the map's box
	// For searches: events that the log has dropped, who runs them; and in one's
	// own session that nobody reads it, and until when it goes.
	past      past
	beginWork func(func()) func()
	unheard   bool
	// fromAnywhere: the start was, see search.go.
	fromAnywhere bool
	unguarded    bool
	until        sensor.Time

	state  state
	snaps  []snapshot
	log    log
	motion sensor.Motion
	cuts   []sensor.Time
	own    *desk                // nil: the session rests
	desks  *Desks               // where it comes from, nil: made for this session
	fresh  bool                 // the desk's sum has seen the present belief
	recent []*summary.Posterior // by time; the first final of them are final
	final  int
	// superseded are posteriors that a late event took back, latest first.
	superseded []*summary.Posterior
	withdrawn  []sensor.Time // by the last Add or Flush
	hasher     *summary.Hasher
	leads      []lead
	accepted   uint64
	refused    uint64

	// reached is the latest time that was computed, since begunOnce.
	begunOnce bool
	reached   sensor.Time
	// flushedAt is the last time of the last Flush.
	flushed   bool
	flushedAt sensor.Time
	pressed   bool // do not wait: see relieve
	widest    int  // the most cells since shed
	watch     func(Change)
	finals    func(*summary.Posterior)
	settled   func([]sensor.Event)
	// seed makes the belief with which the session began again, if that is huge: the
	// snapshot from before does without (snapshot.seeded).
	seed func() (*filter.Belief, error)
}

// New starts a session. An error says what is wrong with the configuration.
func New(c Config) (*Session, error) {
	s, err := prepare(c)
	if err != nil {
		return nil, err
	}
	seed := func() (*filter.Belief, error) {
		return filter.Seed(c.Space, c.Start.prior(c.Space.Frame()), s.suite.Quantities(s.dim), s.maxCells)
	}
	b, err := seed()
	if errors.Is(err, filter.ErrNowhere) {
		return nil, errors.New("start: it does not touch the map: check its coordinates (longitude first) and the map's extent")
	}
	if err != nil {
		return nil, err
	}
	s.state.belief = b
	if s.lines != nil && b.Cells() > s.hugeSize {
		s.seed = seed
	}
	s.state.monitor = monitor.New(s.suite.Vehicle.FalseAlarmH * 3600)
	s.setRates()
	return s, nil
}

// prepare makes a session without a belief.
func prepare(c Config) (*Session, error) {
	if c.Space == nil {
		return nil, errors.New("session: no map")
	}
	if err := c.Start.Check(); err != nil {
		return nil, err
	}
	if c.MaxCells < 0 {
		return nil, fmt.Errorf("session: MaxCells is %d: it must be positive, or 0 for %d", c.MaxCells, defaultMaxCells)
	}
	if !(c.PosteriorS >= 0 && c.PosteriorS <= MaxPosteriorS) {
		return nil, fmt.Errorf("session: PosteriorS is %v: it must be from 0 to %d seconds", c.PosteriorS, MaxPosteriorS)
	}
	s := &Session{
		posteriorS: c.PosteriorS,
		vehicle:    c.Vehicle, space: c.Space, names: c.Names, dim: 2, maxCells: c.MaxCells, hasher: summary.NewHasher(),
		beginWork: c.Begin, desks: c.Desks, unguarded: c.Unguarded, fromAnywhere: c.Start.Kind == Anywhere, wideSize: wideSize, hugeSize: hugeSize, strideM: strideM, maxWaiting: maxWaiting, manyPieces: manyPieces,
	}
	if s.maxCells == 0 {
		s.maxCells = defaultMaxCells
	}
	if ls, ok := c.Space.(filter.LineSpace); ok {
		s.lines, s.dim = ls, 1
		for l := range ls.Levels() {
			s.cellsM = append(s.cellsM, slices.Max(ls.Lines(l).WidthM))
		}
	}
	s.suite = sensor.Default(s.dim)
	if c.Suite != nil {
		if err := c.Suite.Validate(); err != nil {
			return nil, err
		}
		if err := c.Suite.CheckSpace(s.dim); err != nil {
			return nil, err
		}
		s.suite = c.Suite.For(s.dim)
	}
	s.motion.Suite = s.suite
	v := s.suite.Vehicle
	s.gyro, _ = s.suite.Estimates(sensor.NuisanceGyroBias)
	s.hold = sensor.Time(v.HoldS * 1e9)
	s.still = sensor.Time(min(standstillS, v.LateWindowS/2) * 1e9)
	if err := s.shown().Validate(); err != nil {
		return nil, err
	}
	if s.points() {
		s.maxCells = PointsPerGaussian * min(s.maxCells, math.MaxInt/PointsPerGaussian)
	}
	return s, nil
}

// points says that the belief is masses on points, and not Gaussians.
func (s *Session) points() bool {
	qs := s.suite.Quantities(s.dim)
	return s.dim == 2 && (len(qs) == 0 || gridded(qs))
}

// gridded says that velocities are axes of the grid.
func gridded(qs []filter.Quantity) bool {
	return slices.ContainsFunc(qs, func(q filter.Quantity) bool { return q.Axis })
}

// Latest returns the latest posterior, or nil before the first. It must not
// be changed.
func (s *Session) Latest() *summary.Posterior {
	if len(s.recent) == 0 {
		return nil
	}
	return s.recent[len(s.recent)-1]
}

// Counts returns how many events were accepted and refused.
func (s *Session) Counts() (accepted, refused uint64) { return s.accepted, s.refused }

// Hash sums up the final posteriors so far, in event order: those that no
// late event can change any more. After Flush that is all of them.
func (s *Session) Hash() string { return s.hasher.Sum() }

// CellM is the width of the belief's cells now; on lines the widest.
func (s *Session) CellM() float64 { return s.cellM() }

// Cells says where the cells of the present belief are: the level on lines,
// the lattice on a plane.
func (s *Session) Cells() (level int, l filter.Lattice) {
	return s.state.belief.Level, s.state.belief.Lattice
}

// ReadBelief spells out the present belief.
func (s *Session) ReadBelief(dst *filter.Cloud) { s.state.belief.Read(dst, s.space, &s.desk().work) }

// Size is the number of cells or Gaussians that the belief holds now.
func (s *Session) Size() int { return s.state.belief.Cells() }
