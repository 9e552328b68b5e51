package summary

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// ReasonLostMass is why a protection radius is unbounded when the belief has
// lost more than a tenth of the integrity risk.
const ReasonLostMass = "the mass pruned, restarted or off the map exceeds a tenth of the integrity risk"

// ReasonLost is why it is unbounded when the vehicle may be anywhere.
const ReasonLost = "the probability that the vehicle is lost exceeds a tenth of the integrity risk"

// Summarizer makes posteriors. It keeps its working memory between calls, and
// the last belief for Inside and Region. One goroutine owns it. Use New.
type Summarizer struct {
	opt        Options
	tables     *tailTables
	tailSigmas float64 // beyond which a thousandth of the risk lies

	// The last input's entries.
	frame             geo.Frame
	dim               int
	east, north, mass []float64
	covs              []Cov   // with the lateral spread
	cells             int     // entries of the belief; after them come those off the map
	onShare           float64 // what the belief's entries hold of all
	square            Cov     // of which, on a lattice, not the belief's own
	typicalM          float64 // width of a typical entry
	grainM            float64 // below which the density has no detail
	spread            Cov     // around the mean
	modeSigmaM        float64 // sigma of the tightest heavy mode

	discs, nearDiscs []disc
	needles          []needle
	near             columns
	known            []tried // radii, while they are found
	sorted, dots     bool
	beyond, maxReach float64
	ringMass         [rings]float64

	hills   hills
	modes   []modeSum
	modeOf  []int32 // by entry: its rank
	rank    []int32 // by node
	runMass []float64
	raster  raster

	turned struct { // the frame's rotation, by the square it was taken at
		ok         bool
		col, row   float64
		frame      geo.Frame
		c, s, k, g float64
	}
}

// New returns a Summarizer, or an error that lists what is wrong with the
// options.
func New(opt Options) (*Summarizer, error) {
	if err := opt.Validate(); err != nil {
		return nil, err
	}
	s := new(Summarizer)
	s.Set(opt)
	return s, nil
}

// Set has a Summarizer, the zero value too, go on with other options, which must be
// valid.
func (s *Summarizer) Set(opt Options) {
	if opt = opt.withDefaults(); s.tables != nil && opt == s.opt {
		return
	}
	s.opt, s.tables, s.tailSigmas = opt, tables(), kernel.NormalQuantile(1e-3*opt.IntegrityRisk)
}

// Summarize fills dst with the posterior of a belief. It returns ErrEmpty for
// a belief without mass, and an error that names the entry for one that is no
// mixture of Gaussians; dst is then as it was.
//
// Masses are divided by their sum; what is off the map is part of the mixture,
// and being lost is not: mean, covariance, radii and modes are those of a vehicle
// that is not. The covariance is the second moment of the
// whole mixture about its mean. The radii are those of circles around the mean,
// outside which lies at most 50, 5, 1 % and the integrity risk of the mixture;
// they are at most 2 % too large and never too small by more than 0.1 %, what
// the quadrature may err.
func (s *Summarizer) Summarize(dst *Posterior, in *Input) error {
	if err := in.check(); err != nil {
		return err
	}
	mean, err := s.load(in)
	if err != nil {
		return err
	}
	dst.TimeNS, dst.Map = in.TimeNS, in.Belief.Map
	dst.MeanFrame, dst.CovFrame = mean, s.spread
	dst.Mean = in.Frame.Inverse(mean)
	dst.Cov = s.trueCov(mean, s.spread)
	scale := s.turned.k

	dst.Speed = in.Speed
	dst.Evidence = append(dst.Evidence[:0], in.Evidence...)
	dst.LogEvidence = in.LogEvidence
	dst.Alarms, dst.Sensors = in.Alarms, in.Sensors
	dst.Counts = Counts{in.Accepted, in.Refused, in.Belief.Pruned, in.Belief.LeftMap, in.RestartMass}

	s.quantities(dst, in)
	s.mostProbable(dst, in)
	s.listEdges(dst, in)
	best, heavy := s.findModes(dst, in)
	if len(s.mass) > wideEntries { // not while radii are found, too
		s.hills, s.modeOf, s.rank = hills{}, nil, nil
	}

	rms := math.Sqrt(s.spread.EE + s.spread.NN)
	s.takeApart(mean, s.spread.EE+s.spread.NN)
	// Each is found to radiusStep by itself: together they must not fall.
	dst.Radius50M = s.radius(0.5, rms) / scale
	dst.Radius95M = max(s.radius(0.05, rms)/scale, dst.Radius50M)
	dst.Radius99M = max(s.radius(0.01, rms)/scale, dst.Radius95M)
	dst.Protection = s.protection(in, rms)
	dst.Protection.RadiusM = max(dst.Protection.RadiusM/scale, dst.Radius99M)
	dst.OffMap, dst.Lost = in.off(), in.Lost
	dst.AlertLimitM = s.opt.AlertLimitM
	dst.Status = statusOf(in.Contradicted, dst.OffMap, best*(1-in.Lost), heavy, dst.Radius95M, s.opt.AlertLimitM)
	return nil
}

