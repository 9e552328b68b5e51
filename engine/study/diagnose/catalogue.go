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

// voice is a sensor's name and kind, with what is needed of its events.
type voice struct {
	sensor, kind string
	course       bool // speeds with a course
	pressure     bool // barometers that give a pressure
	// sigmaM is the least sigma that heights state, 0 if none does.
	sigmaM float64
	// depthM is the greatest depth of soundings.
	depthM float64
}

// voices lists who speaks, by name and kind.
func voices(events []sensor.Event) []voice {
	var out []voice
	for _, ev := range events {
		v := voice{sensor: ev.Sensor, kind: ev.Measurement.Kind()}
		i, found := slices.BinarySearchFunc(out, v, func(a, b voice) int {
			return cmp.Or(strings.Compare(a.sensor, b.sensor), strings.Compare(a.kind, b.kind))
		})
		if !found {
			out = slices.Insert(out, i, v)
		}
		switch m := ev.Measurement.(type) {
		case sensor.Speed:
			out[i].course = out[i].course || m.HasCourse
		case sensor.Barometer:
			out[i].pressure = out[i].pressure || m.HasPressure
			out[i].states(m.SigmaM)
		case sensor.Clearance:
			out[i].states(m.SigmaM)
		case sensor.Sounding:
			out[i].states(m.SigmaM)
			out[i].depthM = math.Max(out[i].depthM, m.DepthBelowTransducerM+m.TransducerDepthM)
		}
	}
	return out
}

func (v *voice) states(sigmaM float64) {
	if sigmaM > 0 && (v.sigmaM == 0 || sigmaM < v.sigmaM) {
		v.sigmaM = sigmaM
	}
}

// is reports whether a sensor and kind are those of the voice.
func (v voice) is(name, kind string) bool { return kind == v.kind && name == v.sensor }

func (v voice) heights() bool {
	return v.kind == sensor.KindClearance || v.kind == sensor.KindSounding || v.kind == sensor.KindBarometer
}

func (v voice) directed() bool {
	switch v.kind {
	case sensor.KindHeading, sensor.KindBearing, sensor.KindAcousticBearing, sensor.KindDisplacement:
		return true
	case sensor.KindSpeed:
		return v.course
	}
	return false
}

// catalogue lists the usual mistakes that a log may hold, but for those with a
// value to be found (offsets, angles).
func catalogue(vs []voice) []Mistake {
	var out []Mistake
	for _, v := range vs {
		out = append(out, v.signs()...)
		out = append(out, v.units()...)
		out = append(out, v.clocks()...)
	}
	return out
}

func (v voice) factor(name string, p part, f float64, measured bool, remedy string) Mistake {
	m := Mistake{
		Name: name, Sensor: v.sensor, Remedy: remedy, of: v.is,
		mend: func(m sensor.Measurement) sensor.Measurement { return times(m, p, f) },
	}
	ln := kernel.Log(math.Abs(f))
	if f > 0 {
		m.lnFactor = ln
	}
	if measured {
		m.lnScale = func(sensor.Measurement) float64 { return ln }
	}
	return m
}

// signs are axes that point the other way.
func (v voice) signs() []Mistake {
	flip := func(name string, p part) Mistake {
		return v.factor(name, p, -1, false, "reverse it in what writes the log")
	}
	const sign = "give the sensor `sign: -1` in the suite"
	with := func(m Mistake, remedy string) Mistake { m.Remedy = remedy; return m }
	switch v.kind {
	case sensor.KindTurn:
		return []Mistake{with(flip("turn sign reversed", turn), sign)}
	case sensor.KindTravel:
		return []Mistake{with(flip("forward and backward reversed", distance), sign)}
	case sensor.KindSpeed:
		return []Mistake{with(flip("forward and backward reversed", distance), sign)}
	case sensor.KindBodyDisplacement:
		return []Mistake{
			flip("turn sign reversed", turn),
			flip("forward and backward reversed", distance),
			flip("right and left reversed", right),
			flip("right and left reversed, turns too", right|turn),
		}
	case sensor.KindDisplacement:
		swap := Mistake{
			Name: "east and north swapped", Sensor: v.sensor, Remedy: "swap them in what writes the log", of: v.is,
			mend: func(m sensor.Measurement) sensor.Measurement {
				d := m.(sensor.Displacement)
				d.EastM, d.NorthM = d.NorthM, d.EastM
				d.CovM2[0], d.CovM2[2] = d.CovM2[2], d.CovM2[0]
				return d
			},
		}
		return []Mistake{
			flip("east and west reversed", east), flip("north and south reversed", north),
			flip("whole displacement reversed", east|north), swap,
		}
	case sensor.KindSounding:
		return []Mistake{flip("depth sign reversed", depth)}
	case sensor.KindClearance:
		return []Mistake{flip("altitude sign reversed", altitude), flip("clearance sign reversed", clearance), flip("altitude and clearance signs reversed", altitude|clearance)}
	case sensor.KindBarometer:
		return []Mistake{flip("altitude sign reversed", altitude)}
	case sensor.KindFix:
		return []Mistake{{
			Name: "longitude and latitude swapped", Sensor: v.sensor, Remedy: "swap them in what writes the log", of: v.is,
			mend: swapped,
			lnScale: func(m sensor.Measurement) float64 {
				p := m.(sensor.Fix).Position
				return kernel.Log(math.Max(math.Abs(kernel.Cos(p.Lat)), 1e-9) / math.Max(math.Abs(kernel.Cos(p.Lon)), 1e-9))
			},
		}}
	}
	return nil
}

// shiftS is how early or late a clock is tried.
const shiftS = 1.0

// clocks are times that are early or late.
func (v voice) clocks() []Mistake {
	if v.kind == sensor.KindStandstill || v.kind == sensor.KindSighting {
		return nil
	}
	shift := func(name string, s float64) Mistake {
		return Mistake{
			Name: name, Sensor: v.sensor, Value: s, Unit: "s", of: v.is, shift: sensor.Time(s * 1e9),
			Remedy: fmt.Sprintf("add %g to the sensor's `time_offset_s` in the suite", s),
		}
	}
	return []Mistake{shift("times late", shiftS), shift("times early", -shiftS)}
}

// offset is a constant error of heights: byM is what the log's heights are too
// high by.
func (v voice) offset(byM, broadM, sigmaM float64) Mistake {
	return Mistake{
		Name: "vertical datum off", Sensor: v.sensor, Value: byM, Unit: "m", of: v.is,
		Remedy: "take the offset off the heights, or use a map with their datum",
		mend: func(m sensor.Measurement) sensor.Measurement {
			return broaden(raise(m, -byM), broadM, sigmaM)
		},
	}
}

// northOff is directions that count from another north than the true one, byRad
// clockwise from it.
func northOff(name, who, remedy string, of func(sensor, kind string) bool, byRad float64) Mistake {
	return Mistake{
		Name: name, Sensor: who, Value: geo.Deg(byRad), Unit: "deg", of: of, Remedy: remedy,
		mend: func(m sensor.Measurement) sensor.Measurement { return turned(m, byRad) },
	}
}
