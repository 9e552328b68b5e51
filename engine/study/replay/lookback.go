package replay

import (
	"leadline/engine/drivefile"
	"leadline/engine/session"
)

// Behind knows of times a lag ago, as a drive is run; see session.Behind.
func Behind(h drivefile.Header, c session.Config, lagS float64, tapeBytes int) (*session.Behind, error) {
	return session.NewBehind(configured(h, c), lagS, tapeBytes)
}

// LookBack looks back over a drive that was run: events are those that Settled was
// given. See session.LookBack.
func LookBack(h drivefile.Header, c session.Config, events session.Events, o session.HindsightOptions) error {
	return session.LookBack(configured(h, c), events, o)
}
