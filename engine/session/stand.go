package session

import "leadline/engine/sensor"

// stoodS is for how long a gyro's turn while the vehicle stands is gathered before it
// is weighed: over less, that the vehicle is carried and turns (sensor.Stood) would not
// be told from noise.
const stoodS = 1.0

// standStill gathers what the gyro said of its bias in the stretch that has just been
// moved by, and weighs it after stoodS, or once the vehicle goes on.
func (s *Session) standStill() {
	st := &s.state
	more, still := s.motion.Stood()
	if still {
		st.stood = st.stood.Add(more)
	}
	if !(st.stood.Seconds > 0) || still && st.stood.Seconds < stoodS {
		return
	}
	stood := st.stood
	st.stood = sensor.Stood{}
	if l := stood.Likelihood(st.belief.Moved()); l != nil {
		s.weigh(sensor.Event{Time: s.motion.To, Sensor: s.gyro, Measurement: sensor.Standstill{}}, l)
	}
}
