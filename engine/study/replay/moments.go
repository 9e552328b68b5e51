package replay

import (
	"slices"

	"leadline/engine/sensor"
	"leadline/engine/session"
)

// Moment is a time in a drive: At, or if that is 0 AfterS after its start.
type Moment struct {
	At     sensor.Time `json:"at,omitempty"`
	AfterS float64     `json:"after_s,omitempty"`
}

// moments gives the session away as it is at some times: with all that was
// measured until then, and nothing after it.
type moments struct {
	due  []Moment
	at   []sensor.Time // once the start is known, by time
	give func(at sensor.Time, s *session.Session) error
}

func (m *moments) begin(start sensor.Time) {
	for _, d := range m.due {
		at := d.At
		if at == 0 {
			at = start + sensor.Time(d.AfterS*1e9)
		}
		m.at = append(m.at, at)
	}
	slices.Sort(m.at)
	m.at = slices.Compact(m.at)
}

// pass gives what is before the next event's time; those before the start are
// passed over.
func (m *moments) pass(next sensor.Time, first bool, s *session.Session) error {
	for len(m.at) > 0 && m.at[0] < next {
		if !first {
			if err := m.give(m.at[0], s); err != nil {
				return err
			}
		}
		m.at = m.at[1:]
	}
	return nil
}
