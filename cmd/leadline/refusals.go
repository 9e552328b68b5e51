package main

import (
	"fmt"
	"sync"

	"leadline/engine/study/replay"
	"leadline/engine/wire"
	leadlinev1 "leadline/proto/leadline/v1"
)

// refusals are what a server refused of what one feed sent. What others entered of
// the vehicle, such as a dispatcher's sighting, is not among them.
type refusals struct {
	mu    sync.Mutex
	count uint64
	first *leadlinev1.Refusal
}

// add notes one.
func (r *refusals) add(refused *leadlinev1.Refusal) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.count++; r.first == nil {
		r.first = refused
	}
}

// own returns how many there are, and words the first; nil if there is none.
func (r *refusals) own() (count uint64, first error) {
	r.mu.Lock()
	defer r.mu.Unlock()
	if r.first == nil {
		return 0, nil
	}
	return r.count, refusalError(r.first)
}

// refusalError words a refusal as replay does.
func refusalError(r *leadlinev1.Refusal) error {
	t, err := wire.Time(r.GetTime())
	if err != nil {
		return fmt.Errorf("a measurement without a time was refused: %s", r.GetDetail())
	}
	return replay.Refusal{Time: t, Sensor: r.GetSensor(), Number: r.GetNumber(), Reason: reasonText(r.GetReason()), Detail: r.GetDetail()}
}
