package server

import (
	"sync"

	"google.golang.org/protobuf/proto"

	leadlinev1 "leadline/proto/leadline/v1"
)

// maxRecent is how many of a drive's last measurements are kept for those who
// look at it.
const maxRecent = 12

// recent are a drive's last measurements. The owner adds, followers read.
type recent struct {
	mu   sync.Mutex
	ring [maxRecent]*leadlinev1.RecentMeasurement
	next int
}

// add notes a measurement, and the refusal if it was refused. The message must
// not change any more.
func (r *recent) add(m *leadlinev1.SensorMeasurement, refused *leadlinev1.Refusal) {
	if len(m.GetMeasurement().GetSounding().GetBeams()) > 0 {
		m = proto.CloneOf(m)
		m.GetMeasurement().GetSounding().Beams = nil
	}
	r.mu.Lock()
	defer r.mu.Unlock()
	r.ring[r.next] = &leadlinev1.RecentMeasurement{Measurement: m, Refusal: refused}
	r.next = (r.next + 1) % maxRecent
}

// clear lets go of all.
func (r *recent) clear() {
	r.mu.Lock()
	defer r.mu.Unlock()
	clear(r.ring[:])
}

// list returns them, the last one last.
func (r *recent) list() []*leadlinev1.RecentMeasurement {
	r.mu.Lock()
	defer r.mu.Unlock()
	var out []*leadlinev1.RecentMeasurement
	for i := range maxRecent {
		if m := r.ring[(r.next+i)%maxRecent]; m != nil {
			out = append(out, m)
		}
	}
	return out
}
