package tune

import (
	"errors"
	"fmt"
	"math"
	"runtime"
	"strconv"
	"strings"
	"sync"

	"leadline/engine/drivefile"
	"leadline/engine/filter"
	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
)

// Drive is a recorded drive with the map that it is over.
type Drive struct {
	Name  string
	Drive *drivefile.Drive
	Space filter.Space
	Names session.Names
}

// evaluator gives the log evidence of drives under figures of a suite.
type evaluator struct {
	suite    *sensor.Suite
	keys     []string
	drives   []Drive
	maxCells int
	known    map[string][]float64 // by figures: one a drive
	count    int                  // of figures that were tried
	progress func(count int)
	stop     func() error
}

// impossibleNats is what a measurement counts for that is impossible everywhere,
// which leaves it out of the session's sum: worse than any outlier.
const impossibleNats = -1000.0

// with is the suite with other figures.
func (e *evaluator) with(figures []float64) (*sensor.Suite, error) {
	s := e.suite
	for i, key := range e.keys {
		var err error
		if s, err = s.Set(key, strconv.FormatFloat(figures[i], 'g', -1, 64)); err != nil {
			return nil, err
		}
	}
	return s, nil
}

// of returns the log evidence, one a drive, for several sets of figures, each drive
// and set by itself and as many at once as there are processors. Nothing depends on
// how many that are.
func (e *evaluator) of(points [][]float64) ([][]float64, error) {
	type unit struct {
		suite *sensor.Suite
		drive int
		dst   *float64
		err   *error
	}
	var units []unit
	fresh := map[string][]float64{}
	errs := []*error{}
	for _, x := range points {
		name := nameOf(x)
		if e.known[name] != nil || fresh[name] != nil {
			continue
		}
		suite, err := e.with(x)
		if err != nil {
			return nil, err
		}
		out := make([]float64, len(e.drives))
		fresh[name] = out
		for d := range e.drives {
			err := new(error)
			errs = append(errs, err)
			units = append(units, unit{suite, d, &out[d], err})
		}
	}
	var wait sync.WaitGroup
	next := make(chan unit)
	for range min(len(units), runtime.GOMAXPROCS(0)) {
		wait.Go(func() {
			for u := range next {
				*u.dst, *u.err = e.drives[u.drive].evidence(u.suite, e.maxCells, e.stop)
			}
		})
	}
	for _, u := range units {
		next <- u
	}
	close(next)
	wait.Wait()
	for _, err := range errs {
		if *err != nil {
			return nil, *err
		}
	}
	for name, v := range fresh {
		e.known[name] = v
	}
	e.count += len(fresh)
	if e.progress != nil && len(fresh) > 0 {
		e.progress(e.count)
	}
	all := make([][]float64, len(points))
	for i, x := range points {
		all[i] = e.known[nameOf(x)]
	}
	return all, nil
}

// sums are the evidence of all drives together, for each set of figures.
func (e *evaluator) sums(points [][]float64) ([]float64, error) {
	all, err := e.of(points)
	if err != nil {
		return nil, err
	}
	out := make([]float64, len(points))
	for i, of := range all {
		for _, v := range of {
			out[i] += v
		}
	}
	return out, nil
}

func nameOf(x []float64) string {
	var b strings.Builder
	for _, v := range x {
		b.WriteString(strconv.FormatFloat(v, 'x', -1, 64))
		b.WriteByte(' ')
	}
	return b.String()
}

// evidence replays a drive. Every measurement that is accepted counts, those of a
// sensor that a session would isolate, too.
func (d *Drive) evidence(suite *sensor.Suite, maxCells int, stop func() error) (float64, error) {
	if stop != nil {
		if err := stop(); err != nil {
			return 0, err
		}
	}
	impossible := 0
	r, err := replay.Run(d.Drive, session.Config{Space: d.Space, Names: d.Names, Suite: suite, MaxCells: maxCells, Unguarded: true}, replay.Options{
		Stop: stop,
		Watch: func(c session.Change) {
			if math.IsInf(c.LogEvidence, -1) {
				impossible++
			}
		},
	})
	if err != nil {
		return 0, fmt.Errorf("%s: %w", d.Name, err)
	}
	if len(r.Refusals) > 0 {
		return 0, fmt.Errorf("%s: %d measurements were refused, first %w", d.Name, r.Refused, r.Refusals[0])
	}
	if len(r.Posteriors) == 0 {
		return 0, fmt.Errorf("%s: %w", d.Name, errors.New("it gives no posterior"))
	}
	return r.Posteriors[len(r.Posteriors)-1].LogEvidence + impossibleNats*float64(impossible), nil
}

// bared is a drive whose measurements of some sensors have lost their sigmas. The
// slices of the drive itself are not touched; n counts what was changed.
func bared(d *drivefile.Drive, sensors map[string]bool) (out *drivefile.Drive, n int) {
	c := *d
	c.Events = append([]sensor.Event(nil), d.Events...)
	for i := range c.Events {
		ev := &c.Events[i]
		name := ev.Sensor
		if name == "" {
			name = ev.Measurement.Kind()
		}
		if !sensors[name] {
			continue
		}
		if m, had := withoutSigma(ev.Measurement); had {
			ev.Measurement = m
			n++
		}
	}
	return &c, n
}

func withoutSigma(m sensor.Measurement) (out sensor.Measurement, had bool) {
	drop := func(v *float64) {
		had = had || *v != 0
		*v = 0
	}
	switch m := m.(type) {
	case sensor.Travel:
		drop(&m.SigmaM)
		return m, had
	case sensor.Turn:
		drop(&m.SigmaRad)
		return m, had
	case sensor.Displacement:
		for i := range m.CovM2 {
			drop(&m.CovM2[i])
		}
		return m, had
	case sensor.BodyDisplacement:
		drop(&m.SigmaForwardM)
		drop(&m.SigmaRightM)
		drop(&m.SigmaTurnRad)
		return m, had
	case sensor.Speed:
		drop(&m.SigmaMPS)
		return m, had
	case sensor.HeadingFix:
		drop(&m.SigmaRad)
		return m, had
	case sensor.Clearance:
		drop(&m.SigmaM)
		return m, had
	case sensor.Sounding:
		drop(&m.SigmaM)
		return m, had
	case sensor.Barometer:
		drop(&m.SigmaM)
		return m, had
	case sensor.Range:
		drop(&m.SigmaM)
		return m, had
	case sensor.Bearing:
		drop(&m.SigmaRad)
		return m, had
	case sensor.AcousticBearing:
		drop(&m.SigmaRad)
		return m, had
	case sensor.Fix:
		drop(&m.SigmaM)
		return m, had
	}
	return m, false
}
