package session

// A start over a wide plane takes more than a million cells for a while, and up
// to a gigabyte with what is worked out beside them; a minute later a few
// thousand do. From shedFrom cells on, a session that has come down to a part in
// shedShare gives back what it took.
const (
	shedFrom  = 100_000
	shedShare = 16
)

func (s *Session) shed() {
	n := s.state.belief.Cells()
	d := s.desk()
	d.widest = max(d.widest, n)
	if s.widest = max(s.widest, n); s.widest < shedFrom || n > s.widest/shedShare {
		return
	}
	s.Rest()
	s.state.belief = s.state.belief.Clone()
	s.desk().work.Follow(s.state.belief)
	s.widest = n
}
