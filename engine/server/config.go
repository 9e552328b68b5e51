package server

import (
	"crypto/tls"
	"errors"
	"fmt"
	"log/slog"
	"net/http"
	"os"
	"time"

	"google.golang.org/grpc/stats"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/journal"
	"leadline/engine/sensor"
	"leadline/engine/server/operate"
	"leadline/engine/session"
	"leadline/engine/summary"
)

// Config is what a server is made of.
type Config struct {
	// Maps are the maps that vehicles may name.
	Maps []Map
	// Suites are the suites that vehicles may name. No name is no suite: the
	// session's defaults.
	Suites map[string]*sensor.Suite
	// NewSession makes a session; nil is session.New.
	NewSession func(session.Config) (Session, error)
	// RestoreSession makes one from what its Checkpoint wrote; nil is
	// session.Restore, where NewSession is nil, too.
	RestoreSession func(session.Config, []byte) (Session, error)
	// MaxCells is session.Config.MaxCells.
	MaxCells int
	Limits   Limits
	// Journal, if set, keeps what comes before it is acknowledged: its Log is
	// this configuration's.
	Journal *journal.Options
	// Share, if set, has this server share its journal, which must be Shared, with
	// others.
	Share *Share
	// KeepFor is for how long what was measured is kept at most: older records of
	// the journal go, and drives that are silent for longer. 0 is without end.
	KeepFor time.Duration
	// Build tells builds of this program apart: what another one computed is
	// computed again.
	Build string
	// Uploads, if set, lets clients add maps.
	Uploads *Uploads
	// Results, if set, is a folder of results of replays that may be read.
	Results string
	// Access, if set, is who may do what; nil is that everybody may do all.
	Access *Access
	// Encryption, if set, encrypts every connection.
	Encryption *tls.Config
	// Metrics counts what the server does; nil counts for nobody. One server
	// takes it.
	Metrics *operate.Metrics
	// Traces, if set, gets the calls over gRPC.
	Traces stats.Handler
	// Checks say, by name, why the server cannot serve for now; nil that it can.
	// They are asked every few seconds, and must not wait.
	Checks map[string]func() error
	// Origins are those whose pages may call the API from a browser, beside
	// pages of this server: scheme, host and port.
	Origins []string
	// Page answers what HTTP clients ask beside calls; nil is 404.
	Page http.Handler
	// Version is the server's own, which every answer names.
	Version string
	// Now is the clock by which answers are dated; nil is time.Now.
	Now func() time.Time
	// Log takes what the operator should know; nil is nothing.
	Log *slog.Logger
}

// Map is a map under the name by which vehicles ask for it. Names is nil on a
// plane.
type Map struct {
	Name  string
	Space filter.Space
	Names session.Names
	// Roads, if set, are its lines, for those who draw it.
	Roads Roads
	// Check, if set, says in lines of text what is right and wrong with the map.
	// It may take seconds.
	Check func() string
	// About is told to those who ask what the map is.
	About MapAbout
	// File, if set, is the compiled file that it was opened from, for servers that share
	// their maps.
	File string
	// Close, if set, is called once the server uses the map no more: when it
	// has been replaced and its last session has left, or at the end of
	// Shutdown.
	Close func() error
}

// Session is what the server needs of session.Session. One goroutine calls it.
type Session interface {
	Add(sensor.Event) ([]*summary.Posterior, error)
	Flush() []*summary.Posterior
	Withdrawn() []sensor.Time
	Latest() *summary.Posterior
	Counts() (accepted, refused uint64)
	Hash() string
}

// Asker is a session that answers more about its latest posterior. Where uses
// it for what its request asks beyond that.
type Asker interface {
	// Region is the densest part of the plane that holds a fraction.
	Region(fraction float64) (*summary.Region, error)
	// Inside is the probability inside a polygon.
	Inside(polygon [][]geo.LonLat) (float64, error)
	// Protection is the protection radius at a risk.
	Protection(risk float64) (summary.Protection, error)
}

var _ Session = (*session.Session)(nil)

// Foresight is a session whose belief can be carried on to a time without
// measurements. Where uses it for predict_to_now.
type Foresight interface {
	Ahead() (*session.Ahead, error)
}

// Hindsight is a session that knows of earlier times what was measured since.
// Where uses it for ago_s.
type Hindsight interface {
	Earlier(agoS float64) (*session.Earlier, error)
}

