package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// alignmentM is the distance over which a vehicle's heading and its road's are
// compared once: lane changes and the mapped line's kinks last about that
// long. With the space's HeadingVar (about 10° squared on a straight road) it
// is what recorded drives asked for (practice; 6° was overconfident).
const alignmentM = 5.0

// RoadAlignment is the pseudo-measurement that ties the heading quantity to
// the road's heading: 0 = heading - road's heading + v. Most vehicles follow
// the road, v ~ N(0, (10°)²), past junctions too; turningShare of them do what
// the road does near by, v ~ N(0, HeadingVar), which near a junction or a bend
// is wide; 0.01 are outliers with density 1/2π. With the wide part alone, every
// junction passed straight on would count against the road that has it.
// It is to be taken after each step, and counts as travelledM/5 m of an
// independent comparison, at most one: so n steps over 5 m count as one
// whatever n. ok is false if nothing was travelled or the belief has no
// heading.
func RoadAlignment(qs []filter.Quantity, travelledM float64) (l filter.LinearLikelihood, ok bool) {
	var a Alignment
	return a.Road(qs, travelledM)
}

// Alignment is the memory of a RoadAlignment. The zero value is ready.
type Alignment struct {
	l     alignment
	parts [2]filter.NoisePart
}

// Road is RoadAlignment in this memory: it holds until the next call.
func (a *Alignment) Road(qs []filter.Quantity, travelledM float64) (l filter.LinearLikelihood, ok bool) {
	h := filter.Index(qs, filter.Heading)
	power := math.Min(1, math.Abs(travelledM)/alignmentM)
	if h < 0 || !(power > 0) || filter.Index(qs, filter.Along) != 0 {
		return nil, false
	}
	// The variances are the position's own.
	a.parts = [2]filter.NoisePart{{Weight: 0.99 * (1 - turningShare)}, {Weight: 0.99 * turningShare}}
	a.l = alignment{heading: h, noise: filter.Noise{
		Parts: a.parts[:], FlatWeight: 0.01, FlatDensity: 1 / (2 * math.Pi), Power: power,
	}}
	return &a.l, true
}

const (
	// turningShare: of the ways through a junction one in two or three turns
	// (practice).
	turningShare = 0.4
	// followVar is the variance of a heading about the road that it follows:
	// (10°)², wander within the road.
	followVar = (10 * math.Pi / 180) * (10 * math.Pi / 180)
)

type alignment struct {
	heading int
	noise   filter.Noise
}

var _ filter.LinearLikelihood = (*alignment)(nil)

func (l *alignment) Wants() filter.Wants { return filter.WantPosition | filter.WantHeading }
func (l *alignment) Rows() int           { return 1 }
func (l *alignment) Noise() filter.Noise { return l.noise }

// Circular implements filter.Circular.
func (l *alignment) Circular() {}

// Linearize implements filter.LinearLikelihood.
func (l *alignment) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	for i := range at.East {
		t.Residual[i] = geo.WrapPi(at.Heading[i] - mean[i*k+l.heading])
		t.Row[i*k] = -at.Curvature[i]
		t.Row[i*k+l.heading] = 1
		t.Wide[i] = max(at.HeadingVar[i], minHeadingVar)
		t.Extra[i] = min(followVar, t.Wide[i])
	}
}

// minHeadingVar keeps a space without heading variance from a division by
// zero: 0.1°.
const minHeadingVar = 3e-6

// CrossTrack is what a ground displacement D says on roads beyond its
// component along the road: the component across the road's direction n at
// its middle is 0 + v,
//
//	v ~ N(0, nᵀCn + HeadingVar·|D|²),
//
// tempered by |D|/5 m like RoadAlignment, whose place it takes for a vehicle
// whose heading is not estimated. It is to be taken after the step; ok is
// false unless the step moved by a ground displacement.
func (m *Motion) CrossTrack(frame geo.Frame, pose Pose) (l filter.LinearLikelihood, ok bool) {
	b := m.body()
	g := m.ground(b.turn)
	if g.covered <= b.covered {
		return nil, false
	}
	d, cov := inFrame(g, frame, pose.At, false)
	length := d.Norm()
	if !(length > 0) {
		return nil, false
	}
	span := 2 * (length + 3*math.Sqrt(largerVariance(cov)))
	return &crossTrack{d: d, cov: cov, noise: filter.Noise{
		Parts:      []filter.NoisePart{{Weight: 0.99}},
		FlatWeight: 0.01, FlatDensity: 1 / span, Power: math.Min(1, length/alignmentM),
	}}, true
}

type crossTrack struct {
	d     geo.Point
	cov   [3]float64
	noise filter.Noise
}

var _ filter.LinearLikelihood = (*crossTrack)(nil)

func (l *crossTrack) Wants() filter.Wants { return filter.WantPosition | filter.WantHeading }
func (l *crossTrack) Rows() int           { return 1 }
func (l *crossTrack) Noise() filter.Noise { return l.noise }

// Linearize implements filter.LinearLikelihood: g = D·n with n = (t_N, -t_E)
// the right-hand normal half of the way back, dn/ds = -κ t.
func (l *crossTrack) Linearize(t *filter.Terms, at *filter.Columns, qs []filter.Quantity, mean []float64) {
	k := stride(at, qs)
	d2 := float64(l.d.E*l.d.E) + float64(l.d.N*l.d.N)
	for i := range at.East {
		way := float64(l.d.E*at.TangentE[i]) + float64(l.d.N*at.TangentN[i])
		tE, tN := midTangent(at, i, -0.5*way)
		t.Residual[i] = -(float64(l.d.E*tN) - float64(l.d.N*tE))
		t.Row[i*k] = -at.Curvature[i] * (float64(l.d.E*tE) + float64(l.d.N*tN))
		nCn := float64(tN*tN*l.cov[0]) - float64(2*tN*tE*l.cov[1]) + float64(tE*tE*l.cov[2])
		t.Extra[i] = nCn + float64(max(at.HeadingVar[i], minHeadingVar)*d2)
	}
}
