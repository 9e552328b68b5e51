package server

import (
	"leadline/engine/sensor"
	"leadline/engine/summary"
)

// told hears what the session has released, and what it has taken back: times
// that were released before. It runs on the owner's goroutine after each
// measurement, in order.
func (o *owner) told(released []*summary.Posterior, withdrawn []sensor.Time) {}

// farewell hears once that the drive has ended, or that its owner stops before
// that, and why. It runs on the owner's goroutine.
func (o *owner) farewell(ended bool, hash, why string) {}