// Pose returns the mean and the heading that Summarize would fill in, and nothing
// else of it.
func (s *Summarizer) Pose(in *Input) (mean geo.Point, heading Direction, err error) {
	if err := in.check(); err != nil {
		return mean, heading, err
	}
	if mean, err = s.load(in); err != nil {
		return mean, heading, err
	}
	s.turn(mean)
	for q := in.Belief.Dim; q < in.Belief.K(); q++ {
		if in.Belief.Quantities[q].Name == filter.Heading {
			heading = s.heading(in, q)
		}
	}
	return mean, heading, nil
}

// load copies the entries, with masses that sum to 1, and takes the moments.
func (s *Summarizer) load(in *Input) (mean geo.Point, err error) {
	c := in.Cloud
	n := len(c.Mass)
	sum, e, no := 0.0, 0.0, 0.0
	e0, n0 := c.East[0], c.North[0] // so that distance from the origin costs no digits
	for i, m := range c.Mass {
		v := Cov{c.VarEE[i], c.VarEN[i], c.VarNN[i]}
		// Zero times a sum is zero only if all of it is finite.
		plain := m >= 0 && v.EE >= 0 && v.NN >= 0 && v.EN*v.EN <= v.EE*v.NN &&
			0*(m+c.East[i]+c.North[i]+v.EE+v.EN+v.NN) == 0
		if !plain {
			if err := badEntry(i, m, c.East[i], c.North[i], v); err != nil {
				return mean, err
			}
		}
		sum += m
		e += float64(m * (c.East[i] - e0))
		no += float64(m * (c.North[i] - n0))
	}
	if !(sum > 0) {
		return mean, ErrEmpty
	}
	if math.IsInf(sum, 0) || !geo.Finite(e, no) {
		return mean, badEntry(0, sum, e, no, Cov{})
	}
	s.frame, s.dim = in.Frame, in.Belief.Dim
	s.east = append(s.east[:0], c.East...)
	s.north = append(s.north[:0], c.North...)
	s.mass, s.covs = resize(s.mass, n), resize(s.covs, n)
	mean = geo.Point{E: e0 + e/sum, N: n0 + no/sum}
	s.cells, s.onShare = n, 1
	if in.Off != nil {
		off := in.Off.Probability / (1 - in.Lost)
		s.onShare = 1 - off
		at := s.appendOff(in.Off.Loose, off)
		mean.E += float64(off * (at.E - mean.E))
		mean.N += float64(off * (at.N - mean.N))
	}
	lateral := s.opt.LateralSigmaM * s.opt.LateralSigmaM
	var cov Cov
	typical := 0.0
	for i, m := range c.Mass {
		m = m / sum * s.onShare
		s.mass[i] = m
		v := Cov{c.VarEE[i], c.VarEN[i], c.VarNN[i]}
		if s.dim == 1 {
			typical += float64(m * max(in.Lines.WidthM[c.Chart[i]], sqrt12*math.Sqrt(v.EE+v.NN)))
			v = across(v, lateral)
		} else {
			typical += float64(m * sqrt12 * math.Sqrt(0.5*(v.EE+v.NN)))
		}
		s.covs[i] = v
		de, dn := c.East[i]-mean.E, c.North[i]-mean.N
		cov.EE += float64(m * (v.EE + float64(de*de)))
		cov.EN += float64(m * (v.EN + float64(de*dn)))
		cov.NN += float64(m * (v.NN + float64(dn*dn)))
	}
	for i := n; i < len(s.mass); i++ {
		m, v := s.mass[i], s.covs[i]
		de, dn := s.east[i]-mean.E, s.north[i]-mean.N
		cov.EE += float64(m * (v.EE + float64(de*de)))
		cov.EN += float64(m * (v.EN + float64(de*dn)))
		cov.NN += float64(m * (v.NN + float64(dn*dn)))
	}
	s.spread, s.typicalM = cov, typical/s.onShare
	s.square = Cov{}
	switch {
	case s.dim == 1:
		s.grainM = 0.5 * s.opt.LateralSigmaM
	case in.Belief.K() > 0:
		s.typicalM = max(typical, in.Belief.Lattice.SpacingM)
		s.grainM = 0.5 * typical / sqrt12
	default:
		s.fillSquares(in.Belief.Lattice.SpacingM)
	}
	return mean, nil
}

// wideEntries is from where on memory is given back that the rest of a summary does
// without: it is some dozen megabytes then.
const wideEntries = 1 << 16

