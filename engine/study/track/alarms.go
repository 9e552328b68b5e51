package track

import (
	"strings"

	"leadline/engine/summary"
)

// alarmsOf are the alarms that hold, in words: the kind, the sensor and what part of
// it, with "; " between two.
func alarmsOf(p *summary.Posterior) string {
	var all []string
	if p.LostAlarm {
		all = append(all, "lost")
	}
	for _, a := range p.Alarms {
		words := string(a.Kind)
		for _, more := range []string{a.Key.Sensor, a.Key.Part} {
			if more != "" {
				words += " " + strings.ReplaceAll(more, ";", ",")
			}
		}
		all = append(all, words)
	}
	return strings.Join(all, "; ")
}
