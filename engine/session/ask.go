package session

import (
	"leadline/engine/geo"
	"leadline/engine/summary"
)

// Region returns the densest part of the plane that holds a fraction of the
// present belief; see summary.Summarizer.Region.
func (s *Session) Region(fraction float64) (*summary.Region, error) { return s.sum.Region(fraction) }

// Inside returns the probability of a polygon under the present belief; see
// summary.Summarizer.Inside.
func (s *Session) Inside(polygon [][]geo.LonLat) (float64, error) { return s.sum.Inside(polygon) }

// Protection returns the protection radius of the present belief at another
// integrity risk than the suite's. An error says what is wrong with the risk.
func (s *Session) Protection(risk float64) (summary.Protection, error) {
	v := s.suite.Vehicle
	sum, err := summary.New(summary.Options{AlertLimitM: v.AlertLimitM, IntegrityRisk: risk, LateralSigmaM: v.LateralSigmaM})
	if err != nil {
		return summary.Protection{}, err
	}
	b := s.state.belief
	b.Read(&s.cloud, s.space, &s.work)
	in := summary.Input{TimeNS: int64(s.state.time), Frame: s.space.Frame(), Belief: b, Cloud: &s.cloud}
	if s.lines != nil {
		in.Lines = s.lines.Lines(b.Level)
	}
	var p summary.Posterior
	if err := sum.Summarize(&p, &in); err != nil {
		return summary.Protection{}, err
	}
	return p.Protection, nil
}
