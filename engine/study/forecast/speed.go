package forecast

import (
	"fmt"

	"leadline/engine/sensor"
	"leadline/engine/session"
)

// checkSpeed refuses a speed that the suite says its vehicle does not go: what the
// filter makes of such a drive says nothing of the vehicle. Where the suite does not say
// it, the limit is what a session takes. whole is the suite with its defaults.
func checkSpeed(suite, whole *sensor.Suite, mps float64) error {
	const rounding = 1 + 1e-9
	said, most := suite.Vehicle.MaxSpeedMPS, whole.Vehicle.MaxSpeedMPS
	switch {
	case said > 0 && !(mps <= said*rounding):
		return fmt.Errorf("the speed is %.4g m/s, and the suite's vehicle.max_speed_mps %g: give a lower speed, or raise max_speed_mps in the suite", mps, said)
	case !(mps <= session.TooFast*most*rounding):
		return fmt.Errorf("the speed is %.4g m/s, beyond %d times the %g of a suite without vehicle.max_speed_mps: give a lower speed, or say max_speed_mps in the suite", mps, session.TooFast, most)
	}
	return nil
}
