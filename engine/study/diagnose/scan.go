package diagnose

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"leadline/engine/geo"
	"leadline/engine/kernel"
	"leadline/engine/sensor"
)

// scan is a family of mistakes that differ in a value, which is searched for:
// first at ±step, ±2·step … ±reach, then between the neighbours of the best.
type scan struct {
	family            string
	step, reach, fine float64
	// least is the size from which it is a mistake and not an error that
	// sensors have.
	least float64
	// make makes the mistake of a value that stands for all within ±half.
	make func(value, half float64) Mistake
	// lossNats is what standing for its neighbours costs a coarse value for each
	// measurement of the sensor at most, 0 where half does not matter. Where it
	// does, none is among the coarse values, which then compare with each other.
	lossNats float64
	sensor   string
	// north is set for directions; see grids.
	north bool
	// shown makes what people read of a value; nil: the value itself.
	shown func(value float64) float64
	// against are the families that it is there to challenge; see challenge.
	against []string
}

// challenges reports whether a mistake is one that a search is there to challenge.
func (s *scan) challenges(m *Mistake) bool {
	return m.search != s && slices.Contains(s.against, m.family)
}

// values is how many are told apart.
func (s *scan) values() int { return int(2 * s.reach / s.fine) }

// coarse are the values that are tried first.
func (s *scan) coarse() []Mistake {
	var out []Mistake
	if s.broadens() {
		out = append(out, s.named(0, s.step/2))
	}
	for n := 1; float64(n)*s.step <= s.reach; n++ {
		for _, v := range []float64{float64(n) * s.step, -float64(n) * s.step} {
			out = append(out, s.named(v, s.step/2))
		}
	}
	return out
}

func (s *scan) broadens() bool { return s.lossNats > 0 }

func (s *scan) named(value, half float64) Mistake {
	m := s.make(value, half)
	m.family, m.search, m.Value = s.family, s, value
	return m
}

// The sizes of the searches. Geoids and local datums are within ±110 m of each
// other and of the ellipsoid (EGM96 undulations reach from -107 to 85 m). Away
// from the poles declinations are within ±40° or so.
const (
	datumStepM, datumReachM, datumFineM, datumLeastM         = 10.0, 110.0, 1.25, 3.0
	northStepDeg, northReachDeg, northFineDeg, northLeastDeg = 4.0, 44.0, 0.5, 3.0
	// Logarithms of a factor: from 1/12 to 12; less than 6 % is an error that
	// wheels, logs and inertial units have.
	factorStep, factorReach, factorFine, factorLeast = 0.1, 2.5, 0.0125, 0.06
)

// scans lists the searches that a log asks for.
func scans(vs []voice, suite *sensor.Suite) []scan {
	var out []scan
	var directed []string
	kinds := map[string]bool{}
	for _, v := range vs {
		if v.heights() {
			noiseM := suite.Sensor(v.sensor, v.kind).Noise.SigmaM
			sigmaM := v.leastSigmaM(suite)
			out = append(out, scan{
				family: v.datumFamily(), step: datumStepM, reach: datumReachM, fine: datumFineM, least: datumLeastM,
				make:     func(value, half float64) Mistake { return v.offset(value, half, noiseM) },
				lossNats: 0.5 * kernel.Log(1+datumStepM*datumStepM/4/(sigmaM*sigmaM)), sensor: v.sensor,
			})
		}
		if v.directed() {
			directed = append(directed, v.sensor)
			kinds[v.sensor+"\x00"+v.kind] = true
			out = append(out, northScan(v.sensor, v.is))
		}
	}
	if len(directed) > 1 {
		out = append(out, northScan(strings.Join(directed, ", "), func(s, k string) bool { return kinds[s+"\x00"+k] }))
	}
	return out
}

// leastSigmaM is the least that is said of how exact heights are, the suite
// included.
func (v voice) leastSigmaM(suite *sensor.Suite) float64 {
	return cmp.Or(v.sigmaM, suite.Sensor(v.sensor, v.kind).Noise.SigmaM, datumStepM)
}

// factorScans lists the searches for a factor.
func factorScans(vs []voice, suite *sensor.Suite) []scan {
	var out []scan
	for _, v := range vs {
		switch name := v.lengths(); {
		case name != "":
			out = append(out, v.factorScan(name))
		case v.kind == sensor.KindSounding:
			out = append(out, v.depthScan(v.leastSigmaM(suite)))
		}
	}
	return out
}

// lengths names the numbers that say how far or how fast a vehicle moves, ""
// for a voice that has none.
func (v voice) lengths() string {
	switch v.kind {
	case sensor.KindTravel, sensor.KindDisplacement, sensor.KindBodyDisplacement:
		return "distances"
	case sensor.KindSpeed:
		return "speeds"
	}
	return ""
}

