package sensor

import (
	"math"
	"slices"
	"strings"

	"leadline/engine/filter"
)

// Nuisance is something estimated along the way: where it starts and how it
// wanders. Its unit is in its name.
type Nuisance struct {
	Name          string  `yaml:"name"`
	Mean          float64 `yaml:"mean"`
	Sigma         float64 `yaml:"sigma"`
	DriftPerSqrtS float64 `yaml:"drift_per_sqrt_s"`
}

// The nuisances that a suite may name.
const (
	NuisanceHeading         = "heading_deg"
	NuisanceOdometerScale   = "odometer_scale"
	NuisanceGyroBias        = "gyro_bias_dps"
	NuisanceAltimeterOffset = "altimeter_offset_m"
	NuisanceBarometerOffset = "barometer_offset_m"
	NuisanceTide            = "tide_m"
	NuisanceSoundSpeed      = "sound_speed_scale"
	NuisanceVelocityEast    = "velocity_error_east_mps"
	NuisanceVelocityNorth   = "velocity_error_north_mps"
	NuisanceAzimuth         = "azimuth_error_deg"
)

// nuisanceKind is what all nuisances of a name have in common.
type nuisanceKind struct {
	name, quantity string
	unit           string  // as the posterior says it; "" for a ratio
	si             float64 // the quantity's unit over the nuisance's
	// kinds are the measurements that depend on it, nil for any; shared says
	// that it is the same for all sensors of these kinds, as the tide is, and
	// not a matter of the one sensor that describes it.
	kinds        []string
	shared       bool
	roads, plane bool // where it means something
	// steady says that it may be without drift. A random walk without drift
	// ends as a constant of which nothing more is learnt, whatever comes.
	steady                          bool
	mostMean, leastSigma, mostSigma float64
	mostDrift                       float64
}

// nuisanceKinds is in the order of a belief's quantities.
var nuisanceKinds = []nuisanceKind{
	{
		name: NuisanceHeading, quantity: filter.Heading, unit: "deg", si: math.Pi / 180, shared: true, roads: true, plane: true, steady: true,
		mostMean: 360, leastSigma: 1e-3, mostSigma: 104, mostDrift: 90, // a uniform direction: 180°/√3
	},
	{
		name: NuisanceOdometerScale, quantity: filter.OdometerScale, si: 1, kinds: []string{KindTravel, KindBodyDisplacement}, shared: true,
		roads: true, plane: true, steady: true, mostMean: 0.5, leastSigma: 1e-6, mostSigma: 0.5, mostDrift: 0.1,
	},
	{
		name: NuisanceGyroBias, quantity: filter.GyroBias, unit: "deg/s", si: math.Pi / 180, kinds: []string{KindTurn},
		roads: true, plane: true, mostMean: 10, leastSigma: 1e-7, mostSigma: 10, mostDrift: 1,
	},
	{
		name: NuisanceAltimeterOffset, quantity: filter.AltimeterOffset, unit: "m", si: 1, kinds: []string{KindClearance},
		roads: true, plane: true, mostMean: 1e4, leastSigma: 1e-3, mostSigma: 1e4, mostDrift: 100,
	},
	{
		name: NuisanceBarometerOffset, quantity: filter.BarometerOffset, unit: "m", si: 1, kinds: []string{KindBarometer},
		roads: true, mostMean: 1e4, leastSigma: 1e-3, mostSigma: 1e4, mostDrift: 100,
	},
	{
		name: NuisanceTide, quantity: filter.Tide, unit: "m", si: 1, kinds: []string{KindSounding}, shared: true,
		roads: true, plane: true, mostMean: 100, leastSigma: 1e-3, mostSigma: 100, mostDrift: 10,
	},
	{
		name: NuisanceSoundSpeed, quantity: filter.SoundSpeedScale, si: 1, kinds: []string{KindSounding}, shared: true,
		roads: true, plane: true, mostMean: 0.2, leastSigma: 1e-6, mostSigma: 0.2, mostDrift: 0.01,
	},
	{
		name: NuisanceVelocityEast, quantity: filter.VelocityErrorEast, unit: "m/s", si: 1, kinds: []string{KindDisplacement},
		plane: true, mostMean: 1e3, leastSigma: 1e-6, mostSigma: 1e3, mostDrift: 100,
	},
	{
		name: NuisanceVelocityNorth, quantity: filter.VelocityErrorNorth, unit: "m/s", si: 1, kinds: []string{KindDisplacement},
		plane: true, mostMean: 1e3, leastSigma: 1e-6, mostSigma: 1e3, mostDrift: 100,
	},
	{
		// At 10° the second order, which is left out, is 1.5 % of the way.
		name: NuisanceAzimuth, quantity: filter.AzimuthError, unit: "deg", si: math.Pi / 180, kinds: []string{KindDisplacement},
		plane: true, mostMean: 10, leastSigma: 1e-4, mostSigma: 10, mostDrift: 1,
	},
}

