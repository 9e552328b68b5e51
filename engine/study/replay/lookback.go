package replay

import (
	"leadline/engine/drivefile"
	"leadline/engine/sensor"
	"leadline/engine/session"
)

// LookBack looks back over a drive that was run: events are those that Settled was
// given. See session.LookBack.
func LookBack(h drivefile.Header, c session.Config, events []sensor.Event, o session.HindsightOptions) error {
	c.Vehicle, c.Start = h.Vehicle, Start(h.Start)
	return session.LookBack(c, events, o)
}
