package sensor

import (
	"errors"
	"fmt"
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
	"leadline/engine/kernel"
)

// Context is what a likelihood needs to know besides its measurement. All of
// it is known before the update: the same context and event give the same
// likelihood.
type Context struct {
	Suite      *Suite // with its defaults filled in (Suite.For)
	Frame      geo.Frame
	Dim        int               // 1 on roads, 2 on a plane
	Quantities []filter.Quantity // of the belief; empty on a plane without
	// Pose is where the belief is and, on a plane without a heading among
	// its quantities, which way the vehicle faces, if that is known.
	Pose Pose
	// CellM is the width of a cell: Gaussians are at most about half as wide.
	CellM float64
	// Plane, if there is one, lets heights be looked up beside the vehicle:
	// under a sensor that sits off the reference point, and under the beams
	// of a sounding.
	Plane filter.PlaneSpace
	// Roads finds named roads for sightings; nil knows none.
	Roads Named
	// SincePreviousS is the time since the same sensor's previous event, and
	// TravelledM the distance measured since then; +Inf for its first.
	SincePreviousS float64
	TravelledM     float64
}

// Named is a space that has named parts.
type Named interface {
	// Named returns the charts of the roads of a name, ascending; none if
	// there is no such road.
	Named(name string) []int32
	// Polyline returns the vertices of a chart in the frame.
	Polyline(chart int32) (eastM, northM []float64)
}

// ErrWrongSpace is what Likelihoods and Supports return (wrapped) for a kind
// that means nothing where the vehicle is.
var ErrWrongSpace = errors.New("this kind cannot be used here")

// Supports reports whether a kind can be used on roads (dim 1) or on a plane
// (dim 2) by a belief over qs: the error wraps ErrWrongSpace and says why not.
func Supports(m Measurement, dim int, qs []filter.Quantity) error {
	mustDim(dim)
	no := func(why string) error { return fmt.Errorf("%s: %w: %s", m.Kind(), ErrWrongSpace, why) }
	heading := filter.Index(qs, filter.Heading) >= 0
	needs := "it needs a heading: declare the sensor in the suite"
	switch m := m.(type) {
	case Travel, BodyDisplacement:
		if dim == 2 && !heading {
			return no(needs)
		}
	case Turn:
		if !heading {
			return no(needs)
		}
	case Speed:
		if dim == 2 && !heading && !m.HasCourse {
			return no("a speed without course needs a heading: declare the sensor in the suite")
		}
	case HeadingFix:
		if dim == 2 && !heading {
			return no(needs)
		}
	case Barometer:
		if dim == 2 {
			return no("on a plane the vehicle's altitude says nothing about where it is; send clearance")
		}
	case Sighting:
		if dim == 2 && m.Road != "" {
			return no("a plane has no roads; give an area")
		}
	}
	return nil
}

// Likelihoods returns what a prepared event (Suite.Prepare) says, in the order
// in which filter.Update should take it: each is a filter.Likelihood or a
// filter.LinearLikelihood. A linear one updates the quantities too; on a
// lattice without any, filter.Update evaluates it at the cells. Only soundings
// with beams give more than one.
//
// Motions give none. The error wraps ErrWrongSpace where the kind means
// nothing.
func Likelihoods(ev Event, ctx Context) ([]any, error) {
	if err := Supports(ev.Measurement, ctx.Dim, ctx.Quantities); err != nil {
		return nil, err
	}
	d := ctx.Suite.Sensor(ev.Sensor, ev.Measurement.Kind())
	one := func(l any, err error) ([]any, error) {
		if err != nil {
			return nil, fmt.Errorf("sensor %q: %w", ev.Sensor, err)
		}
		return []any{l}, nil
	}
	switch m := ev.Measurement.(type) {
	case HeadingFix:
		return one(m.likelihood(&ctx, d), nil)
	case Clearance:
		return one(m.likelihood(&ctx, d), nil)
	case Sounding:
		return m.likelihoods(&ctx, d), nil
	case Barometer:
		return one(m.likelihood(&ctx, d), nil)
	case Range:
		return one(m.likelihood(&ctx, d))
	case Bearing:
		return one(m.likelihood(&ctx, d))
	case AcousticBearing:
		return one(m.likelihood(&ctx, d))
	case Fix:
		return one(m.likelihood(&ctx, d))
	case Sighting:
		return one(m.likelihood(&ctx))
	}
	return nil, nil
}

// power is the share of an independent measurement that one counts for whose
// error lasts for the sensor's correlation time.
func (c *Context) power(d Sensor) float64 {
	corr := d.correlation()
	if corr == 0 || !(c.SincePreviousS < corr) {
		return 1
	}
	return math.Max(c.SincePreviousS/corr, 1e-6)
}

// noise is the sensor's mixture around a covariance: its own Gaussian, the
// heavy second one if the suite has it, and the flat part.
func (c *Context) noise(d Sensor, cov [3]float64, flatDensity float64) filter.Noise {
	out, heavy := d.outlier(), d.HeavyProbability
	n := filter.Noise{
		Parts:      []filter.NoisePart{{Weight: 1 - out - heavy, Cov: cov}},
		FlatWeight: out, FlatDensity: flatDensity,
		Power: c.power(d),
	}
	if heavy > 0 {
		f := d.HeavyFactor * d.HeavyFactor
		n.Parts = append(n.Parts, filter.NoisePart{Weight: heavy, Cov: [3]float64{f * cov[0], f * cov[1], f * cov[2]}})
	}
	return n
}

func variance1(sigma float64) [3]float64 { return [3]float64{sigma * sigma, 0, sigma * sigma} }

// logDensity is ln of a one-row noise's density at a residual, without its
// power: what Terms.Flat takes.
func logDensity(n *filter.Noise, residual, extra float64) float64 {
	return logMixture(n, func(variance float64) float64 {
		return -kernel.LogSqrt2Pi - 0.5*(kernel.Log(variance)+residual*residual/variance)
	}, extra)
}

// logMixture is ln(Σ weight·exp(part(variance + extra)) + flat), summed from
// its largest term, so that it is finite wherever the parts are.
func logMixture(n *filter.Noise, part func(variance float64) float64, extra float64) float64 {
	flat := kernel.Log(n.FlatWeight * n.FlatDensity)
	var logs [4]float64
	most := flat
	for i, p := range n.Parts {
		logs[i] = kernel.Log(p.Weight) + part(p.Cov[0]+extra)
		most = math.Max(most, logs[i])
	}
	sum := kernel.Exp(flat - most)
	for _, l := range logs[:len(n.Parts)] {
		sum += kernel.Exp(l - most)
	}
	return most + kernel.Log(sum)
}

// stride is the number of quantities a row of Terms has.
func stride(at *filter.Columns, qs []filter.Quantity) int { return max(len(qs), at.Dim) }

// point looks up a beacon's point in the frame.
func (c *Context) point(p geo.LonLat, what string) (geo.Point, error) {
	q := c.Frame.Forward(p)
	if !geo.Finite(q.E, q.N) || q.Norm() > maxFarM {
		lon, lat := p.Degrees()
		remedy := "check the position and the map"
		swapped := geo.LonLat{Lon: p.Lat, Lat: p.Lon}
		if other := c.Frame.Forward(swapped); swapped.Check() == nil && other.Norm() < maxFarM/10 {
			remedy = fmt.Sprintf("with its longitude and latitude swapped it would be %.0f km from there", other.Norm()/1000)
		}
		return q, fmt.Errorf("%s at lon %v, lat %v is more than %v km from the map's middle: %s", what, lon, lat, maxFarM/1000, remedy)
	}
	return q, nil
}