// Limits bound what clients can make the server hold. A limit that is 0 has
// its default.
type Limits struct {
	// Vehicles is the number of sessions, finished ones that can still be
	// asked included; the longest idle one makes room if it is finished or
	// older than IdleTimeout. Default 1000.
	Vehicles int
	// IdleTimeout is how long an unfinished drive without a stream is kept
	// for certain. Default 1 hour.
	IdleTimeout time.Duration
	// Streams is the number of Feed calls at once. Default 2000.
	Streams int
	// HTTPConnections is the number of connections without gRPC: browsers hold
	// one for each page that follows. Default 1000.
	HTTPConnections int
	// Openings is the number of sessions that are made at once: a start
	// anywhere on a large map takes memory and time. Default 2.
	Openings int
	// MessageBytes is the size of one message. Default 4 MiB.
	MessageBytes int
	// BatchMeasurements is the number of measurements in a batch. Default
	// 1024.
	BatchMeasurements int
	// Rate and RateInAll are the measurements a second of one vehicle and of all
	// together. Streams that bring more are read no faster; ten seconds of it
	// may come at once. Defaults 10 000 and 500 000.
	Rate, RateInAll int
	// CellsInAll is the number of cells or Gaussians of all beliefs together from
	// which on no new drive is taken. Default 10 000 000.
	CellsInAll int
	// Load is the number of drives at work or waiting for a processor, for each
	// processor, from which on fewer posteriors are told; from refuseAt times that
	// on no new drive is taken. Default 4.
	Load int
	// LoadOver is over how long the load is averaged. Default 5 s.
	LoadOver time.Duration
	// QueueBatches is the number of batches that wait at one session; the
	// stream stops reading beyond. Default 4.
	QueueBatches int
	// Regions is the number of region fractions in one question. Default 8.
	Regions int
	// Questions is the number of vehicles in one question. Default 100.
	Questions int
	// Predictions is the number of beliefs that are carried on to the present
	// at once; each takes memory and up to a second. Default 2.
	Predictions int
	// Followers is the number of Follow calls at once; as many whose stream
	// broke are kept to be resumed. Default 100.
	Followers int
	// ResumeTimeout is for how long they are. Default 5 minutes.
	ResumeTimeout time.Duration
	// OpenTimeout is how long a stream may take to say what it is for.
	// Default 10 s.
	OpenTimeout time.Duration
}

// fields lists the limits with their defaults.
func (l *Limits) fields() []limit {
	return []limit{
		{"Vehicles", &l.Vehicles, 1000},
		{"Streams", &l.Streams, 2000},
		{"HTTPConnections", &l.HTTPConnections, 1000},
		{"Openings", &l.Openings, 2},
		{"MessageBytes", &l.MessageBytes, 4 << 20},
		{"BatchMeasurements", &l.BatchMeasurements, 1024},
		{"Rate", &l.Rate, 10_000},
		{"RateInAll", &l.RateInAll, 500_000},
		{"CellsInAll", &l.CellsInAll, 10_000_000},
		{"Load", &l.Load, 4},
		{"QueueBatches", &l.QueueBatches, 4},
		{"Regions", &l.Regions, 8},
		{"Followers", &l.Followers, 100},
		{"Questions", &l.Questions, 100},
		{"Predictions", &l.Predictions, 2},
	}
}

type limit struct {
	name string
	v    *int
	or   int
}

// withDefaults fills the fields that are zero.
func (l Limits) withDefaults() Limits {
	for _, f := range l.fields() {
		if *f.v == 0 {
			*f.v = f.or
		}
	}
	if l.IdleTimeout == 0 {
		l.IdleTimeout = time.Hour
	}
	if l.ResumeTimeout == 0 {
		l.ResumeTimeout = 5 * time.Minute
	}
	if l.OpenTimeout == 0 {
		l.OpenTimeout = 10 * time.Second
	}
	if l.LoadOver == 0 {
		l.LoadOver = 5 * time.Second
	}
	return l
}

// hears reports whether a suite describes a road, whose traffic needs no map.
func (c *Config) hears() bool {
	for _, s := range c.Suites {
		if s != nil && len(s.Traffic.Road) > 0 {
			return true
		}
	}
	return false
}

// Validate lists everything that is wrong with the configuration.
func (c *Config) Validate() error {
	var errs []error
	seen := map[string]bool{}
	for i, m := range c.Maps {
		switch {
		case m.Name == "":
			errs = append(errs, fmt.Errorf("server: map %d has no name", i+1))
		case seen[m.Name]:
			errs = append(errs, fmt.Errorf("server: two maps are called %q: rename one", m.Name))
		}
		seen[m.Name] = true
		if m.Space == nil {
			errs = append(errs, fmt.Errorf("server: map %q has no space", m.Name))
		}
	}
	if c.Uploads != nil {
		errs = append(errs, c.Uploads.validate()...)
	} else if len(c.Maps) == 0 && c.Share == nil && !c.hears() {
		errs = append(errs, errors.New("server: no map: give at least one, or a suite that describes a road"))
	}
	if c.KeepFor != 0 && c.KeepFor < time.Second {
		errs = append(errs, fmt.Errorf("server: what was measured is to be kept for %v: give a second or more, or 0", c.KeepFor))
	}
	if info, err := os.Stat(c.Results); c.Results != "" && (err != nil || !info.IsDir()) {
		errs = append(errs, fmt.Errorf("server: there is no folder %q of results: give one that `leadline replay --out` wrote", c.Results))
	}
	if c.Journal != nil {
		errs = append(errs, c.Journal.Validate())
	}
	if c.Share != nil && (c.Journal == nil || !c.Journal.Shared || c.Share.Address == "" || c.Share.Dial == nil || c.Share.OpenMap == nil) {
		errs = append(errs, errors.New("server: to share needs a journal that is shared, an address, how to reach others, and how to open a map"))
	}
	for _, f := range c.Limits.fields() {
		if *f.v < 0 {
			errs = append(errs, fmt.Errorf("server: limit %s is %d: it must be positive, or 0 for %d", f.name, *f.v, f.or))
		}
	}
	if c.Limits.IdleTimeout < 0 || c.Limits.OpenTimeout < 0 || c.Limits.ResumeTimeout < 0 || c.Limits.LoadOver < 0 {
		errs = append(errs, errors.New("server: a timeout is negative"))
	}
	return errors.Join(errs...)
}
