package sweep

import (
	"errors"

	"leadline/engine/sensor"
	"leadline/engine/session"
	"leadline/engine/study/replay"
)

// settled are the events of a run as the session took them, for looking back: in memory,
// or, of more than mostSettled, in a file. The zero value is ready.
type settled struct {
	events []sensor.Event // not in the file yet
	n      int
	file   *replay.Scratch // nil: all are in events
	ends   []int64         // of the file's blocks
	block  int             // that is in read
	read   []sensor.Event
	err    error // the first
}

var _ session.Events = (*settled)(nil)

const (
	mostSettled = 1 << 16
	// ofBlock events are read at a time.
	ofBlock = 1024
)

// add takes events; an error comes from done.
func (s *settled) add(events []sensor.Event) {
	if s.err != nil {
		return
	}
	s.events = append(s.events, events...)
	s.n += len(events)
	if len(s.events) > mostSettled {
		s.spill()
	}
}

// spill writes all whole blocks.
func (s *settled) spill() {
	if s.file == nil {
		if s.file, s.err = replay.NewScratch("measurements for looking back"); s.err != nil {
			return
		}
	}
	whole := len(s.events) / ofBlock * ofBlock
	end := int64(0)
	if len(s.ends) > 0 {
		end = s.ends[len(s.ends)-1]
	}
	for i := 0; i < whole && s.err == nil; i += ofBlock {
		b := session.PackEvents(s.events[i : i+ofBlock])
		_, err := s.file.WriteAt(b, end)
		s.err = s.file.Trouble(err)
		end += int64(len(b))
		s.ends = append(s.ends, end)
	}
	rest := copy(s.events, s.events[whole:])
	clear(s.events[rest:])
	s.events = s.events[:rest]
}

// Len is how many there are.
func (s *settled) Len() int { return s.n }

// Read returns events from a number on.
func (s *settled) Read(from int) ([]sensor.Event, error) {
	if s.err != nil {
		return nil, s.err
	}
	block, before := from/ofBlock, len(s.ends)*ofBlock
	if from >= before {
		return s.events[from-before:], nil
	}
	if s.read == nil || s.block != block {
		begin := int64(0)
		if block > 0 {
			begin = s.ends[block-1]
		}
		b := make([]byte, s.ends[block]-begin)
		if _, err := s.file.ReadAt(b, begin); err != nil {
			return nil, err
		}
		events, err := session.UnpackEvents(b)
		if err == nil && len(events) != ofBlock {
			err = errors.New("it was changed meanwhile")
		}
		if err != nil {
			return nil, err
		}
		s.block, s.read = block, events
	}
	return s.read[from%ofBlock:], nil
}

// drop gives the file back.
func (s *settled) drop() {
	if s.file != nil {
		_ = s.file.Close() // nobody needs it any more
	}
	*s = settled{}
}
