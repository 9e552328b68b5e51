// Package session is one vehicle's run: events in, posteriors out.
//
// Events are ordered by time, then sensor, then number. Between two
// consecutive event times lies a segment; the increments that overlap it,
// split linearly in time, move the belief, the measurements at its end weigh
// it, and one posterior says where the vehicle is then. The posterior is a
// function of the set of events: an event that comes late, but within the
// suite's window, goes to its place, and what follows is computed again from
// a snapshot; an older one is refused.
//
// A session is pure: no clock, no I/O, no goroutine. One goroutine owns it.
package session
