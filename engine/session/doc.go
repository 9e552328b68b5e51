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
// Increments say since when they speak. A speed speaks for the time since the
// same sensor's speed before, at most hold_s; a standstill for that since the
// one before, at most a second or half of the late window. What reaches back
// before the window is refused as a whole. What several sensors say is combined
// for each stretch between two beginnings or ends, and a stretch that nobody
// measures is a gap, however other measurements cut it.
//
// A sensor that leads all others by more than a minute is held back until another
// one comes as far, or it is alone; see lead.go. What roads cannot be followed
// over, in a long silence, is put on them anew and counted as restarted; see
// spread.go.
//
// A session is pure: no clock, no I/O, no goroutine. One goroutine owns it.
package session
