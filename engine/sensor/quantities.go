package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/geo"
)

// Quantities are what a belief is kept over, for the kinds that the suite
// declares (every kind, if it declares no sensor, on roads; none on a plane).
//
// On roads: the position in the cell; the heading, if something turns or
// measures it (prior 10° about the road's heading, the spread of a driven
// heading about a mapped one; drift 0.1°/√s, which over 100 s covers the 0.8°
// of a gyro off by 30 °/h); the odometer's scale, if there is one (prior 2 %,
// drift 1e-5/√s; wheel odometry is good to 0.5-2 % of distance). All three
// are practice.
//
// On a plane: nothing, unless a motion is in the vehicle's own axes or a
// nuisance is described; then east, north, and with such a motion the heading
// (prior uniform: σ = π/√3) and the odometer's scale. An odometer's scale
// applies to travel and body_displacement, not to speed.
//
// A velocity that the suite has estimated comes right after the position. The other
// nuisances are there if a sensor describes them.
func (s *Suite) Quantities(dim int) []filter.Quantity {
	mustDim(dim)
	any := func(of func(Sensor) bool) bool {
		for _, d := range s.Sensors {
			if of(d) {
				return true
			}
		}
		return dim == 1 && len(s.Sensors) == 0
	}
	body := any(func(d Sensor) bool {
		return d.Kind == KindTravel || d.Kind == KindTurn || d.Kind == KindBodyDisplacement ||
			d.Kind == KindSpeed && !d.Course
	})
	heading := any(func(d Sensor) bool {
		return d.Kind == KindTurn || d.Kind == KindBodyDisplacement || d.Kind == KindHeading || d.has(NuisanceHeading)
	})
	odometer := any(func(d Sensor) bool {
		return d.Kind == KindTravel || d.Kind == KindBodyDisplacement || d.has(NuisanceOdometerScale)
	})
	if dim == 2 {
		heading = body || s.declares(NuisanceHeading)
	}
	var of []filter.Quantity
	for _, k := range nuisanceKinds {
		var n Nuisance
		switch {
		case k.name == NuisanceHeading && heading:
			n = s.nuisance(k.name, headingDefault(dim))
		case k.name == NuisanceOdometerScale && odometer && (dim == 1 || heading):
			n = s.nuisance(k.name, scaleDefault)
		case k.name != NuisanceHeading && k.name != NuisanceOdometerScale && s.declares(k.name) && (dim == 1 && k.roads || dim == 2 && k.plane):
			n = s.nuisance(k.name, Nuisance{})
		default:
			continue
		}
		q := filter.Quantity{
			Name: k.quantity, Angular: k.quantity == filter.Heading,
			PriorMean: n.Mean * k.si, PriorVar: square(n.Sigma * k.si), DriftVar: square(n.DriftPerSqrtS * k.si),
		}
		if q.Angular {
			q.PriorMean = geo.WrapPi(q.PriorMean)
		}
		of = append(of, q)
	}
	of = append(s.Vehicle.velocities(dim), of...)
	switch {
	case dim == 1:
		return append([]filter.Quantity{{Name: filter.Along}}, of...)
	case len(of) == 0:
		return nil
	}
	return append([]filter.Quantity{{Name: filter.East}, {Name: filter.North}}, of...)
}

// headingDefault is the heading's nuisance where no sensor describes it.
func headingDefault(dim int) Nuisance {
	sigma := geo.Rad(10)
	if dim == 2 {
		sigma = math.Pi / math.Sqrt(3)
	}
	return Nuisance{Sigma: geo.Deg(sigma), DriftPerSqrtS: 0.1}
}

// scaleDefault is the odometer scale's.
var scaleDefault = Nuisance{Sigma: 0.02, DriftPerSqrtS: 1e-5}

// Estimates returns the sensor that the suite has a nuisance of.
func (s *Suite) Estimates(nuisance string) (name string, ok bool) {
	for _, d := range s.Sensors {
		if d.has(nuisance) {
			return d.Name, true
		}
	}
	return "", false
}

func (d Sensor) has(nuisance string) bool {
	for _, n := range d.Nuisances {
		if n.Name == nuisance {
			return true
		}
	}
	return false
}

func (s *Suite) declares(nuisance string) bool {
	_, ok := s.Estimates(nuisance)
	return ok
}

// nuisance returns the first sensor's nuisance of a name, or the default.
func (s *Suite) nuisance(name string, or Nuisance) Nuisance {
	for _, d := range s.Sensors {
		for _, n := range d.Nuisances {
			if n.Name == name {
				return n
			}
		}
	}
	return or
}