// factorFamily is what all mistaken units of a sensor's lengths are of: if one
// of them is a usual one, that is the mistake; if not, none of them is, however
// much better the log fits with one that is nearer.
func (v voice) factorFamily() string { return "factor " + v.sensor + " " + v.kind }

// datumFamily is what all offsets of a sensor's heights are of.
func (v voice) datumFamily() string { return "datum " + v.sensor }

func (v voice) factorScan(name string) scan {
	return scan{
		family: v.factorFamily(), step: factorStep, reach: factorReach, fine: factorFine, least: factorLeast, sensor: v.sensor,
		make: func(value, _ float64) Mistake {
			return v.anyFactor(name, distance, kernel.Exp(value), false, "look at the wheel's size, its ticks a metre, the scale and the unit")
		},
		shown: kernel.Exp, against: []string{v.factorFamily()},
	}
}

// depthScan searches for a factor of depths, to challenge an offset: where the
// floor is of nearly one depth, that does much of what a factor would. Units it
// leaves alone: tides and errors of the map cost the right unit so much that by
// chance another factor, in another place, fits better.
func (v voice) depthScan(sigmaM float64) scan {
	half := factorStep / 2 * v.depthM
	return scan{
		family: v.factorFamily(), step: factorStep, reach: factorReach, fine: factorFine, least: factorLeast, sensor: v.sensor,
		make: func(value, half float64) Mistake {
			m := v.anyFactor("depths", depth, kernel.Exp(value), true, "look at the unit, and at the sound speed that the sounder was set to")
			exact := m.mend
			m.mend = func(m sensor.Measurement) sensor.Measurement {
				s := exact(m).(sensor.Sounding)
				return broaden(s, half*math.Abs(s.DepthBelowTransducerM+s.TransducerDepthM), sigmaM)
			}
			return m
		},
		lossNats: 0.5 * kernel.Log(1+half*half/(sigmaM*sigmaM)),
		shown:    kernel.Exp, against: []string{v.datumFamily()},
	}
}

// anyFactor is a factor that was searched for.
func (v voice) anyFactor(name string, p part, f float64, measured bool, remedy string) Mistake {
	m := v.factor(name+" off by a factor of no usual unit, to be multiplied", p, f, measured, remedy)
	m.Unit = "times"
	return m
}

func northScan(who string, of func(s, k string) bool) scan {
	return scan{
		family: "north " + who, step: northStepDeg, reach: northReachDeg, fine: northFineDeg, least: northLeastDeg, north: true,
		make: func(value, _ float64) Mistake {
			return northOff("directions from another north", who, "add the declination to the directions, or let them count from true north", of, geo.Rad(value))
		},
	}
}

// refine searches around the best of the coarse values; the last values are
// exact ones, and the entrant returned is the best of those.
func (c *course) refine(s *scan, coarse *entrant) *entrant {
	best := coarse
	for half := s.step / 2; ; half /= 2 {
		exact := half/2 < s.fine
		broad := half / 2
		if exact {
			broad = 0
		}
		value := best.mistake.Value
		ms := []Mistake{s.named(value-half, broad), s.named(value+half, broad)}
		if s.broadens() { // what was best stood for more
			ms, best = append(ms, s.named(value, broad)), nil
		}
		for _, e := range c.race(ms) {
			if c.finished(e) && (best == nil || e.last() > best.last()) {
				best = e
			}
		}
		if best == nil || exact {
			return best
		}
	}
}

// grids lists, for the directions of a search, the norths that are known where
// a vehicle was: those given, and that of the UTM zone. What is too near true
// north is left out.
func (s *scan) grids(given []Grid, at geo.LonLat) []Mistake {
	if !s.north {
		return nil
	}
	var out []Mistake
	var taken []float64
	for _, g := range append(slices.Clone(given), utm(at)) {
		deg := geo.Deg(geo.WrapPi(g.Convergence(at)))
		same := func(o float64) bool { return math.Abs(o-deg) < northFineDeg/2 }
		if math.Abs(deg) < s.least || slices.ContainsFunc(taken, same) {
			continue
		}
		taken = append(taken, deg)
		m := s.named(deg, 0)
		m.search, m.Name = nil, "directions from grid north ("+g.Name+")"
		m.Remedy = "add the grid's convergence to the directions, or let them count from true north"
		out = append(out, m)
	}
	return out
}

// utm is the grid of the UTM zone of a place, by the rule of six degrees.
func utm(at geo.LonLat) Grid {
	lon, _ := at.Degrees()
	zone := min(int(math.Floor((lon+180)/6))+1, 60)
	p := geo.NewTransverseMercator(geo.WGS84, geo.FromDegrees(float64(6*zone-183), 0), 0.9996, 500000, 0)
	return Grid{fmt.Sprintf("UTM zone %d", zone), func(at geo.LonLat) float64 { g, _ := p.Convergence(at); return g }}
}
