package traffic

import "leadline/engine/sensor"

// A watch has no clock: what time it is follows from what posts say. A post
// whose clock is ahead would carry the road to its own time, and what the others
// hear would then be too late. So what comes more than leadMostS after all else
// is held, until another post comes as far (there was a pause) or it has spoken
// for aloneS while the others are silent (it is alone), and is dropped once one
// goes on where the road is.
const (
	leadMostS = 60
	aloneS    = 10
	maxAhead  = 4096 // with these it has spoken for long enough, too
)

// ahead is what one post says of a time that no other has come near.
type ahead struct{ held []Said }

// lead returns the bearings to be taken now that one has come.
func (w *Watch) lead(s Said) []Said {
	held := w.ahead.held
	if w.newest == 0 || s.Time-w.newest <= leadMostS*second {
		if len(held) > 0 {
			w.drop()
		}
		return []Said{s}
	}
	if len(held) == 0 {
		w.ahead.held = []Said{s}
		return nil
	}
	first, last := held[0], held[len(held)-1]
	near := max(s.Time-last.Time, last.Time-s.Time) <= leadMostS*second
	switch {
	case !near: // neither of them is believed yet
		w.drop()
		w.ahead.held = []Said{s}
		return nil
	case s.Post != first.Post, s.Time-first.Time >= aloneS*second, len(held) >= maxAhead:
		w.ahead.held = nil
		return append(held, s)
	}
	w.ahead.held = append(held, s)
	return nil
}

// drop gives up what is held.
func (w *Watch) drop() {
	w.dropped += len(w.ahead.held)
	w.ahead.held = nil
}

const second = sensor.Time(1e9)
