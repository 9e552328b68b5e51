package forecast

import (
	"slices"

	"leadline/engine/sensor"
)

// noiseless reports whether a measurement that a suite has filled in still lacks a
// standard deviation.
func noiseless(m sensor.Measurement) bool {
	switch m := m.(type) {
	case sensor.Travel:
		return m.SigmaM == 0
	case sensor.Turn:
		return m.SigmaRad == 0
	case sensor.Displacement:
		return m.CovM2[0] == 0 || m.CovM2[2] == 0
	case sensor.BodyDisplacement:
		return m.SigmaForwardM == 0 || m.SigmaRightM == 0 || m.SigmaTurnRad == 0
	case sensor.Speed:
		return m.SigmaMPS == 0
	case sensor.HeadingFix:
		return m.SigmaRad == 0
	case sensor.Clearance:
		return m.SigmaM == 0
	case sensor.Sounding:
		return m.SigmaM == 0 || slices.ContainsFunc(m.Beams, func(b sensor.Beam) bool { return b.SigmaM == 0 })
	case sensor.Barometer:
		return m.SigmaM == 0
	case sensor.Range:
		return m.SigmaM == 0
	case sensor.Bearing:
		return m.SigmaRad == 0
	}
	return false
}