const sqrt12 = 3.4641016151377544

// appendOff adds the Gaussians off the map, which hold a share of all, and
// returns their mean.
func (s *Summarizer) appendOff(l *filter.Loose, share float64) (mean geo.Point) {
	k := len(l.Quantities)
	p := k * (k + 1) / 2
	for i, m := range l.Mass {
		e, n := l.Mean[i*k], l.Mean[i*k+1]
		mean.E += float64(m * (e - l.Mean[0]))
		mean.N += float64(m * (n - l.Mean[1]))
		s.east, s.north = append(s.east, e), append(s.north, n)
		s.mass = append(s.mass, m*share)
		c := l.Cov[i*p:]
		s.covs = append(s.covs, Cov{c[0], c[1], c[2]})
	}
	return mean.Add(geo.Point{E: l.Mean[0], N: l.Mean[1]})
}

// fillSquares makes the points of a lattice as wide as its cells: a variance of
// at least h²/12 an axis. The moments do without where the masses' own variance
// is the belief's (the cloud then says 0), but a radius or a region of points
// would end between two of them.
func (s *Summarizer) fillSquares(h float64) {
	s.typicalM = max(s.typicalM, h)
	s.grainM = h
	v := &s.covs[0] // all are alike
	s.square = Cov{EE: max(h*h/12-v.EE, 0), NN: max(h*h/12-v.NN, 0)}
	for i := range s.covs {
		s.covs[i].EE += s.square.EE
		s.covs[i].NN += s.square.NN
	}
}

// across adds the lateral variance to a covariance along a line. That is along
// the tangent t, V = var·ttᵀ, so the lateral variance goes on I - ttᵀ =
// I - V/tr V; on every side where there is no tangent to tell.
func across(v Cov, lateral float64) Cov {
	along := v.EE + v.NN
	if along <= 0 {
		return Cov{lateral, 0, lateral}
	}
	q := lateral / along
	return Cov{
		EE: v.EE + float64(q*v.NN),
		EN: v.EN - float64(q*v.EN),
		NN: v.NN + float64(q*v.EE),
	}
}

// protection applies invariant 1: what the belief has lost may be anywhere, so
// it counts as outside every circle, and more than a tenth of the risk of it
// leaves no circle to speak of.
func (s *Summarizer) protection(in *Input, rms float64) Protection {
	p := Protection{Risk: s.opt.IntegrityRisk}
	if !(in.Lost < 0.1*p.Risk) {
		p.RadiusM, p.Reason = math.Inf(1), ReasonLost
		return p
	}
	dropped := in.Belief.Pruned + in.Belief.LeftMap + in.RestartMass
	if !(dropped < 0.1*p.Risk) {
		p.RadiusM, p.Reason = math.Inf(1), ReasonLostMass
		return p
	}
	p.Bounded = true
	p.RadiusM = s.radius((p.Risk-dropped-in.Lost)/tailExcess, rms)
	return p
}

// turnSquareM is the side of the squares over which the frame's rotation counts
// as constant: it changes by at most 64 m/6378 km·tan 70° = 3e-5 rad to their
// edges.
const turnSquareM = 128

// turn makes s.turned the frame's rotation at a point. It depends on the square
// the point lies in and not on what was asked before.
func (s *Summarizer) turn(at geo.Point) {
	t := &s.turned
	col, row := math.Floor(at.E/turnSquareM+0.5), math.Floor(at.N/turnSquareM+0.5)
	if t.ok && t.col == col && t.row == row && t.frame == s.frame {
		return
	}
	t.ok, t.col, t.row, t.frame = true, col, row, s.frame
	t.g, t.k = s.frame.Convergence(geo.Point{E: col * turnSquareM, N: row * turnSquareM})
	t.s, t.c = kernel.Sincos(t.g)
}

// trueCov turns a covariance in the frame at a point into true east and north:
// frame = k·[c -s; s c]·true.
func (s *Summarizer) trueCov(at geo.Point, v Cov) Cov {
	s.turn(at)
	c, sn, k2 := s.turned.c, s.turned.s, s.turned.k*s.turned.k
	cc, ss, cs := c*c, sn*sn, c*sn
	return Cov{
		EE: (float64(cc*v.EE) + float64(2*float64(cs*v.EN)) + float64(ss*v.NN)) / k2,
		EN: (float64((cc-ss)*v.EN) + float64(cs*(v.NN-v.EE))) / k2,
		NN: (float64(ss*v.EE) - float64(2*float64(cs*v.EN)) + float64(cc*v.NN)) / k2,
	}
}

// resize returns s with length n, keeping its memory if that is enough.
func resize[T any](s []T, n int) []T {
	if cap(s) >= n {
		return s[:n]
	}
	return make([]T, n)
}
