package replay

import (
	"container/heap"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"

	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/score"
	"leadline/engine/summary"
)

// ErrDisordered is returned by Stream for a drive whose measurements are so far
// out of order that they cannot be put in order as they come: use Run.
var ErrDisordered = errors.New("the drive's measurements are too far out of order to be read as they come")

// MaxWaiting is how many measurements Stream holds back to put them in order.
const MaxWaiting = 1 << 14

// StreamOptions say how a drive is streamed.
type StreamOptions struct {
	// Final is called with each posterior once it is final, in order.
	Final func(*summary.Posterior)
	// Watch, if set, watches the session.
	Watch func(session.Change)
	// BeforeFix, if set, is given each satellite fix with the posterior of the
	// belief that had moved to its time and knew nothing measured at it: as if the
	// fix were held out. A fix may come again, when a late measurement changes what
	// was before it; the last one counts. The posterior is valid during the call.
	BeforeFix func(ev sensor.Event, before *summary.Posterior)
	// Moments are times at which Belief is called, with the session as it then is:
	// all measurements until then and none after it. Times before the first
	// measurement and after the last are passed over. An error of it ends the run.
	Moments []Moment
	Belief  func(at sensor.Time, s *session.Session) error
	// Settled is as in Options.
	Settled func([]sensor.Event)
	// Progress, if set, is called now and then with how many bytes and
	// measurements were read since it was called last.
	Progress func(bytes int64, measurements int)
}

// Stream runs a drive as Run does, to the same bits, without ever holding it:
// it keeps MaxWaiting measurements to put them in order, the time that each
// took, and the session. The result has no Posteriors.
//
// Where ctx ends or the drive breaks off, the result is of what came before,
// beside the error; it is nil where nothing could be run.
func Stream(ctx context.Context, rd io.Reader, name string, c session.Config, o StreamOptions) (*Result, error) {
	counted := &counter{r: rd}
	in := drivefile.NewReader(counted, name)
	first, err := in.Read()
	if err != nil {
		return nil, err
	}
	r, err := start(*first.Header, c, o.Watch, o.BeforeFix)
	if err != nil {
		return nil, err
	}
	r.moments = moments{due: o.Moments, give: o.Belief}
	r.s.Settled(o.Settled)
	r.settled = o.Settled
	finals := 0
	r.s.Finals(func(p *summary.Posterior) { finals++; o.Final(p) })
	var waiting queue
	var last sensor.Event
	told, toldN := int64(0), 0
	tell := func() {
		if o.Progress != nil {
			o.Progress(counted.n-told, r.n-toldN)
			told, toldN = counted.n, r.n
		}
	}
	take := func() error {
		ev := heap.Pop(&waiting).(waits).Event
		if r.n > 0 && ev.Compare(last) < 0 {
			return ErrDisordered
		}
		last = ev
		if r.n%1024 == 1023 {
			tell()
		}
		return r.add(ev)
	}
	var stopped error
	for n := 0; stopped == nil; n++ {
		rec, err := in.Read()
		if err == nil {
			err = ctx.Err()
		}
		switch {
		case err != nil:
			stopped = err
		case rec.Event != nil:
			heap.Push(&waiting, waits{*rec.Event, n})
			if len(waiting) > MaxWaiting {
				stopped = take()
			}
		}
	}
	if errors.Is(stopped, ErrDisordered) {
		return nil, stopped
	}
	if errors.Is(stopped, io.EOF) {
		stopped = nil
	}
	for len(waiting) > 0 {
		if ctx.Err() != nil {
			stopped = ctx.Err()
			break
		}
		if err := take(); err != nil {
			return nil, err
		}
	}
	tell()
	if r.n == 0 {
		if stopped != nil {
			return nil, stopped
		}
		return nil, ErrNoMeasurements
	}
	if err := r.moments.pass(r.latest+1, false, r.s); err != nil {
		return nil, err
	}
	res := r.end()
	res.Timing.Posteriors = finals
	return res, stopped
}

// Glance is what must be known of a drive before it is streamed.
type Glance struct {
	Header drivefile.Header
	// Truth are the truths (those of Truth), valid until Close.
	Truth  []score.Truth
	SHA256 string // of the file
	closer io.Closer
}

// Close gives the truths back.
func (g *Glance) Close() error { return g.closer.Close() }

// Look reads of a drive what must be known before it is streamed. Measurements are
// passed over unread. Up to mostTruths truths are held, more are in a file.
func Look(rd io.Reader, name string) (*Glance, error) {
	sum := sha256.New()
	tee := io.TeeReader(rd, sum)
	in := drivefile.NewReader(tee, name)
	in.TruthsAlone()
	g := &Glance{}
	all := truths{most: mostTruths}
	defer all.drop()
	for n := 0; ; {
		rec, err := in.Read()
		switch {
		case err != nil && !errors.Is(err, io.EOF) && g.Header.Vehicle == "":
			return nil, err
		case err != nil:
			if !errors.Is(err, io.EOF) { // the streaming comes to it, and says so
				if _, err := io.Copy(io.Discard, tee); err != nil {
					return nil, fmt.Errorf("%s: %w", name, err)
				}
			}
			g.SHA256 = hex.EncodeToString(sum.Sum(nil))
			g.Truth, g.closer, err = all.all()
			return g, err
		case rec.Header != nil:
			g.Header = *rec.Header
		case rec.Truth != nil:
			if v := rec.Truth.Vehicle; v != "" && v != g.Header.Vehicle {
				continue
			}
			if n++; n > drivefile.MaxRecords {
				return nil, fmt.Errorf("%s:%d: more than %d truths: split the drive", name, rec.Line, drivefile.MaxRecords)
			}
			if err := all.add(score.Truth{TimeNS: int64(rec.Time), At: rec.Truth.Position, SigmaM: rec.Truth.SigmaM}); err != nil {
				return nil, fmt.Errorf("%s: %w", name, err)
			}
		}
	}
}

type counter struct {
	r io.Reader
	n int64
}

func (c *counter) Read(b []byte) (int, error) {
	n, err := c.r.Read(b)
	c.n += int64(n)
	return n, err
}

// waits is a measurement that waits for those before it; equal ones keep their
// order.
type waits struct {
	sensor.Event
	at int
}

type queue []waits

func (q queue) Len() int      { return len(q) }
func (q queue) Swap(i, j int) { q[i], q[j] = q[j], q[i] }
func (q *queue) Push(x any)   { *q = append(*q, x.(waits)) }

func (q queue) Less(i, j int) bool {
	if c := q[i].Compare(q[j].Event); c != 0 {
		return c < 0
	}
	return q[i].at < q[j].at
}

func (q *queue) Pop() any {
	n := len(*q) - 1
	x := (*q)[n]
	(*q)[n] = waits{}
	*q = (*q)[:n]
	return x
}
