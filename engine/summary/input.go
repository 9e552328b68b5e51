package summary

import (
	"errors"
	"fmt"
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/monitor"
)

// ErrEmpty is returned by Summarize for a belief that holds no probability.
var ErrEmpty = errors.New("summary: the belief is empty: seed it before asking for a posterior")

// Names says what the directed edges of a road map are called.
type Names interface {
	// Name returns the road's name, "" if it has none.
	Name(chart int32) string
	// Twin returns the same road in the other direction, -1 if there is none.
	Twin(chart int32) int32
}

// Input is what one posterior is made of. Nothing in it is changed or kept.
type Input struct {
	TimeNS int64
	Frame  geo.Frame
	Belief *filter.Belief
	// Cloud is the belief spelled out: one entry a Gaussian in the belief's
	// order, or one a cell with any mass on a plane without quantities. On
	// lines its covariance is along the line alone.
	Cloud *filter.Cloud
	Lines *filter.Lines // the topology at the belief's level; nil on a plane
	Names Names         // may be nil

	// What the session knows beside the belief.
	Speed       Speed
	Evidence    []Evidence
	LogEvidence float64
	Accepted    uint64
	Refused     uint64
	RestartMass float64 // given to hypotheses that the belief had not followed
	// What monitors say.
	Contradicted bool
	Alarms       []monitor.Alarm
	Sensors      []monitor.Consistency
	// Off is what is known of a vehicle that is off the map, nil for nothing;
	// Lost is the probability that the vehicle is where neither it nor the
	// belief says. The belief has what is left of 1.
	Off  *OffRoads
	Lost float64
	// OffMapMass is how much of the belief itself lies where the map ends or
	// knows nothing, on a plane.
	OffMapMass float64
}

// OffRoads is a hypothesis beside the belief: that the vehicle is not on the map,
// with a position of its own.
type OffRoads struct {
	Probability float64
	Loose       *filter.Loose
}

// off returns the probability of being off the map, in all.
func (in *Input) off() float64 {
	off := float64((1 - in.Lost) * in.OffMapMass)
	if in.Off != nil {
		off += in.Off.Probability
	}
	return off
}

// beside reports an impossible hypothesis beside the belief.
func (in *Input) beside() error {
	off := 0.0
	if in.Off != nil {
		off = in.Off.Probability
		if in.Off.Loose == nil || in.Off.Loose.Len() == 0 || len(in.Off.Loose.Quantities) != in.Belief.K()+1 || in.Belief.Dim != 1 {
			return errors.New("summary: what is off the map needs Gaussians beside a belief on lines, over the same quantities")
		}
	}
	if !(off >= 0 && in.Lost >= 0 && off+in.Lost < 1) {
		return fmt.Errorf("summary: probabilities of %v off the map and %v of being lost; they must leave something of 1", off, in.Lost)
	}
	return nil
}

// check reports what no posterior could be made of.
func (in *Input) check() error {
	b, c := in.Belief, in.Cloud
	if b == nil || c == nil {
		return errors.New("summary: input without belief or cloud")
	}
	if in.Frame.IsZero() {
		return errors.New("summary: input without a frame")
	}
	n, k := len(c.Mass), b.K()
	if n == 0 {
		return ErrEmpty
	}
	bad := func(what string, got, want int) error {
		return fmt.Errorf("summary: cloud of %d entries has %d %s, want %d", n, got, what, want)
	}
	for _, l := range []struct {
		what      string
		got, want int
	}{
		{"east coordinates", len(c.East), n},
		{"north coordinates", len(c.North), n},
		{"east variances", len(c.VarEE), n},
		{"covariances", len(c.VarEN), n},
		{"north variances", len(c.VarNN), n},
		{"means", len(c.Mean), n * k},
	} {
		if l.got != l.want {
			return bad(l.what, l.got, l.want)
		}
	}
	if k > 0 || b.Dim == 1 {
		if len(b.Key) != n {
			return bad("cells in its belief", len(b.Key), n)
		}
		if len(b.Cov) != n*k*(k+1)/2 {
			return bad("covariance elements in its belief", len(b.Cov), n*k*(k+1)/2)
		}
	}
	if b.Dim != 1 {
		if !(b.Lattice.SpacingM > 0) {
			return fmt.Errorf("summary: a belief on a plane has lattice spacing %v m; it must be positive", b.Lattice.SpacingM)
		}
		return nil
	}
	if in.Lines == nil {
		return errors.New("summary: a belief on lines needs Input.Lines")
	}
	for _, l := range []struct {
		what string
		got  int
	}{{"charts", len(c.Chart)}, {"places along charts", len(c.AlongM)}, {"variances along charts", len(c.VarM2)}} {
		if l.got != n {
			return bad(l.what, l.got, n)
		}
	}
	if err := in.beside(); err != nil {
		return err
	}
	last := int32(-1)
	for i, chart := range c.Chart {
		if chart < last || int(chart) >= len(in.Lines.WidthM) {
			return fmt.Errorf("summary: entry %d lies on chart %d after chart %d; charts must ascend and be below %d", i, chart, last, len(in.Lines.WidthM))
		}
		last = chart
	}
	return nil
}

// badEntry reports an entry that is no Gaussian.
func badEntry(i int, m, e, n float64, c Cov) error {
	if !(m >= 0) || !geo.Finite(m, e, n, c.EE, c.EN, c.NN) {
		return fmt.Errorf("summary: entry %d of the cloud has mass %v at (%v, %v) with covariance (%v, %v, %v); all must be finite and the mass not negative", i, m, e, n, c.EE, c.EN, c.NN)
	}
	// A rounded product may pass the bound by a little.
	if c.EE < 0 || c.NN < 0 || math.Abs(c.EN) > math.Sqrt(c.EE)*math.Sqrt(c.NN)*(1+1e-6)+1e-12 {
		return fmt.Errorf("summary: entry %d of the cloud has (%v, %v, %v) for a covariance; it is not positive semi-definite", i, c.EE, c.EN, c.NN)
	}
	return nil
}