// NuisanceNames lists the nuisances that a suite may name.
func NuisanceNames() []string {
	names := make([]string, len(nuisanceKinds))
	for i, k := range nuisanceKinds {
		names[i] = k.name
	}
	return names
}

func findNuisance(match func(nuisanceKind) bool) (nuisanceKind, bool) {
	i := slices.IndexFunc(nuisanceKinds, match)
	if i < 0 {
		return nuisanceKind{}, false
	}
	return nuisanceKinds[i], true
}

// InUnits says a quantity's mean and sigma as a suite says them: by the
// nuisance's name and in its unit, which is "" for a ratio. A quantity of
// another name is returned as it is.
func InUnits(quantity string, mean, sigma float64) (name, unit string, m, s float64) {
	k, ok := findNuisance(func(k nuisanceKind) bool { return k.quantity == quantity })
	if !ok {
		return quantity, "", mean, sigma
	}
	return k.name, k.unit, mean / k.si, sigma / k.si
}

// nuisance checks what a sensor of the suite says of one.
func (f *findings) nuisance(path string, n Nuisance, d Sensor, s *Suite) {
	k, ok := findNuisance(func(k nuisanceKind) bool { return k.name == n.Name })
	if !ok {
		f.add(path+".name", "%q is no nuisance: there are %s", n.Name, strings.Join(NuisanceNames(), ", "))
		return
	}
	of := func(d Sensor) bool { return k.kinds == nil || slices.Contains(k.kinds, d.Kind) }
	if !of(d) && !(k.shared && slices.ContainsFunc(s.Sensors, of)) {
		f.add(path+".name", "nothing that this sensor measures depends on %s: describe it at one of kind %s", n.Name, strings.Join(k.kinds, " or "))
	}
	for _, pair := range [][2]string{{NuisanceVelocityEast, NuisanceVelocityNorth}, {NuisanceVelocityNorth, NuisanceVelocityEast}} {
		if n.Name == pair[0] && !d.has(pair[1]) {
			f.add(path+".name", "%s and %s go together, at one sensor", pair[0], pair[1])
		}
	}
	f.within(path+".mean", n.Mean, -k.mostMean, k.mostMean)
	if n.Sigma == 0 {
		f.add(path+".sigma", "%s needs a sigma, what is known of it at the start: a number from %v to %v", n.Name, k.leastSigma, k.mostSigma)
	} else {
		f.within(path+".sigma", n.Sigma, k.leastSigma, k.mostSigma)
	}
	f.within(path+".drift_per_sqrt_s", n.DriftPerSqrtS, 0, k.mostDrift)
	if n.DriftPerSqrtS == 0 && !k.steady {
		f.add(path+".drift_per_sqrt_s", "%s needs a drift above 0: what never changes is known too well in the end", n.Name)
	}
}

// tooMany reports the nuisance with which the belief would be over more
// quantities than the filter keeps.
func (f *findings) tooMany(s *Suite) {
	for _, dim := range []int{1, 2} {
		n := len(s.Quantities(dim))
		if n <= filter.MaxK {
			continue
		}
		for i := len(s.Sensors) - 1; i >= 0; i-- {
			if j := len(s.Sensors[i].Nuisances) - 1; j >= 0 {
				f.add(nuisancePath(i, j)+".name", "with it a belief is over %d quantities, the position among them, and the cost grows with their square: at most %d are possible, leave %d out", n, filter.MaxK, n-filter.MaxK)
				return
			}
		}
	}
}

// CheckSpace reports nuisances that mean nothing on roads (dim 1) or on a
// plane (dim 2).
func (s *Suite) CheckSpace(dim int) error {
	mustDim(dim)
	p := problems{what: "suite"}
	for i, d := range s.Sensors {
		for j, n := range d.Nuisances {
			k, ok := findNuisance(func(k nuisanceKind) bool { return k.name == n.Name })
			switch {
			case ok && dim == 1 && !k.roads:
				p.addf("%s.name: %s is estimated over height maps alone: leave it out on roads", nuisancePath(i, j), n.Name)
			case ok && dim == 2 && !k.plane:
				p.addf("%s.name: %s is estimated on roads alone: leave it out over height maps", nuisancePath(i, j), n.Name)
			}
		}
	}
	return p.err()
}
