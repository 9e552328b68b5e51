package diagnose

import "leadline/engine/sensor"

// foot is the international foot of 0.3048 m, and of it a yard has 3, a fathom
// 6 and a mile 5280; the nautical mile has 1852 m and is an hour's way at a
// knot (SI brochure, 8th edition, table 8; the foot by the agreement of 1959).
const (
	foot         = 0.3048
	yard         = 3 * foot
	fathom       = 6 * foot
	mile         = 5280 * foot
	nauticalMile = 1852.0
	hour         = 3600.0
)

// confusion is numbers in one unit that were taken as numbers in another one.
type confusion struct {
	name string
	// factor makes what it should be of what it was taken for; remedy says how.
	factor float64
	remedy string
}

// both are the two ways in which two units are taken for each other. The ratio
// is that of the first to the second, and digits is how it is said.
func both(first, second string, ratio float64, digits string) []confusion {
	return []confusion{
		{"in " + first + ", taken as " + second, ratio, "multiply by " + digits},
		{"in " + second + ", taken as " + first, 1 / ratio, "divide by " + digits},
	}
}

func join(lists ...[]confusion) (out []confusion) {
	for _, l := range lists {
		out = append(out, l...)
	}
	return out
}

// What distances, speeds and heights are taken for. A distance may have been
// made of a speed, whose unit it then has mistaken: a mile for a kilometre is
// also a mile an hour for a kilometre an hour.
var (
	tenfold = []confusion{
		{"ten times too large", 0.1, "divide by 10"},
		{"ten times too small", 10, "multiply by 10"},
	}
	distances = join(
		tenfold,
		both("miles or mph", "kilometres or km/h", mile/1000, "1.609"),
		both("nautical miles or knots", "kilometres or km/h", nauticalMile/1000, "1.852"),
		both("nautical miles or knots", "miles or mph", nauticalMile/mile, "1.151"),
		both("feet", "metres", foot, "0.3048"),
		both("yards", "metres", yard, "0.9144"),
		both("km/h", "m/s", 1000/hour, "0.2778"),
		both("mph", "m/s", mile/hour, "0.4470"),
		both("knots", "m/s", nauticalMile/hour, "0.5144"),
	)
	speeds = join(
		tenfold,
		both("kilometres an hour", "m/s", 1000/hour, "0.2778"),
		both("knots", "m/s", nauticalMile/hour, "0.5144"),
		both("miles an hour", "m/s", mile/hour, "0.4470"),
		both("feet a second", "m/s", foot, "0.3048"),
		both("miles an hour", "kilometres an hour", mile/1000, "1.609"),
		both("knots", "kilometres an hour", nauticalMile/1000, "1.852"),
		both("knots", "miles an hour", nauticalMile/mile, "1.151"),
	)
	heights = join(tenfold, []confusion{
		{"in feet", foot, "multiply by 0.3048; or the map's metres were compiled as feet"},
		{"in metres, but converted as if from feet", 1 / foot, "divide by 0.3048; or the map's feet were compiled as metres"},
	})
	depths = join(heights, both("fathoms", "metres", fathom, "1.829"))
)

// units are numbers in another unit than the log's.
func (v voice) units() []Mistake {
	type of struct {
		name     string
		p        part
		measured bool
		taken    []confusion
	}
	var parts []of
	switch v.kind {
	case sensor.KindTravel, sensor.KindDisplacement, sensor.KindBodyDisplacement:
		parts = []of{{"distances", distance, false, distances}}
	case sensor.KindSpeed:
		parts = []of{{"speeds", distance, false, speeds}}
	case sensor.KindClearance:
		parts = []of{
			{"altitude and clearance", altitude | clearance, true, heights},
			{"altitude", altitude, false, heights},
			{"clearance", clearance, true, heights},
		}
	case sensor.KindBarometer:
		if v.pressure {
			return nil
		}
		parts = []of{{"altitude", altitude, true, heights}}
	case sensor.KindSounding:
		parts = []of{{"depths", depth, true, depths}}
	}
	var out []Mistake
	for _, o := range parts {
		for _, k := range o.taken {
			m := v.factor(o.name+" "+k.name, o.p, k.factor, o.measured, k.remedy)
			if v.lengths() != "" {
				m.family = v.factorFamily()
			}
			out = append(out, m)
		}
	}
	return out
}
