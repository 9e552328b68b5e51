package sensor

import (
	"math"

	"leadline/engine/filter"
	"leadline/engine/kernel"
)

// Barometer is the vehicle's own altitude, or a pressure.
type Barometer struct {
	HasPressure bool
	AltitudeM   float64
	PressureHPa float64
	SigmaM      float64
}

// Kind is "barometer".
func (Barometer) Kind() string { return KindBarometer }

// Check reports a reading that no filter could use; pressures reach from the
// top of the formula's range (20 km) to well below sea level.
func (m Barometer) Check(Time) error {
	p := problems{what: KindBarometer}
	if m.HasPressure {
		p.within("pressure_hpa", m.PressureHPa, 54.75, 1200)
	} else {
		p.length("altitude_m", m.AltitudeM)
	}
	p.sigmaM("sigma_m", m.SigmaM)
	return p.err()
}

// The standard atmosphere up to 20 km. Source: ISO 2533:1975: T = T0 - L·h up
// to 11 km and constant above, p by the hydrostatic equation with g and R
// constant over geopotential height h. The molar mass is taken to the six
// figures that give the printed 22632.06 Pa at 11 km (28.96442 gives 0.02 Pa
// less, a millimetre and a half of height).
const (
	isaT0         = 288.15            // K, at sea level
	isaP0HPa      = 1013.25           // at sea level
	isaLapse      = 0.0065            // K/m
	isaR          = 8314.32 / 28.9644 // J/(kg K), dry air: the gas constant over its molar mass
	isaG          = 9.80665           // m/s²
	isaTropopause = 11000.0           // m
)

// StandardPressureHPa returns the pressure of the standard atmosphere at a
// geopotential height (about -5 to 20 km), given the pressure at sea level.
// NaN gives NaN.
func StandardPressureHPa(heightM, seaLevelHPa float64) float64 {
	t := isaT0 - float64(isaLapse*math.Min(heightM, isaTropopause))
	p := seaLevelHPa * kernel.Exp(isaG/(isaR*isaLapse)*kernel.Log(t/isaT0))
	if heightM > isaTropopause {
		p *= kernel.Exp(-isaG * (heightM - isaTropopause) / (isaR * t))
	}
	return p
}

// StandardHeightM is the inverse of StandardPressureHPa: the geopotential
// height of a pressure in the standard atmosphere. Pressures that are not
// positive give NaN. The step from geopotential to geometric height (0.2 m at
// 1 km) is far below what a day's weather does to the pressure and is left
// out.
func StandardHeightM(pressureHPa, seaLevelHPa float64) float64 {
	if !(pressureHPa > 0 && seaLevelHPa > 0) {
		return math.NaN()
	}
	ratio := kernel.Log(pressureHPa / seaLevelHPa)
	h := isaT0 / isaLapse * (1 - kernel.Exp(isaR*isaLapse/isaG*ratio))
	if h <= isaTropopause {
		return h
	}
	t := isaT0 - isaLapse*isaTropopause
	atTropopause := isaG / (isaR * isaLapse) * kernel.Log(t/isaT0)
	return isaTropopause - isaR*t/isaG*(ratio-atTropopause)
}

// likelihood: altitude + down = height of the road + offset + v, with down the
// sensor's mounting below the reference point on the road's surface (negative
// in a vehicle) and the barometer_offset_m of a sensor that describes one. A
// pressure is turned into an altitude by the standard
// atmosphere over the suite's pressure at sea level.
func (m Barometer) likelihood(c *Context, d Sensor) any {
	z := m.AltitudeM
	if m.HasPressure {
		z = StandardHeightM(m.PressureHPa, c.Suite.Environment.SeaLevelPressureHPa)
	}
	l := c.heights(d, z+d.Mounting.DownM, 0, m.SigmaM, d.Mounting.ForwardM, d.Mounting.RightM)
	if d.has(NuisanceBarometerOffset) {
		l.with(c, filter.BarometerOffset, 1)
	}
	return l
}
